#include "scenario/read_value.hpp"

#include "aureole/base/error.hpp"
#include "aureole/scenario/scenario.hpp"

#include <fmt/format.h>
#include <fmt/ranges.h>
#include <toml++/toml.h>

#include <algorithm>
#include <fstream>
#include <set>
#include <sstream>
#include <tuple>

namespace aureole::scenario {

namespace {

constexpr std::uintmax_t longest_file = 10'000'000; // bytes

bool is_plain(std::string_view part) {
    return !part.empty() && std::all_of(part.begin(), part.end(), [](char c) {
        return (c >= 'a' && c <= 'z') || (c >= 'A' && c <= 'Z') || (c >= '0' && c <= '9') || c == '_' ||
               c == '-';
    });
}

std::string trimmed(std::string text) {
    text.erase(0, std::min(text.size(), text.find_first_not_of(" \t\r\n")));
    text.erase(text.find_last_not_of(" \t\r\n") + 1);
    return text;
}

/// What stands before the last dot.
std::string table_of(const std::string& path) {
    return path.substr(0, path.rfind('.'));
}

} // namespace

/// Collects values and problems.
struct Reader {
    Scenario scenario;
    std::string name;
    struct Problem {
        long line, column;
        std::string text;
    };
    std::vector<Problem> problems;
    std::set<std::string, std::less<>> unsound; ///< keys with a problem: no second message follows from them

    explicit Reader(const std::filesystem::path& file) : name(file.string()) { scenario.file_ = file; }

    void problem(long line, long column, const std::string& key, std::string_view what) {
        unsound.insert(key);
        problems.push_back({line, column,
                            line > 0 ? fmt::format("{}:{}:{}: {}: {}", name, line, column, key, what)
                                     : fmt::format("{}: {}: {}", name, key, what)});
    }

    /// A problem of a value that has been read.
    void problem(const std::string& key, std::string_view what) {
        const auto found = scenario.entries_.find(key);
        const bool known = found != scenario.entries_.end();
        problem(known ? found->second.line : 0, known ? found->second.column : 0, key, what);
    }

    void read_table(const toml::table& table, const std::string& prefix) {
        for (const auto& [key_name, node] : table) {
            const std::string part(key_name.str());
            const auto line = static_cast<long>(key_name.source().begin.line);
            const auto column = static_cast<long>(key_name.source().begin.column);
            if (!is_plain(part)) {
                problem(line, column, prefix.empty() ? in_quotes(part) : prefix + "." + in_quotes(part),
                        "found other characters in the name, expected letters, digits, _ and -");
                continue;
            }
            const std::string path = prefix.empty() ? part : prefix + "." + part;
            try {
                read_node(path, node, line, column);
            } catch (const Error& error) {
                problem(line, column, path, error.what());
            }
        }
    }

    void read_node(const std::string& path, const toml::node& node, long line, long column) {
        const auto* table = node.as_table();
        if (const Key* key = find_key(path)) {
            scenario.entries_[path] = {read_value(*key, node), true, line, column};
        } else if (!is_table(path)) {
            problem(line, column, path,
                    fmt::format("unknown {}; the nearest is {}", table != nullptr ? "table" : "key",
                                table != nullptr ? nearest_table(path) : nearest_key(path)));
        } else if (table == nullptr) {
            problem(line, column, path, fmt::format("found {}, expected a table of keys", node_text(node)));
        } else if (table->empty() && (is_named_table(path) || path == "transport")) {
            problem(line, column, path, "found an empty table, expected keys in it");
        } else {
            read_table(*table, path);
        }
    }

    void override_with(const std::string& text) {
        const auto equals = text.find('=');
        const std::string path = trimmed(text.substr(0, equals));
        if (equals == std::string::npos || path.empty()) {
            problems.push_back({0, 0, fmt::format("--set: found {}, expected KEY=VALUE", in_quotes(text))});
            return;
        }
        const Key* key = find_key(path);
        std::string_view rest = path;
        bool plain = true;
        while (plain && !rest.empty()) {
            const std::string_view part = rest.substr(0, rest.find('.'));
            rest.remove_prefix(std::min(rest.size(), part.size() + 1));
            plain = is_plain(part);
        }
        if (key == nullptr || !plain) {
            problems.push_back(
                {0, 0, fmt::format("--set {}: unknown key; the nearest is {}", path, nearest_key(path))});
            return;
        }
        try {
            scenario.entries_[path] = {read_typed(*key, trimmed(text.substr(equals + 1))), true, 0, 0};
        } catch (const Error& error) {
            unsound.insert(path);
            problems.push_back({0, 0, fmt::format("--set {}: {}", path, error.what())});
        }
    }

    void fill_defaults() {
        for (const Key& key : keys()) {
            if (scenario.has_transport() || !key.path.starts_with("transport.")) {
                fill_named(key, "", key.path);
            }
        }
    }

    /// `path` continues `before`, in which every "<name>" is replaced already.
    void fill_named(const Key& key, const std::string& before, const std::string& path) {
        const auto place = path.find("<name>");
        if (place == std::string::npos) {
            fill(key, before + path);
            return;
        }
        const std::string front = before + path.substr(0, place);
        for (const std::string& chosen : scenario.names(front.substr(0, front.size() - 1))) {
            fill_named(key, front + chosen, path.substr(place + 6));
        }
    }

    void fill(const Key& key, const std::string& path) {
        if (scenario.has(path)) {
            return;
        }
        if (!key.otherwise.empty()) {
            scenario.entries_[path] = {read_typed(key, key.otherwise), false, 0, 0};
        } else if (key.required && !unsound.contains(path)) {
            const auto beside = scenario.entries_.lower_bound(table_of(path) + ".");
            const auto words = describe(key.dimension);
            problem(beside->second.line, beside->second.column, path,
                    key.choices.empty()
                        ? fmt::format("missing, expected {} such as \"{}\"", words.name, words.example)
                        : fmt::format("missing, expected one of {}", fmt::join(key.choices, ", ")));
        }
    }

    /// The species that are solved for unless the scenario says otherwise.
    void settle_transport() {
        if (!scenario.has_transport()) {
            return;
        }
        const std::string list = "transport.species";
        std::vector<std::string> species;
        for (const char* one : {"electrons", "protons"}) {
            const std::string source = one + std::string(".source");
            if (!scenario.has(source) || scenario.text(source) == "transport") {
                species.emplace_back(one);
            }
        }
        if (!scenario.has(list) && !unsound.contains(list)) {
            scenario.entries_[list] = {species, false, 0, 0};
        }
        if (!scenario.has(list)) {
            return;
        }
        for (const std::string& one : scenario.texts(list)) {
            const std::string source = one + ".source";
            if (!scenario.has(source) && !unsound.contains(source)) {
                scenario.entries_[source] = {std::string("transport"), false, 0, 0};
            }
        }
    }

    /// Whether keys have values without problems, so that they can be looked at together.
    bool sound(std::initializer_list<std::string> paths) const {
        return std::all_of(paths.begin(), paths.end(), [&](const std::string& path) {
            return scenario.has(path) && !unsound.contains(path);
        });
    }

    void check_profile(const std::string& table) {
        const std::string path = table + ".profile";
        const std::string kind = scenario.text(path);
        const bool with_file = !scenario.text("input.grid").empty();
        if (!sound({path})) {
            return;
        }
        if (kind == "formula" && scenario.text(table + ".formula").empty() &&
            !unsound.contains(table + ".formula")) {
            problem(path,
                    fmt::format("found \"formula\" without {}.formula, expected an expression there", table));
        }
        if (kind == "file" && !with_file) {
            problem(path,
                    "found \"file\" without input.grid, expected another profile or the path of a grid file");
        }
        if (!sound({table + ".value"})) {
            return;
        }
        const bool zero = scenario.quantity(table + ".value") == 0;
        if (kind != "none" && kind != "file" && zero && !scenario.is_set(table + ".value")) {
            const auto words = describe(find_key(table + ".value")->dimension);
            problem(path, fmt::format("found {} without {}.value, expected {} such as \"{}\" there",
                                      in_quotes(kind), table, words.name, words.example));
        }
        if (kind == "none" && !zero && !scenario.is_set(path) && !with_file) {
            problem(table + ".value",
                    fmt::format(
                        "found a value without {}, expected its shape there, such as \"double_exponential\"",
                        path));
        }
    }

    /// Whether the spectra are asked of the solver and of something else.
    void check_solved(const std::string& species, const std::string& source) {
        if (!scenario.has_transport() || !sound({species + ".source", "transport.species"})) {
            return;
        }
        const auto solved = scenario.texts("transport.species");
        const bool listed = std::find(solved.begin(), solved.end(), species) != solved.end();
        if (source == "transport" && !listed) {
            problem("transport.species",
                    fmt::format("found no {0}, expected them here or another {0}.source than \"transport\"",
                                species));
        } else if (source != "transport" && listed) {
            problem(species + ".source",
                    fmt::format("found {0} beside transport.species with {1}, expected \"transport\", or a "
                                "transport.species without {1}",
                                in_quotes(source), species));
        } else if (source != "transport" && !scenario.names("transport." + species).empty()) {
            problem(species + ".source",
                    fmt::format("found {} beside [transport.{}], expected one of the two", in_quotes(source),
                                species));
        }
    }

    void check_species(const std::string& species) {
        const std::string source = scenario.text(species + ".source");
        const bool with_file = !scenario.text("input.grid").empty();
        if (source == "file" && !with_file) {
            problem(species + ".source",
                    "found \"file\" without input.grid, expected another source or a grid file");
        }
        check_solved(species, source);
        const std::string density = species + ".energy_density.profile";
        if (source == "energy_density" && !with_file && sound({density}) &&
            scenario.text(density) == "none") {
            problem(species + ".source",
                    fmt::format("found \"energy_density\" without {}, expected a profile there", density));
        }
        const std::string from = species + ".energy_from";
        const std::string to = species + ".energy_to";
        if (sound({from, to}) && !(scenario.quantity(from) < scenario.quantity(to))) {
            const std::string given = scenario.is_set(from) ? from : to;
            problem(given, fmt::format("found energies from {} to {}, expected rising ones",
                                       format_quantity(scenario.quantity(from), dimension::energy),
                                       format_quantity(scenario.quantity(to), dimension::energy)));
        }
    }

    void check_gamma() {
        const std::string edges = "gamma.band_edges";
        if (!sound({edges, "gamma.energies"})) {
            return;
        }
        if (scenario.quantities(edges).size() == 1) {
            problem(edges, "found one edge, expected at least two");
        }
        if (!scenario.quantities(edges).empty() && !scenario.quantities("gamma.energies").empty()) {
            problem(edges, "found beside gamma.energies, expected one of the two");
        }
    }

    void check_radio() {
        const std::size_t maps =
            sound({"radio.frequencies"}) ? scenario.quantities("radio.frequencies").size() : 0;
        if (!sound({"radio.beam_major", "radio.beam_minor", "radio.unit"})) {
            return;
        }
        const double major = scenario.quantity("radio.beam_major");
        if (scenario.text("radio.unit") == "Jy/beam" && maps > 0 && !(major > 0)) {
            problem("radio.unit",
                    "found \"Jy/beam\" without a beam, expected radio.beam_major such as \"10 arcsec\", "
                    "or another unit");
        }
        if (maps > 0 && sound({"radio.bandwidth"}) &&
            !(scenario.quantity("radio.bandwidth") < 2 * scenario.quantities("radio.frequencies").front())) {
            problem("radio.bandwidth",
                    fmt::format("found {}, expected less than twice the lowest frequency, {}",
                                format_quantity(scenario.quantity("radio.bandwidth"), dimension::frequency),
                                format_quantity(scenario.quantities("radio.frequencies").front(),
                                                dimension::frequency)));
        }
        if (scenario.quantity("radio.beam_minor") > major) {
            problem("radio.beam_minor", "found more than radio.beam_major, expected at most that");
        }
    }

    void check_heights() {
        if (sound({"heights.from", "heights.to"})) {
            const double to = scenario.quantity("heights.to");
            if (to > 0 && !(scenario.quantity("heights.from") < to)) {
                problem("heights.to", "found no more than heights.from, expected more");
            }
        }
        if (!sound({"heights.rms", "radio.frequencies"})) {
            return;
        }
        const auto noise = scenario.texts("heights.rms");
        const std::size_t maps = scenario.quantities("radio.frequencies").size();
        if (noise.size() > 1 && noise.size() != maps) {
            problem("heights.rms",
                    fmt::format("found {} values for {} radio frequencies, expected one, or one for each",
                                noise.size(), maps));
        }
        const Dimension brightness[] = {dimension::flux_density / Dimension{.beam = 1},
                                        dimension::flux_density / Dimension{.pixel = 1},
                                        dimension::radio_intensity, dimension::temperature};
        for (const std::string& text : noise) {
            const bool read =
                std::any_of(std::begin(brightness), std::end(brightness), [&](const Dimension& d) {
                    try {
                        return to_cgs(text, d) >= 0;
                    } catch (const Error&) {
                        return false;
                    }
                });
            if (!read) {
                problem("heights.rms", fmt::format("found {}, expected a brightness of 0 or more such as "
                                                   "\"10 uJy/beam\"",
                                                   in_quotes(text)));
            }
        }
    }

    /// What keys need of one another.
    void check_together() {
        const std::string ending = ".profile";
        std::vector<std::string> profiles;
        for (const auto& [path, entry] : scenario.entries_) {
            if (path.ends_with(ending)) {
                profiles.push_back(table_of(path));
            }
        }
        for (const std::string& table : profiles) {
            check_profile(table);
        }
        for (const std::string& chosen : scenario.names("radiation.component")) {
            if (chosen == "cmb" || chosen == "file") {
                problem(scenario.entries_.lower_bound("radiation.component." + chosen + ".")->first,
                        fmt::format("found the name \"{}\", which has a meaning of its own, expected another",
                                    chosen));
            }
        }
        check_species("electrons");
        check_species("protons");
        check_gamma();
        check_radio();
        check_heights();
    }

    Scenario finish() {
        if (problems.empty()) {
            return std::move(scenario);
        }
        // As they stand in the file; overrides and what is missing come last.
        std::stable_sort(problems.begin(), problems.end(), [](const Problem& a, const Problem& b) {
            return std::tuple(a.line == 0, a.line, a.column) < std::tuple(b.line == 0, b.line, b.column);
        });
        std::string message;
        for (const Problem& each : problems) {
            message += (message.empty() ? "" : "\n") + each.text;
        }
        throw Error(ErrorKind::scenario, message);
    }
};

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
    for (const std::string& one : overrides) {
        reader.override_with(one);
    }
    reader.settle_transport();
    reader.fill_defaults();
    reader.check_together();
    return reader.finish();
}

Scenario load(const std::filesystem::path& file, std::span<const std::string> overrides) {
    std::error_code failure;
    if (std::filesystem::is_directory(file, failure)) {
        throw Error(ErrorKind::input,
                    fmt::format("{}: found a folder, expected a scenario file", file.string()));
    }
    std::ifstream stream(file, std::ios::binary);
    if (!stream) {
        throw Error(ErrorKind::input,
                    fmt::format("{}: not found or not readable, expected a scenario file", file.string()));
    }
    const std::uintmax_t size = std::filesystem::file_size(file, failure);
    if (!failure && size > longest_file) {
        throw Error(ErrorKind::input,
                    fmt::format("{}: found {} bytes, expected a scenario file of at most {}", file.string(),
                                size, longest_file));
    }
    std::ostringstream text;
    text << stream.rdbuf();
    return parse(text.str(), file, overrides);
}

} // namespace aureole::scenario
