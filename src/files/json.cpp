#include "aureole/files/json.hpp"

#include <fmt/format.h>

#include <cmath>

namespace aureole::files {

namespace {

/// Length of the UTF-8 sequence at `place`, or 0 where there is none (RFC 3629: no overlong forms, no
/// surrogates, nothing above U+10FFFF).
std::size_t utf8_length(const std::string& text, std::size_t place) {
    const auto byte = [&](std::size_t i) { return static_cast<unsigned char>(text[i]); };
    const unsigned char first = byte(place);
    const std::size_t length = first < 0x80         ? 1
                               : (first >> 5) == 6  ? 2
                               : (first >> 4) == 14 ? 3
                               : (first >> 3) == 30 ? 4
                                                    : 0;
    if (length == 0 || place + length > text.size()) {
        return 0;
    }
    for (std::size_t i = 1; i < length; ++i) {
        if ((byte(place + i) >> 6) != 2) {
            return 0;
        }
    }
    const unsigned char second = length > 1 ? byte(place + 1) : 0;
    const bool overlong = first == 0xc0 || first == 0xc1 || (first == 0xe0 && second < 0xa0) ||
                          (first == 0xf0 && second < 0x90);
    const bool surrogate = first == 0xed && second >= 0xa0;
    const bool beyond = first > 0xf4 || (first == 0xf4 && second >= 0x90);
    if (overlong || surrogate || beyond) {
        return 0;
    }
    return length;
}

std::string quoted(const std::string& text) {
    std::string out = "\"";
    for (std::size_t i = 0; i < text.size();) {
        const std::size_t length = utf8_length(text, i);
        const char c = text[i];
        if (length == 0) {
            out += "\\ufffd";
            ++i;
            continue;
        }
        if (c == '"' || c == '\\') {
            out += '\\';
            out += c;
        } else if (static_cast<unsigned char>(c) < 0x20) {
            out += fmt::format("\\u{:04x}", static_cast<unsigned>(c));
        } else {
            out += text.substr(i, length);
        }
        i += length;
    }
    return out + '"';
}

} // namespace

std::string Json::text() const {
    std::string out;
    append(out, 0);
    return out + '\n';
}

void Json::append(std::string& out, int level) const {
    const std::string indent(static_cast<std::size_t>(2 * (level + 1)), ' ');
    const std::string close(static_cast<std::size_t>(2 * level), ' ');
    if (const auto* real = std::get_if<double>(&value_)) {
        out += std::isfinite(*real) ? fmt::format("{}", *real) : "null";
    } else if (const auto* whole = std::get_if<long>(&value_)) {
        out += fmt::format("{}", *whole);
    } else if (const auto* flag = std::get_if<bool>(&value_)) {
        out += *flag ? "true" : "false";
    } else if (const auto* text = std::get_if<std::string>(&value_)) {
        out += quoted(*text);
    } else if (const auto* array = std::get_if<Array>(&value_)) {
        out += array->empty() ? "[]" : "[\n";
        for (std::size_t i = 0; i < array->size(); ++i) {
            out += indent;
            (*array)[i].append(out, level + 1);
            out += i + 1 < array->size() ? ",\n" : "\n" + close + "]";
        }
    } else if (const auto* object = std::get_if<Object>(&value_)) {
        out += object->empty() ? "{}" : "{\n";
        for (std::size_t i = 0; i < object->size(); ++i) {
            out += indent + quoted((*object)[i].first) + ": ";
            (*object)[i].second.append(out, level + 1);
            out += i + 1 < object->size() ? ",\n" : "\n" + close + "}";
        }
    } else {
        out += "null";
    }
}

} // namespace aureole::files
