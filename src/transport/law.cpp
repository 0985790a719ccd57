#include "aureole/transport/law.hpp"

#include "law_terms.hpp"

#include "aureole/base/constants.hpp"
#include "aureole/base/error.hpp"
#include "aureole/scenario/formula.hpp"
#include "aureole/scenario/keys.hpp"

#include <fmt/format.h>
#include <fmt/ranges.h>

#include <algorithm>
#include <cctype>
#include <cmath>

namespace aureole::transport {

double gigavolt() {
    return constants::gigaelectronvolt / constants::elementary_charge;
}

std::vector<std::string_view> split_words(std::string_view text) {
    std::vector<std::string_view> words;
    constexpr std::string_view separators = ", \t\n";
    std::size_t from = text.find_first_not_of(separators);
    while (from != std::string_view::npos) {
        const std::size_t to = text.find_first_of(separators, from);
        words.push_back(text.substr(from, to == std::string_view::npos ? to : to - from));
        from = text.find_first_not_of(separators, to);
    }
    return words;
}

std::vector<std::string> variable_names() {
    std::vector<std::string> names;
    for (const FormulaVariable& variable : formula_variables()) {
        names.emplace_back(variable.name);
    }
    return names;
}

bool mentions(std::string_view expression, std::string_view variable) {
    const auto part_of_name = [](char c) {
        return std::isalnum(static_cast<unsigned char>(c)) != 0 || c == '_';
    };
    for (std::size_t at = expression.find(variable); at != std::string_view::npos;
         at = expression.find(variable, at + 1)) {
        const std::size_t end = at + variable.size();
        const bool starts = at == 0 || !part_of_name(expression[at - 1]);
        const bool ends = end == expression.size() || !part_of_name(expression[end]);
        if (starts && ends) {
            return true;
        }
    }
    return false;
}

namespace {

/// Checks one law and its children, and gathers what is wrong.
class Checker {
  public:
    Law check(const LawSpec& spec, const std::string& above) {
        Law law;
        place_ = above + (above.empty() ? "law '" : " > '") + spec.name + "'";
        try {
            law.entry = &find_law(spec.name);
        } catch (const Error& error) {
            problems.push_back(above.empty() ? std::string(error.what()) : above + ": " + error.what());
            return law;
        }
        refuse_unknown(spec, *law.entry);
        for (const LawParameter& parameter : law.entry->parameters) {
            read(spec, parameter, law);
        }
        check_together(law);
        const std::string place = place_;
        for (const LawSpec& child : spec.children) {
            law.children.push_back(check(child, place));
            place_ = place;
            check_role(law, child);
        }
        if (law.entry->kind == LawClass::combined && spec.children.empty()) {
            problem("found no laws, expected at least one to combine");
        }
        if (above.empty() && gives_factor(law)) {
            problem("found a formula that gives a factor, expected a law that gives a rate");
        }
        return law;
    }

    std::vector<std::string> problems;

  private:
    void problem(const std::string& what) { problems.push_back(place_ + ": " + what); }

    static bool gives_factor(const Law& law) {
        const auto gives = law.texts.find("gives");
        return gives != law.texts.end() && gives->second == "factor";
    }

    void check_role(const Law& law, const LawSpec& child) {
        if (law.children.back().entry == nullptr) {
            return;
        }
        const LawClass kind = law.children.back().entry->kind;
        if (law.entry->kind == LawClass::combined) {
            if (gives_factor(law.children.back())) {
                problem("found a formula that gives a factor among the laws to combine, expected rates");
            }
            return;
        }
        if (kind != LawClass::shape && !gives_factor(law.children.back())) {
            problem(fmt::format("found '{}' as a factor, expected a law without dimension such as falling",
                                child.name));
        } else if (child.numbers.contains("rate")) {
            problem(fmt::format("the factor '{}' has a rate, expected one for '{}' alone", child.name,
                                law.entry->name));
        }
    }

    void refuse_unknown(const LawSpec& spec, const LawEntry& entry) {
        std::vector<std::string_view> names;
        for (const LawParameter& parameter : entry.parameters) {
            names.push_back(parameter.name);
        }
        const auto look = [&](const std::string& name, std::initializer_list<ParameterKind> kinds,
                              std::string_view what) {
            const LawParameter* parameter = find_parameter(entry, name);
            if (parameter == nullptr) {
                const std::string_view nearest = nearest_word(name, names);
                problem(nearest.empty()
                            ? fmt::format("found the parameter '{}', expected none", name)
                            : fmt::format("found no parameter '{}', the nearest is '{}'", name, nearest));
            } else if (std::find(kinds.begin(), kinds.end(), parameter->kind) == kinds.end()) {
                problem(fmt::format("{}: found {}, expected another type", name, what));
            }
        };
        for (const auto& [name, value] : spec.numbers) {
            look(name, {ParameterKind::number}, "a number");
        }
        for (const auto& [name, value] : spec.lists) {
            look(name, {ParameterKind::list}, "a list");
        }
        for (const auto& [name, value] : spec.texts) {
            look(name, {ParameterKind::choice, ParameterKind::words, ParameterKind::text}, "a text");
        }
    }

    void check_range(const LawParameter& parameter, double value) {
        if (std::isfinite(value) && value >= parameter.least && value <= parameter.greatest) {
            return;
        }
        const std::string least = parameter.least == scenario::above_zero
                                      ? "above 0"
                                      : fmt::format("at least {:g}", parameter.least);
        const std::string greatest =
            std::isinf(parameter.greatest) ? "" : fmt::format(" and at most {:g}", parameter.greatest);
        problem(fmt::format("{}: found {:g}, expected a finite number {}{}{}", parameter.name, value, least,
                            greatest, parameter.dimension == dimension::none ? "" : " (CGS)"));
    }

    void read(const LawSpec& spec, const LawParameter& parameter, Law& law) {
        const std::string name(parameter.name);
        if (parameter.kind == ParameterKind::number) {
            const auto given = spec.numbers.find(name);
            law.numbers[name] = given != spec.numbers.end() ? given->second : parameter.otherwise;
            if (given != spec.numbers.end()) {
                check_range(parameter, given->second);
            } else if (parameter.required) {
                problem(fmt::format("{}: not given, expected {}", name, parameter.help));
            }
        } else if (parameter.kind == ParameterKind::list) {
            const auto given = spec.lists.find(name);
            law.lists[name] = given != spec.lists.end() ? given->second : std::vector<double>{};
            for (const double value : law.lists[name]) {
                check_range(parameter, value);
            }
            if (parameter.required && law.lists[name].empty()) {
                problem(fmt::format("{}: not given, expected {}", name, parameter.help));
            }
        } else {
            read_text(spec, parameter, law);
        }
    }

    void read_text(const LawSpec& spec, const LawParameter& parameter, Law& law) {
        const std::string name(parameter.name);
        const auto given = spec.texts.find(name);
        const std::string text = given != spec.texts.end() ? given->second : std::string(parameter.text);
        law.texts[name] = text;
        if (parameter.kind == ParameterKind::text) {
            if (text.empty()) {
                problem(fmt::format("{}: not given, expected {}", name, parameter.help));
                return;
            }
            try {
                scenario::Formula(text, variable_names());
            } catch (const Error& error) {
                problem(error.what());
            }
            return;
        }
        const auto choices = split_words(parameter.choices);
        const auto words =
            parameter.kind == ParameterKind::words ? split_words(text) : std::vector<std::string_view>{text};
        for (const std::string_view word : words) {
            if (std::find(choices.begin(), choices.end(), word) == choices.end()) {
                problem(fmt::format("{}: found '{}', expected {} {}; the nearest is '{}'", name, word,
                                    parameter.kind == ParameterKind::words ? "any of" : "one of",
                                    fmt::join(choices, ", "), nearest_word(word, choices)));
            }
        }
    }

    void expect_ascending(const Law& law, const std::string& name) {
        const auto& values = law.lists.at(name);
        if (std::adjacent_find(values.begin(), values.end(), [](double a, double b) { return !(a < b); }) !=
            values.end()) {
            problem(fmt::format("{}: found {:g}, expected ascending values", name, fmt::join(values, ", ")));
        }
    }

    void check_breaks(Law& law) {
        const std::size_t breaks = law.lists.at("break_rigidity").size();
        if (law.lists.at("break_width").empty()) {
            law.lists["break_width"].assign(breaks, 0.1);
        }
        for (const char* name : {"break_slope", "break_width"}) {
            if (law.lists.at(name).size() != breaks) {
                problem(fmt::format("{}: found {} values, expected {} as in break_rigidity", name,
                                    law.lists.at(name).size(), breaks));
            }
        }
        expect_ascending(law, "break_rigidity");
    }

    void check_together(Law& law) {
        const std::string_view name = law.entry->name;
        if (name == "rigidity_power") {
            check_breaks(law);
        } else if (name == "table") {
            std::size_t nodes = 1;
            for (const char* axis : {"radius", "height", "rigidity"}) {
                expect_ascending(law, axis);
                nodes *= law.lists.at(axis).size();
            }
            if (law.lists.at("rate").size() != nodes) {
                problem(fmt::format("rate: found {} values, expected {}, one for each combination of nodes",
                                    law.lists.at("rate").size(), nodes));
            }
        } else if (name == "self_confinement") {
            const auto words = split_words(law.texts.at("damping"));
            const bool no_words = words.empty() || (words.size() == 1 && words.front() == "none");
            if (no_words && law.numbers.at("linear_damping") == 0) {
                problem("damping: found none and linear_damping = 0, expected some damping");
            }
            if (words.size() > 1 && std::find(words.begin(), words.end(), "none") != words.end()) {
                problem("damping: found 'none' and others, expected 'none' alone");
            }
        } else if (name == "patchy" && law.numbers.at("greatest_size") <= law.numbers.at("least_size")) {
            problem(fmt::format("greatest_size: found {:g}, expected more than least_size, {:g} (CGS)",
                                law.numbers.at("greatest_size"), law.numbers.at("least_size")));
        }
    }

    std::string place_;
};

std::vector<double> distinct(std::span<const double> values) {
    std::vector<double> nodes(values.begin(), values.end());
    std::sort(nodes.begin(), nodes.end());
    nodes.erase(std::unique(nodes.begin(), nodes.end()), nodes.end());
    return nodes;
}

std::size_t index_of(const std::vector<double>& nodes, double value) {
    return static_cast<std::size_t>(std::lower_bound(nodes.begin(), nodes.end(), value) - nodes.begin());
}

} // namespace

Law checked_law(const LawSpec& spec) {
    Checker checker;
    Law law = checker.check(spec, "");
    if (!checker.problems.empty()) {
        throw Error(ErrorKind::scenario, fmt::format("{}", fmt::join(checker.problems, "\n")));
    }
    return law;
}

bool depends_on_cosmic_rays(const Law& law) {
    if (law.entry->name == "self_confinement") {
        return true;
    }
    const auto expression = law.texts.find("expression");
    if (expression != law.texts.end() &&
        (mentions(expression->second, "P_res") || mentions(expression->second, "dP_res"))) {
        return true;
    }
    return std::any_of(law.children.begin(), law.children.end(), depends_on_cosmic_rays);
}

LawSpec table_law(std::span<const double> radius,
                  std::span<const double> height,
                  std::span<const double> rigidity,
                  std::span<const double> rate) {
    const std::size_t rows = rate.size();
    if (radius.size() != rows || height.size() != rows || rigidity.size() != rows) {
        throw Error(
            ErrorKind::scenario,
            fmt::format(
                "table of scattering rates: found columns of {}, {}, {} and {} rows, expected as many "
                "in each",
                radius.size(), height.size(), rigidity.size(), rows));
    }
    const auto not_finite = [](double value) { return !std::isfinite(value); };
    for (const auto column : {radius, height, rigidity, rate}) {
        if (std::any_of(column.begin(), column.end(), not_finite)) {
            throw Error(ErrorKind::scenario,
                        "table of scattering rates: found a value that is not finite, expected numbers");
        }
    }
    LawSpec spec{.name = "table", .numbers = {}, .lists = {}, .texts = {}, .children = {}};
    const auto& r = spec.lists["radius"] = distinct(radius);
    const auto& z = spec.lists["height"] = distinct(height);
    const auto& p = spec.lists["rigidity"] = distinct(rigidity);
    if (r.size() * z.size() * p.size() != rows) {
        throw Error(
            ErrorKind::scenario,
            fmt::format("table of scattering rates: found {} rows, expected {} = {} radii x {} heights x {} "
                        "rigidities",
                        rows, r.size() * z.size() * p.size(), r.size(), z.size(), p.size()));
    }
    std::vector<double> values(rows, -1);
    for (std::size_t row = 0; row < rows; ++row) {
        const std::size_t node = (index_of(r, radius[row]) * z.size() + index_of(z, height[row])) * p.size() +
                                 index_of(p, rigidity[row]);
        if (values[node] >= 0) {
            throw Error(
                ErrorKind::scenario,
                fmt::format("table of scattering rates: found R = {:g} cm, z = {:g} cm, rigidity {:g} "
                            "statvolt twice, expected every node once",
                            radius[row], height[row], rigidity[row]));
        }
        values[node] = rate[row];
    }
    spec.lists["rate"] = values;
    return spec;
}

double empirical_rigidity() {
    return gigavolt();
}

double empirical_radius() {
    return 8 * constants::kiloparsec;
}

Particle reference_particle(double rigidity) {
    return particle_of_momentum(rigidity * constants::elementary_charge / constants::speed_of_light, 0);
}

double rate_at(const Law& law,
               const Place& place,
               const Particle& particle,
               std::optional<double> pressure,
               std::optional<double> gradient) {
    const auto prepared = prepare(law, std::span(&place, 1));
    ResonantPressure resonant;
    const double pressure_here = pressure.value_or(0);
    const double gradient_here = gradient.value_or(0);
    if (pressure) {
        resonant.pressure = std::span(&pressure_here, 1);
    }
    if (gradient) {
        resonant.gradient = std::span(&gradient_here, 1);
    }
    double rate = 0;
    constexpr double zero = 1e-300;
    rates(prepared, particle, resonant, std::span(&rate, 1), {.least = zero, .bohm = false});
    return rate > zero ? rate : 0;
}

Anchored anchored(const Law& law,
                  const Place& place,
                  const Particle& particle,
                  double rate,
                  std::optional<double> pressure,
                  std::optional<double> gradient) {
    Anchored result{.law = law, .factor = 1, .rate = rate_at(law, place, particle, pressure, gradient)};
    if (!(rate > 0) || !std::isfinite(rate)) {
        throw Error(ErrorKind::scenario,
                    fmt::format("law '{}': found {:g} s-1 to anchor it with, expected a rate above 0",
                                law.entry->name, rate));
    }
    if (!(result.rate > 0)) {
        throw Error(ErrorKind::scenario,
                    fmt::format("law '{}': its rate where it is anchored is 0, expected one above 0",
                                law.entry->name));
    }
    result.factor = rate / result.rate;
    result.law.scale = law.scale * result.factor;
    result.over_empirical = result.rate / empirical_rate;
    return result;
}

} // namespace aureole::transport
