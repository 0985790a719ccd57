#include "aureole/scenario/scenario.hpp"

#include "aureole/base/error.hpp"
#include "aureole/scenario/formula.hpp"

#include <fmt/format.h>
#include <fmt/ranges.h>
#include <toml++/toml.h>

#include <algorithm>
#include <cmath>
#include <fstream>
#include <set>
#include <sstream>

namespace aureole::scenario {

namespace {

const std::vector<std::string> formula_variables{"R", "z", "x", "y", "r"};

std::string type_text(const toml::node& node) {
    std::ostringstream text;
    text << node.type();
    return text.str();
}

/// The node as it would be typed, for messages.
std::string node_text(const toml::node& node) {
    if (const auto* text = node.as_string()) {
        return fmt::format("\"{}\"", text->get());
    }
    std::ostringstream stream;
    stream << toml::node_view<const toml::node>(node);
    std::string text = stream.str();
    return text.size() > 60 ? text.substr(0, 57) + "..." : text;
}

bool is_plain_key(std::string_view key) {
    return !key.empty() && std::all_of(key.begin(), key.end(), [](char c) {
        return (c >= 'a' && c <= 'z') || (c >= 'A' && c <= 'Z') || (c >= '0' && c <= '9') || c == '_' ||
               c == '-';
    });
}

double in_range(const Key& key, double value, const std::string& found) {
    if (std::isfinite(value) && value >= key.least && value <= key.greatest) {
        return value;
    }
    const auto bound = [&](double b) {
        return key.dimension == dimension::none ? fmt::format("{:g}", b) : format_quantity(b, key.dimension);
    };
    const bool above_zero = key.least > 0 && key.least < 1e-250;
    std::string expected = above_zero                 ? "more than 0"
                           : std::isfinite(key.least) ? "at least " + bound(key.least)
                                                      : "";
    if (std::isfinite(key.greatest)) {
        expected += (expected.empty() ? "at most " : " and at most ") + bound(key.greatest);
    }
    throw Error(ErrorKind::scenario,
                fmt::format("found {}, expected {}", found, expected.empty() ? "a finite number" : expected));
}

std::string one_of(const Key& key, const std::string& text) {
    if (std::find(key.choices.begin(), key.choices.end(), text) == key.choices.end()) {
        throw Error(ErrorKind::scenario,
                    fmt::format("found \"{}\", expected one of {}", text, fmt::join(key.choices, ", ")));
    }
    return text;
}

[[noreturn]] void wrong_type(const toml::node& node, std::string_view expected) {
    throw Error(ErrorKind::scenario,
                fmt::format("found {} ({}), expected {}", node_text(node), type_text(node), expected));
}

Value read_value(const Key& key, const toml::node& node);

std::string text_of(const toml::node& node, std::string_view expected) {
    if (const auto* text = node.as_string()) {
        return text->get();
    }
    wrong_type(node, expected);
}

double quantity_of(const Key& key, const toml::node& node) {
    if (key.dimension == dimension::none) {
        if (node.is_number()) {
            return in_range(key, *node.value<double>(), node_text(node));
        }
        wrong_type(node, "a number");
    }
    const auto describes = describe(key.dimension);
    const std::string text =
        text_of(node, fmt::format("{} such as \"{}\"", describes.name, describes.example));
    return in_range(key, to_cgs(text, key.dimension), fmt::format("\"{}\"", text));
}

template <class Read> auto list_of(const toml::node& node, const Read& read, std::string_view expected) {
    std::vector<decltype(read(node))> values;
    if (const auto* array = node.as_array()) {
        for (const toml::node& item : *array) {
            values.push_back(read(item));
        }
    } else if (node.is_table()) {
        wrong_type(node, expected);
    } else {
        values.push_back(read(node));
    }
    return values;
}

/// { from = "1 GHz", to = "10 GHz", n = 5, spacing = "log" | "linear" }
std::vector<double> range_of(const Key& key, const toml::table& table) {
    for (const auto& [name, node] : table) {
        if (name != "from" && name != "to" && name != "n" && name != "spacing") {
            throw Error(ErrorKind::scenario,
                        fmt::format("found \"{}\" in a range, expected from, to, n and spacing", name.str()));
        }
    }
    const auto* from = table.get("from");
    const auto* to = table.get("to");
    const auto n = table["n"].value<std::int64_t>();
    const auto spacing = table["spacing"].value_or<std::string>("log");
    if (from == nullptr || to == nullptr || !n || *n < 2 || *n > 10000 ||
        (spacing != "log" && spacing != "linear")) {
        throw Error(
            ErrorKind::scenario,
            "found an incomplete range, expected { from = \"..\", to = \"..\", n = 2 to 10000, spacing = "
            "\"log\" or \"linear\" }");
    }
    const double first = quantity_of(key, *from);
    const double last = quantity_of(key, *to);
    std::vector<double> values;
    for (std::int64_t i = 0; i < *n; ++i) {
        const double t = static_cast<double>(i) / static_cast<double>(*n - 1);
        values.push_back(i == *n - 1        ? last
                         : spacing == "log" ? first * std::pow(last / first, t)
                                            : first + (last - first) * t);
    }
    return values;
}

Value read_value(const Key& key, const toml::node& node) {
    switch (key.kind) {
    case Kind::quantity:
        return quantity_of(key, node);
    case Kind::number:
        if (!node.is_number()) {
            wrong_type(node, "a number");
        }
        return in_range(key, *node.value<double>(), node_text(node));
    case Kind::integer:
        if (!node.is_integer()) {
            wrong_type(node, "a whole number");
        }
        return static_cast<long>(
            in_range(key, static_cast<double>(*node.value<std::int64_t>()), node_text(node)));
    case Kind::boolean:
        if (!node.is_boolean()) {
            wrong_type(node, "true or false");
        }
        return *node.value<bool>();
    case Kind::choice:
        return one_of(key, text_of(node, fmt::format("one of {}", fmt::join(key.choices, ", "))));
    case Kind::formula: {
        if (node.is_number()) {
            return node_text(node);
        }
        const std::string text = text_of(node, "a formula in quotes");
        if (!text.empty()) {
            Formula(text, formula_variables);
        }
        return text;
    }
    case Kind::quantity_list: {
        if (const auto* table = node.as_table()) {
            return range_of(key, *table);
        }
        auto values = list_of(
            node, [&](const toml::node& item) { return quantity_of(key, item); }, "a list");
        for (std::size_t i = 1; i < values.size(); ++i) {
            if (!(values[i] > values[i - 1])) {
                throw Error(ErrorKind::scenario, fmt::format("found {} after {}, expected rising values",
                                                             format_quantity(values[i], key.dimension),
                                                             format_quantity(values[i - 1], key.dimension)));
            }
        }
        return values;
    }
    case Kind::choice_list:
        return list_of(
            node, [&](const toml::node& item) { return one_of(key, text_of(item, "a text")); },
            "a list of texts");
    case Kind::text_list:
        return list_of(
            node, [&](const toml::node& item) { return text_of(item, "a text"); }, "a list of texts");
    default:
        return text_of(node, "a text");
    }
}

/// A default of the table, or the value of an override that stands without quotes.
Value read_typed(const Key& key, const std::string& typed) {
    const bool is_text = key.kind == Kind::text || key.kind == Kind::choice || key.kind == Kind::formula ||
                         key.kind == Kind::path ||
                         (key.kind == Kind::quantity && key.dimension != dimension::none);
    if (is_text) {
        return read_value(key, toml::value<std::string>(typed));
    }
    toml::table parsed;
    try {
        parsed = toml::parse("v = " + typed);
    } catch (const toml::parse_error&) {
        return read_value(
            key, toml::value<std::string>(typed)); // lists of one, or an error that names what was found
    }
    return read_value(key, *parsed.get("v"));
}

} // namespace

/// Collects values and problems.
struct Reader {
    Scenario scenario;
    std::string name;
    std::vector<std::string> problems;

    explicit Reader(const std::filesystem::path& file) : name(file.string()) { scenario.file_ = file; }

    void problem(long line, std::string_view key, std::string_view what) {
        problems.push_back(line > 0 ? fmt::format("{}:{}: {}: {}", name, line, key, what)
                                    : fmt::format("{}: {}: {}", name, key, what));
    }

    void read_table(const toml::table& table, const std::string& prefix) {
        for (const auto& [key_name, node] : table) {
            const std::string path =
                prefix.empty() ? std::string(key_name.str()) : prefix + "." + std::string(key_name.str());
            const auto line = static_cast<long>(key_name.source().begin.line);
            if (const Key* key = is_plain_key(key_name.str()) ? find_key(path) : nullptr) {
                try {
                    scenario.entries_[path] = {read_value(*key, node), true, line};
                } catch (const Error& error) {
                    problem(line, path, error.what());
                }
            } else if (const auto* inner = node.as_table(); inner != nullptr && is_prefix(path)) {
                read_table(*inner, path);
            } else {
                problem(line, path, fmt::format("unknown key; the nearest is {}", nearest_key(path)));
            }
        }
    }

    static bool is_prefix(const std::string& path) {
        const auto same_start = [&](const Key& key) {
            std::size_t p = 0;
            std::size_t k = 0;
            while (p < path.size() && k < key.path.size()) {
                if (key.path.compare(k, 6, "<name>") == 0) {
                    while (p < path.size() && path[p] != '.') {
                        ++p;
                    }
                    k += 6;
                } else if (path[p] == key.path[k]) {
                    ++p;
                    ++k;
                } else {
                    return false;
                }
            }
            return p == path.size() && k < key.path.size() && key.path[k] == '.';
        };
        return std::any_of(keys().begin(), keys().end(), same_start);
    }

    void override_with(const std::string& text) {
        const auto equals = text.find('=');
        if (equals == std::string::npos || equals == 0) {
            problems.push_back(fmt::format("--set: found \"{}\", expected KEY=VALUE", text));
            return;
        }
        const auto trimmed = [](std::string part) {
            part.erase(0, part.find_first_not_of(" \t"));
            part.erase(part.find_last_not_of(" \t") + 1);
            return part;
        };
        const std::string path = trimmed(text.substr(0, equals));
        std::string value = trimmed(text.substr(equals + 1));
        const Key* key = find_key(path);
        if (key == nullptr) {
            problems.push_back(
                fmt::format("--set {}: unknown key; the nearest is {}", path, nearest_key(path)));
            return;
        }
        if (value.size() > 1 && value.front() == '"' && value.back() == '"') {
            value = value.substr(1, value.size() - 2);
        }
        try {
            scenario.entries_[path] = {read_typed(*key, value), true, 0};
        } catch (const Error& error) {
            problems.push_back(fmt::format("--set {}: {}", path, error.what()));
        }
    }

    void fill_defaults() {
        for (const Key& key : keys()) {
            if (key.otherwise.empty()) {
                continue;
            }
            const auto place = key.path.find("<name>");
            if (place == std::string::npos) {
                fill(key, key.path);
                continue;
            }
            for (const std::string& chosen : scenario.names(key.path.substr(0, place - 1))) {
                fill(key, key.path.substr(0, place) + chosen + key.path.substr(place + 6));
            }
        }
    }
    void fill(const Key& key, const std::string& path) {
        if (!scenario.has(path)) {
            scenario.entries_[path] = {read_typed(key, key.otherwise), false, 0};
        }
    }

    /// What keys need of one another.
    void check_together() {
        const std::string ending = ".profile";
        for (const auto& [path, entry] : scenario.entries_) {
            if (path.size() > ending.size() && path.ends_with(ending) &&
                std::get<std::string>(entry.value) == "formula") {
                const std::string formula = path.substr(0, path.size() - ending.size()) + ".formula";
                if (!scenario.has(formula) || scenario.text(formula).empty()) {
                    problem(
                        entry.line, path,
                        fmt::format("found \"formula\" without {}, expected an expression there", formula));
                }
            }
        }
        if (problems.empty() && scenario.quantities("gamma.band_edges").size() == 1) {
            problem(0, "gamma.band_edges", "found one edge, expected at least two");
        }
        if (problems.empty() && !scenario.quantities("gamma.band_edges").empty() &&
            !scenario.quantities("gamma.energies").empty()) {
            problem(0, "gamma.band_edges", "found beside gamma.energies, expected one of the two");
        }
        const bool per_beam = problems.empty() && scenario.text("radio.unit") == "Jy/beam";
        if (per_beam && !scenario.quantities("radio.frequencies").empty() &&
            !(scenario.quantity("radio.beam_major") > 0)) {
            problem(0, "radio.unit",
                    "found \"Jy/beam\" without a beam, expected radio.beam_major such as \"10 arcsec\", or "
                    "another unit");
        }
    }

    Scenario finish() {
        if (!problems.empty()) {
            throw Error(ErrorKind::scenario, fmt::format("{}", fmt::join(problems, "\n")));
        }
        return std::move(scenario);
    }
};

bool Scenario::has(std::string_view key) const {
    return entries_.find(key) != entries_.end();
}

bool Scenario::is_set(std::string_view key) const {
    const auto found = entries_.find(key);
    return found != entries_.end() && found->second.given;
}

const Value& Scenario::value(std::string_view key) const {
    const auto found = entries_.find(key);
    if (found == entries_.end()) {
        throw Error(ErrorKind::scenario,
                    fmt::format("{}: {}: missing, expected a value", file_.string(), key));
    }
    return found->second.value;
}

double Scenario::quantity(std::string_view key) const {
    return std::get<double>(value(key));
}
double Scenario::number(std::string_view key) const {
    return std::get<double>(value(key));
}
long Scenario::integer(std::string_view key) const {
    return std::get<long>(value(key));
}
bool Scenario::boolean(std::string_view key) const {
    return std::get<bool>(value(key));
}
std::string Scenario::text(std::string_view key) const {
    return has(key) ? std::get<std::string>(value(key)) : std::string();
}
std::vector<double> Scenario::quantities(std::string_view key) const {
    return std::get<std::vector<double>>(value(key));
}

std::vector<std::string> Scenario::texts(std::string_view key) const {
    return std::get<std::vector<std::string>>(value(key));
}

std::filesystem::path Scenario::path(std::string_view key) const {
    const std::string found = text(key);
    if (found.empty()) {
        return {};
    }
    return (file_.parent_path() / found).lexically_normal();
}

ProfileSpec Scenario::profile(const std::string& prefix) const {
    const Key& kinds = *find_key(prefix + ".profile");
    const std::string kind = text(prefix + ".profile");
    const auto place = std::find(kinds.choices.begin(), kinds.choices.end(), kind) - kinds.choices.begin();
    ProfileSpec profile;
    profile.kind = static_cast<ProfileKind>(place);
    profile.value = quantity(prefix + ".value");
    profile.radius = quantity(prefix + ".radius");
    profile.height = quantity(prefix + ".height");
    profile.core = quantity(prefix + ".core");
    profile.slope = number(prefix + ".slope");
    profile.flare = quantity(prefix + ".flare");
    profile.formula = text(prefix + ".formula");
    profile.key = prefix;
    return profile;
}

std::vector<std::string> Scenario::names(const std::string& prefix) const {
    std::set<std::string> found;
    for (const auto& [path, entry] : entries_) {
        if (path.starts_with(prefix + ".")) {
            const std::string rest = path.substr(prefix.size() + 1);
            found.insert(rest.substr(0, rest.find('.')));
        }
    }
    return {found.begin(), found.end()};
}

Scenario
parse(std::string_view text, const std::filesystem::path& name, std::span<const std::string> overrides) {
    Reader reader(name);
    toml::table table;
    try {
        table = toml::parse(text, reader.name);
    } catch (const toml::parse_error& error) {
        throw Error(ErrorKind::scenario, fmt::format("{}:{}:{}: {}", reader.name, error.source().begin.line,
                                                     error.source().begin.column, error.description()));
    }
    reader.read_table(table, "");
    for (const std::string& text_of_override : overrides) {
        reader.override_with(text_of_override);
    }
    reader.fill_defaults();
    reader.check_together();
    return reader.finish();
}

Scenario load(const std::filesystem::path& file, std::span<const std::string> overrides) {
    std::error_code failure;
    if (std::filesystem::is_directory(file, failure)) {
        throw Error(ErrorKind::scenario,
                    fmt::format("{}: found a folder, expected a scenario file", file.string()));
    }
    std::ifstream stream(file, std::ios::binary);
    if (!stream) {
        throw Error(ErrorKind::scenario,
                    fmt::format("{}: not found or not readable, expected a scenario file", file.string()));
    }
    std::ostringstream text;
    text << stream.rdbuf();
    return parse(text.str(), file, overrides);
}

namespace {

std::string toml_string(const std::string& text) {
    std::ostringstream stream;
    stream << toml::value<std::string>(text);
    return stream.str();
}

std::string toml_number(double number) {
    const std::string text = fmt::format("{}", number);
    return text.find_first_of(".en") == std::string::npos ? text + ".0" : text;
}

std::string toml_value(const Key& key, const Value& value) {
    const auto quantity = [&](double cgs) {
        return key.dimension == dimension::none ? toml_number(cgs)
                                                : toml_string(format_quantity(cgs, key.dimension));
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
        return toml_string(*text);
    }
    std::vector<std::string> items;
    if (const auto* numbers = std::get_if<std::vector<double>>(&value)) {
        std::transform(numbers->begin(), numbers->end(), std::back_inserter(items), quantity);
    } else {
        const auto& texts = std::get<std::vector<std::string>>(value);
        std::transform(texts.begin(), texts.end(), std::back_inserter(items), toml_string);
    }
    return fmt::format("[{}]", fmt::join(items, ", "));
}

} // namespace

std::string effective_toml(const Scenario& scenario) {
    std::string text = "# The whole scenario of a run, defaults included.\n";
    for (const auto& [path, entry] : scenario.entries()) {
        Value value = entry.value;
        if (find_key(path)->kind == Kind::path && !std::get<std::string>(value).empty()) {
            value = std::filesystem::absolute(scenario.path(path)).lexically_normal().string();
        }
        text += fmt::format("{} = {}\n", path, toml_value(*find_key(path), value));
    }
    return text;
}

} // namespace aureole::scenario
