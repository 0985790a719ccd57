#include "scenario/read_value.hpp"

#include "aureole/scenario/scenario.hpp"

#include <fmt/format.h>
#include <fmt/ranges.h>

#include <algorithm>
#include <iterator>

namespace aureole::scenario {

namespace {

std::string number_text(double number) {
    const std::string text = fmt::format("{}", number);
    return text.find_first_of(".e") == std::string::npos ? text + ".0" : text;
}

std::string value_text(const Key& key, const Value& value) {
    const auto quantity = [&](double cgs) {
        return key.dimension == dimension::none ? number_text(cgs)
                                                : in_quotes(format_quantity(cgs, key.dimension));
    };
    if (const auto* real = std::get_if<double>(&value)) {
        return quantity(*real);
    }
    if (const auto* whole = std::get_if<long>(&value)) {
        return fmt::format("{}", *whole);
    }
    if (const auto* flag = std::get_if<bool>(&value)) {
        return *flag ? "true" : "false";
    }
    if (const auto* text = std::get_if<std::string>(&value)) {
        return in_quotes(*text);
    }
    std::vector<std::string> items;
    if (const auto* numbers = std::get_if<std::vector<double>>(&value)) {
        std::transform(numbers->begin(), numbers->end(), std::back_inserter(items), quantity);
    } else {
        const auto& texts = std::get<std::vector<std::string>>(value);
        std::transform(texts.begin(), texts.end(), std::back_inserter(items), in_quotes);
    }
    return fmt::format("[{}]", fmt::join(items, ", "));
}

/// Such a default means "or what input.grid holds".
bool gives_way(const Key& key, const Scenario::Entry& entry) {
    const bool of_file = std::find(key.choices.begin(), key.choices.end(), "file") != key.choices.end() &&
                         !key.path.starts_with("transport."); // a wind is never taken unasked
    return !entry.given && of_file && entry.value != Value(std::string("transport"));
}

struct Line {
    std::ptrdiff_t rank; ///< place of the key in the table of keys
    std::string text;
};

} // namespace

std::string effective_toml(const Scenario& scenario) {
    std::map<std::string, std::vector<Line>> tables;
    for (const auto& [path, entry] : scenario.entries()) {
        const Key& key = *find_key(path);
        Value value = entry.value;
        if (key.kind == Kind::path && !std::get<std::string>(value).empty()) {
            value = std::filesystem::absolute(scenario.path(path)).lexically_normal().string();
        }
        const std::size_t dot = path.rfind('.');
        const bool comment = gives_way(key, entry);
        tables[path.substr(0, dot)].push_back(
            {&key - keys().data(),
             fmt::format("{}{} = {}{}", comment ? "# " : "", path.substr(dot + 1), value_text(key, value),
                         comment ? " unless input.grid has it" : "")});
    }
    std::vector<std::pair<std::string, std::vector<Line>>> ordered;
    for (auto& [name, lines] : tables) {
        std::sort(lines.begin(), lines.end(), [](const Line& a, const Line& b) { return a.rank < b.rank; });
        ordered.emplace_back(name, std::move(lines));
    }
    std::stable_sort(ordered.begin(), ordered.end(), [](const auto& a, const auto& b) {
        return a.second.front().rank < b.second.front().rank;
    });
    std::string text = "# The whole scenario of a run, defaults included.\n";
    for (const auto& [name, lines] : ordered) {
        text += fmt::format("\n[{}]\n", name);
        for (const Line& line : lines) {
            text += line.text + "\n";
        }
    }
    return text;
}

} // namespace aureole::scenario
