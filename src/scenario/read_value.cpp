#include "scenario/read_value.hpp"

#include "scenario/key_text.hpp"

#include "aureole/base/error.hpp"
#include "aureole/scenario/formula.hpp"

#include <fmt/format.h>
#include <fmt/ranges.h>

#include <algorithm>
#include <cmath>
#include <locale>
#include <sstream>

namespace aureole::scenario {

namespace {

const std::vector<std::string> formula_variables{"R", "z", "x", "y", "r"};

template <class Printable> std::string printed(const Printable& value) {
    std::ostringstream stream;
    stream.imbue(std::locale::classic());
    stream << value;
    return stream.str();
}

[[noreturn]] void refuse(std::string_view found, std::string_view expected) {
    throw Error(ErrorKind::scenario, fmt::format("found {}, expected {}", found, expected));
}

[[noreturn]] void wrong_type(const toml::node& node, std::string_view expected) {
    if (node.is_table()) {
        refuse("a table", expected);
    }
    refuse(fmt::format("{} ({})", node_text(node), printed(node.type())), expected);
}

double in_range(const Key& key, double value, const std::string& found) {
    if (!std::isfinite(value)) {
        refuse(found, "a finite number");
    }
    if (!(value >= key.least && value <= key.greatest)) {
        refuse(found, range_text(key));
    }
    return value;
}

std::string one_of(const Key& key, const std::string& text) {
    if (std::find(key.choices.begin(), key.choices.end(), text) == key.choices.end()) {
        refuse(in_quotes(text), fmt::format("one of {}", fmt::join(key.choices, ", ")));
    }
    return text;
}

const std::string& text_of(const toml::node& node, std::string_view expected) {
    if (const auto* text = node.as_string()) {
        return text->get();
    }
    wrong_type(node, expected);
}

/// Node::value<double>() is empty for whole numbers that a double cannot hold.
double number_of(const toml::node& node) {
    if (const auto* whole = node.as_integer()) {
        return static_cast<double>(whole->get());
    }
    if (const auto* real = node.as_floating_point()) {
        return real->get();
    }
    wrong_type(node, "a number");
}

double quantity_of(const Key& key, const toml::node& node) {
    if (key.dimension == dimension::none) {
        return in_range(key, number_of(node), node_text(node));
    }
    const auto words = describe(key.dimension);
    const std::string& text = text_of(node, fmt::format("{} such as \"{}\"", words.name, words.example));
    return in_range(key, to_cgs(text, key.dimension), in_quotes(text));
}

template <class Read> auto list_of(const toml::node& node, const Read& read) {
    std::vector<std::decay_t<decltype(read(node))>> values;
    if (const auto* array = node.as_array()) {
        for (const toml::node& item : *array) {
            values.push_back(read(item));
        }
    } else {
        values.push_back(read(node));
    }
    return values;
}

/// { from = "1 GHz", to = "10 GHz", n = 5, spacing = "log" | "linear" }
std::vector<double> range_of(const Key& key, const toml::table& table) {
    constexpr std::string_view form =
        "{ from = \"..\", to = \"..\", n = 2 to 10000, spacing = \"log\" or \"linear\" }";
    for (const auto& [name, node] : table) {
        if (name != "from" && name != "to" && name != "n" && name != "spacing") {
            refuse(fmt::format("{} in a range", in_quotes(name.str())), form);
        }
    }
    const auto* from = table.get("from");
    const auto* to = table.get("to");
    const auto* n = table.get_as<std::int64_t>("n");
    const bool says_spacing = table.contains("spacing");
    const auto* said = table.get_as<std::string>("spacing");
    const std::string spacing = said != nullptr ? said->get() : "log";
    if (from == nullptr || to == nullptr || n == nullptr || n->get() < 2 || n->get() > 10000 ||
        (says_spacing && said == nullptr) || (spacing != "log" && spacing != "linear")) {
        refuse("another range", form);
    }
    const double first = quantity_of(key, *from);
    const double last = quantity_of(key, *to);
    if (spacing == "log" && !(first > 0)) {
        refuse(node_text(*from), "more than 0 where the spacing is \"log\"");
    }
    std::vector<double> values;
    for (std::int64_t i = 0; i < n->get(); ++i) {
        const double t = static_cast<double>(i) / static_cast<double>(n->get() - 1);
        values.push_back(i == n->get() - 1  ? last
                         : spacing == "log" ? first * std::pow(last / first, t)
                                            : first + (last - first) * t);
    }
    return values;
}

std::vector<double> quantities_of(const Key& key, const toml::node& node) {
    const auto* table = node.as_table();
    auto values = table != nullptr
                      ? range_of(key, *table)
                      : list_of(node, [&](const toml::node& item) { return quantity_of(key, item); });
    for (std::size_t i = 1; i < values.size(); ++i) {
        if (!(values[i] > values[i - 1])) {
            refuse(fmt::format("{} after {}", bound_text(key, values[i]), bound_text(key, values[i - 1])),
                   "rising values");
        }
    }
    return values;
}

std::string formula_of(const toml::node& node) {
    const std::string text = node.is_number() ? printed(toml::node_view<const toml::node>(node))
                                              : text_of(node, "a formula in quotes");
    if (!text.empty()) {
        Formula(text, formula_variables);
    }
    return text;
}

/// The value that stands in "v = typed"; nothing where that is no TOML.
std::optional<toml::table> as_toml(std::string_view typed) {
    try {
        toml::table table = toml::parse(fmt::format("v = {}", typed));
        return table.size() == 1 ? std::optional(std::move(table)) : std::nullopt;
    } catch (const toml::parse_error&) {
        return std::nullopt;
    }
}

/// "1 GHz, 6 GHz" as a list of texts.
toml::array split(std::string_view typed) {
    toml::array items;
    while (!typed.empty()) {
        std::string_view item = typed.substr(0, typed.find(','));
        typed.remove_prefix(std::min(typed.size(), item.size() + 1));
        item.remove_prefix(std::min(item.size(), item.find_first_not_of(" \t")));
        item = item.substr(0, item.find_last_not_of(" \t") + 1);
        items.push_back(std::string(item));
    }
    return items;
}

bool is_text(const Key& key) {
    switch (key.kind) {
    case Kind::text:
    case Kind::choice:
    case Kind::formula:
    case Kind::path:
        return true;
    case Kind::quantity:
        return !(key.dimension == dimension::none);
    default:
        return false;
    }
}

bool is_list(const Key& key) {
    return key.kind == Kind::quantity_list || key.kind == Kind::number_list ||
           key.kind == Kind::choice_list || key.kind == Kind::text_list;
}

} // namespace

std::string in_quotes(std::string_view text) {
    std::string quoted = "\"";
    for (const char c : text) {
        const auto code = static_cast<unsigned char>(c);
        if (c == '"' || c == '\\') {
            quoted += '\\';
            quoted += c;
        } else if (code < 0x20 || code == 0x7F) {
            quoted += fmt::format("\\u{:04X}", code);
        } else {
            quoted += c;
        }
    }
    return quoted + "\"";
}

std::string node_text(const toml::node& node) {
    const auto* string = node.as_string();
    const std::string text =
        string != nullptr ? in_quotes(string->get()) : printed(toml::node_view<const toml::node>(node));
    constexpr std::size_t longest = 60;
    std::size_t end = longest;
    while (end < text.size() && end > 0 && (static_cast<unsigned char>(text[end]) & 0xC0) == 0x80) {
        --end; // not inside a UTF-8 character
    }
    return text.size() > longest ? text.substr(0, end) + "..." : text;
}

Value read_value(const Key& key, const toml::node& node) {
    switch (key.kind) {
    case Kind::quantity:
        return quantity_of(key, node);
    case Kind::number:
        return in_range(key, number_of(node), node_text(node));
    case Kind::integer:
        if (!node.is_integer()) {
            wrong_type(node, "a whole number");
        }
        in_range(key, number_of(node), node_text(node));
        return static_cast<long>(node.as_integer()->get());
    case Kind::boolean:
        if (!node.is_boolean()) {
            wrong_type(node, "true or false");
        }
        return node.as_boolean()->get();
    case Kind::choice:
        return one_of(key, text_of(node, fmt::format("one of {}", fmt::join(key.choices, ", "))));
    case Kind::formula:
        return formula_of(node);
    case Kind::quantity_list:
        return quantities_of(key, node);
    case Kind::number_list:
        return list_of(
            node, [&](const toml::node& item) { return in_range(key, number_of(item), node_text(item)); });
    case Kind::choice_list:
        return list_of(node, [&](const toml::node& item) { return one_of(key, text_of(item, "a text")); });
    case Kind::text_list:
        return list_of(node, [&](const toml::node& item) { return text_of(item, "a list of texts"); });
    case Kind::text:
    case Kind::path:
        break;
    }
    return text_of(node, "a text");
}

Value read_typed(const Key& key, const std::string& typed) {
    const bool has_quotes = typed.starts_with('"') || typed.starts_with('\'');
    if (!is_text(key) || has_quotes) {
        if (const auto table = as_toml(typed)) {
            return read_value(key, *table->get("v"));
        }
        if (has_quotes) {
            refuse(typed, "a value, or a text between quotes");
        }
    }
    if (!as_toml(in_quotes(typed))) {
        refuse("text that is not UTF-8", "UTF-8");
    }
    if (key.kind == Kind::number_list) {
        if (const auto table = as_toml("[" + typed + "]")) {
            return read_value(key, *table->get("v"));
        }
    }
    if (is_list(key) && !typed.starts_with('[') && !typed.starts_with('{')) {
        return read_value(key, split(typed));
    }
    return read_value(key, toml::value<std::string>(typed));
}

} // namespace aureole::scenario
