#include "read_laws.hpp"

#include "scenario_problems.hpp"

#include "aureole/scenario/keys.hpp"

#include <fmt/format.h>
#include <fmt/ranges.h>

#include <algorithm>
#include <array>
#include <iterator>
#include <map>
#include <optional>
#include <set>
#include <sstream>

namespace aureole::transport {

namespace {

using scenario::Scenario;

std::string key_of(const std::string& name, const std::string& key = "") {
    return "law." + name + (key.empty() ? "" : "." + key);
}

/// Keys of a law that are no parameters of it.
bool is_parameter(std::string_view key) {
    return key != "kind" && key != "of" && key != "table" && !key.starts_with("anchor") &&
           key.find('.') == std::string_view::npos;
}

/// The law whose keys stand in a table, without children.
LawSpec parameters_of(const Scenario& scenario, const std::string& table) {
    LawSpec law{
        .name = scenario.text(table + ".kind"), .numbers = {}, .lists = {}, .texts = {}, .children = {}};
    const std::string prefix = table + ".";
    for (auto entry = scenario.entries().lower_bound(prefix);
         entry != scenario.entries().end() && entry->first.starts_with(prefix); ++entry) {
        const std::string name = entry->first.substr(prefix.size());
        if (!is_parameter(name)) {
            continue;
        }
        const scenario::Value& value = entry->second.value;
        if (const auto* number = std::get_if<double>(&value)) {
            law.numbers[name] = *number;
        } else if (const auto* list = std::get_if<std::vector<double>>(&value)) {
            law.lists[name] = *list;
        } else if (const auto* words = std::get_if<std::vector<std::string>>(&value)) {
            law.texts[name] = fmt::format("{}", fmt::join(*words, ", "));
        } else {
            law.texts[name] = std::get<std::string>(value);
        }
    }
    return law;
}

class LawReader {
  public:
    LawReader(const Scenario& scenario, ScenarioProblems& problems)
        : scenario_(scenario), problems_(problems), names_(scenario.names("law")) {}

    void read_all() {
        for (const std::string& name : names_) {
            if (name == "all") {
                problems_.add(key_of(name),
                              "found the name \"all\", which has a meaning of its own, expected "
                              "another");
            }
            law(name);
        }
    }

    /// The law, or nothing if it or a law in it has a problem, which is said once.
    std::optional<LawSpec> law(const std::string& name) {
        if (const auto known = laws_.find(name); known != laws_.end()) {
            return known->second;
        }
        if (const auto before = std::find(path_.begin(), path_.end(), name); before != path_.end()) {
            problems_.add(
                key_of(path_.back(), "of"),
                fmt::format("found laws made of themselves, {} > {}, expected laws without a circle",
                            fmt::join(before, path_.end(), " > "), name));
            return std::nullopt;
        }
        path_.push_back(name);
        auto read = read_one(name);
        path_.pop_back();
        return laws_[name] = std::move(read);
    }

    bool is_part(const std::string& name) const { return parts_.contains(name); }
    const std::vector<std::string>& names() const { return names_; }

    std::string nearest(const std::string& name) const {
        const std::vector<std::string_view> words(names_.begin(), names_.end());
        const auto word = nearest_word(name, words);
        return word.empty() ? "expected the name of a [law.NAME]" : fmt::format("the nearest is {}", word);
    }

  private:
    std::optional<LawSpec> read_one(const std::string& name) {
        const std::string kind = scenario_.text(key_of(name, "kind"));
        bool sound = true;
        const auto refuse = [&](const std::string& key, const std::string& what) {
            problems_.add(key_of(name, key), what);
            sound = false;
        };
        const bool combined = kind == "sum" || kind == "maximum";
        LawSpec spec = parameters_of(scenario_, key_of(name));
        if (scenario_.has(key_of(name, "table")) != (kind == "table")) {
            refuse(kind == "table" ? "kind" : "table",
                   kind == "table"
                       ? fmt::format("found \"table\" without law.{}.table, expected a file there", name)
                       : fmt::format("found a table beside the kind {}, expected the kind table", kind));
        } else if (kind == "table") {
            LawSpec table = read_law_table(scenario_.path(key_of(name, "table")));
            table.numbers = spec.numbers;
            table.texts = spec.texts;
            table.lists.insert(spec.lists.begin(), spec.lists.end());
            spec = std::move(table);
        }
        if (scenario_.has(key_of(name, "of")) && !combined) {
            refuse("of",
                   fmt::format("found laws beside the kind {}, expected the kinds sum or maximum", kind));
        } else if (combined) {
            sound = add_parts(name, spec) && sound;
        }
        for (const std::string& factor : scenario_.names(key_of(name, "factor"))) {
            if (combined) {
                refuse("factor." + factor + ".kind",
                       fmt::format("found a factor of a {}, expected it on the laws it is made of", kind));
                break;
            }
            spec.children.push_back(parameters_of(scenario_, key_of(name, "factor." + factor)));
        }
        return sound && passes(name, spec) ? std::optional(std::move(spec)) : std::nullopt;
    }

    bool add_parts(const std::string& name, LawSpec& spec) {
        const std::string key = key_of(name, "of");
        if (!scenario_.has(key) || scenario_.texts(key).empty()) {
            problems_.add(key_of(name, "kind"),
                          fmt::format("found \"{}\" of no laws, expected their names in {}", spec.name, key));
            return false;
        }
        bool sound = true;
        for (const std::string& part : scenario_.texts(key)) {
            if (std::find(names_.begin(), names_.end(), part) == names_.end()) {
                problems_.add(key, fmt::format("found no law \"{}\"; {}", part, nearest(part)));
                sound = false;
                continue;
            }
            parts_.insert(part);
            if (scenario_.text(key_of(part, "anchor")) != "absolute") {
                problems_.add(
                    key_of(part, "anchor"),
                    fmt::format("found on a law that \"{}\" is made of, expected on that: an anchor "
                                "scales the whole",
                                name));
            }
            if (auto child = law(part)) {
                spec.children.push_back(std::move(*child));
            } else {
                sound = false;
            }
        }
        return sound;
    }

    bool passes(const std::string& name, const LawSpec& spec) {
        try {
            checked_law(spec);
            return true;
        } catch (const Error& error) {
            std::istringstream lines(error.what());
            for (std::string line; std::getline(lines, line);) {
                problems_.add(key_of(name), line);
            }
            return false;
        }
    }

    const Scenario& scenario_;
    ScenarioProblems& problems_;
    std::vector<std::string> names_, path_;
    std::map<std::string, std::optional<LawSpec>> laws_;
    std::set<std::string> parts_;
};

/// The keys that give the value of each kind of anchor.
struct AnchorKey {
    AnchorSpec::Kind kind;
    const char *name, *key;
    bool has_place;
};

constexpr std::array anchor_keys{
    AnchorKey{AnchorSpec::Kind::rate, "rate", "anchor_rate", true},
    AnchorKey{AnchorSpec::Kind::energy_density, "energy_density", "anchor_energy_density", true},
    AnchorKey{AnchorSpec::Kind::grammage, "grammage", "anchor_grammage", true},
    AnchorKey{AnchorSpec::Kind::gamma_luminosity, "gamma_luminosity", "anchor_gamma_luminosity", false},
};

AnchorSpec read_anchor(const Scenario& scenario,
                       const std::string& name,
                       const LawSurroundings& around,
                       ScenarioProblems& problems) {
    AnchorSpec anchor;
    const std::string kind = scenario.text(key_of(name, "anchor"));
    anchor.radius = scenario.quantity(key_of(name, "anchor_radius"));
    anchor.height = scenario.quantity(key_of(name, "anchor_height"));
    anchor.rigidity = scenario.quantity(key_of(name, "anchor_rigidity"));
    for (const AnchorKey& row : anchor_keys) {
        const std::string key = key_of(name, row.key);
        if (kind != row.name) {
            // A value that is the default says nothing: it stands in the scenario that a run leaves behind.
            const bool is_default =
                row.kind == AnchorSpec::Kind::rate && scenario.quantity(key) == empirical_rate;
            if (scenario.is_set(key) && !is_default) {
                problems.add(
                    key, fmt::format("found beside anchor = \"{}\", expected \"{}\" there", kind, row.name));
            }
            continue;
        }
        anchor.kind = row.kind;
        if (!scenario.has(key)) {
            problems.add(key_of(name, "anchor"),
                         fmt::format("found \"{}\" without {}, expected a value there", kind, key));
        } else {
            anchor.value = scenario.quantity(key);
        }
        if (row.kind != AnchorSpec::Kind::rate && !around.protons) {
            problems.add(key_of(name, "anchor"),
                         fmt::format("found \"{}\", which is of protons, without protons in "
                                     "transport.species, expected them or another anchor",
                                     kind));
        }
        if (!row.has_place) {
            continue;
        }
        if (anchor.radius > around.radius) {
            problems.add(key_of(name, "anchor_radius"),
                         fmt::format("found {}, outside the grid, expected at most {}",
                                     format_quantity(anchor.radius, dimension::length),
                                     format_quantity(around.radius, dimension::length)));
        }
        if (anchor.height < around.bottom || anchor.height > around.top) {
            problems.add(key_of(name, "anchor_height"),
                         fmt::format("found {}, outside the grid, expected {} to {}",
                                     format_quantity(anchor.height, dimension::length),
                                     format_quantity(around.bottom, dimension::length),
                                     format_quantity(around.top, dimension::length)));
        }
    }
    return anchor;
}

/// Names of the laws to solve for.
std::vector<std::string>
chosen_laws(const Scenario& scenario, const LawReader& reader, ScenarioProblems& problems) {
    const std::string key = "transport.laws";
    const auto asked = scenario.texts(key);
    std::vector<std::string> chosen;
    if (reader.names().empty()) {
        problems.add(key, "found no [law.NAME], expected at least one scattering law (aureole laws)");
    } else if (asked.empty()) {
        problems.add(key, "found an empty list, expected names of laws, or \"all\"");
    } else if (asked.size() == 1 && asked.front() == "all") {
        std::copy_if(reader.names().begin(), reader.names().end(), std::back_inserter(chosen),
                     [&](const std::string& name) { return !reader.is_part(name); });
    } else {
        for (const std::string& name : asked) {
            if (name == "all") {
                problems.add(key, "found \"all\" among other names, expected it alone");
            } else if (std::find(reader.names().begin(), reader.names().end(), name) ==
                       reader.names().end()) {
                problems.add(key, fmt::format("found no law \"{}\"; {}", name, reader.nearest(name)));
            } else if (std::find(chosen.begin(), chosen.end(), name) != chosen.end()) {
                problems.add(key, fmt::format("found \"{}\" twice, expected every law once", name));
            } else {
                chosen.push_back(name);
            }
        }
    }
    return chosen;
}

} // namespace

std::vector<NamedLaw>
read_laws(const Scenario& scenario, const LawSurroundings& around, ScenarioProblems& problems) {
    LawReader reader(scenario, problems);
    reader.read_all();
    std::vector<NamedLaw> laws;
    for (const std::string& name : chosen_laws(scenario, reader, problems)) {
        const AnchorSpec anchor = read_anchor(scenario, name, around, problems);
        if (const auto law = reader.law(name)) {
            laws.push_back({name, *law, anchor});
        }
    }
    return laws;
}

} // namespace aureole::transport
