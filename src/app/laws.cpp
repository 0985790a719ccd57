#include "aureole/app/laws.hpp"

#include "wrapped.hpp"

#include "aureole/base/error.hpp"
#include "aureole/scenario/keys.hpp"

#include <fmt/format.h>

#include <algorithm>
#include <array>
#include <cmath>
#include <string_view>
#include <utility>
#include <vector>

namespace aureole::app {

namespace {

using transport::LawClass;
using transport::LawEntry;
using transport::LawParameter;
using transport::ParameterKind;

constexpr std::array<std::pair<std::string_view, std::string_view>, 14> examples{{
    {"constant", R"toml([law.even]
kind = "constant"
rate = "1e-9 s-1"
)toml"},
    {"rigidity_power", R"toml([law.broken]
kind = "rigidity_power"
rate = "1e-9 s-1"
reference_rigidity = "1 GV"
slope = 0.5
break_rigidity = ["300 GV"]
break_slope = [0.3]
break_width = [0.2]
)toml"},
    {"falling", R"toml([law.thin]
kind = "falling"
rate = "1e-9 s-1"
along = "height"
form = "exponential"
length = "3 kpc"

# the same times a power of the rigidity
[law.thin.factor.rigidity]
kind = "rigidity_power"
slope = 0.5
)toml"},
    {"plasma_power", R"toml([law.plasma]
kind = "plasma_power"
rate = "1e-9 s-1"
field_power = 0.5
field_reference = "5 uG"
density_power = 0.5
density_reference = "0.03 cm-3"
)toml"},
    {"slab_turbulence", R"toml([law.slab]
kind = "slab_turbulence"
slope = 1.6667
outer_scale = "50 pc"
anchor = "rate"
anchor_rate = "1e-9 s-1"
)toml"},
    {"anisotropic_alfvenic", R"toml([law.eddies]
kind = "anisotropic_alfvenic"
alfven_scale = "50 pc"
)toml"},
    {"fast_modes", R"toml([law.fast]
kind = "fast_modes"
outer_scale = "50 pc"
damping_scale = "1e-7 pc"
anchor = "rate"
)toml"},
    {"self_confinement", R"toml([law.streaming]
kind = "self_confinement"
damping = ["ion_neutral", "turbulent"]
)toml"},
    {"patchy", R"toml([law.patches]
kind = "patchy"
slope = 0.5
filling = 3e-5
size = "1 pc"
)toml"},
    {"dust", R"toml([law.dusty]
kind = "dust"
rate = "1e-9 s-1"
density_power = 1
slope = 0.5
)toml"},
    {"formula", R"toml([law.mine]
kind = "formula"
expression = "1e-9*beta*rigidity^-0.5/(1 + (r/10)^2)"
gives = "rate"
)toml"},
    {"table", R"toml([law.tabulated]
kind = "table"
table = "rates.ecsv"
)toml"},
    {"sum", R"toml([law.both]
kind = "sum"
of = ["waves", "patches"]

[law.waves]
kind = "slab_turbulence"
relative_field = 0.03

[law.patches]
kind = "patchy"
)toml"},
    {"maximum", R"toml([law.strongest]
kind = "maximum"
of = ["inside", "outside"]

[law.inside]
kind = "falling"
length = "2 kpc"

[law.outside]
kind = "constant"
rate = "1e-11 s-1"
)toml"},
}};

/// Laws of a file alone have their parameters as columns.
bool is_read_from_file(const LawEntry& law) {
    return law.name == "table";
}

std::string in_unit(const LawParameter& parameter, double value) {
    if (parameter.dimension == dimension::none) {
        return fmt::format("{:g}", value);
    }
    // Units multiply out to the last bit but one: the neighbour may be the round number that is meant.
    std::string text = format_quantity(value, parameter.dimension);
    for (const double end : {-HUGE_VAL, HUGE_VAL}) {
        const std::string near = format_quantity(std::nextafter(value, end), parameter.dimension);
        text = near.size() < text.size() ? near : text;
    }
    // Rates are spoken of per second, not in hertz.
    return text.ends_with(" Hz") ? text.substr(0, text.size() - 2) + "s-1" : text;
}

std::string unit_text(const LawParameter& parameter) {
    switch (parameter.kind) {
    case ParameterKind::choice:
        return "choice";
    case ParameterKind::words:
        return "list of choices";
    case ParameterKind::text:
        return "formula";
    case ParameterKind::number:
    case ParameterKind::list:
        break;
    }
    std::string unit = "number";
    if (!(parameter.dimension == dimension::none)) {
        const std::string example =
            parameter.dimension == dimension::frequency ? "1 s-1" : describe(parameter.dimension).example;
        unit = example.substr(example.find(' ') + 1);
    }
    return parameter.kind == ParameterKind::list ? "list, " + unit : unit;
}

std::string range_of(const LawParameter& parameter) {
    if (!parameter.choices.empty()) {
        return std::string(parameter.choices);
    }
    if (parameter.kind == ParameterKind::text) {
        return "";
    }
    std::string text = parameter.least == scenario::above_zero
                           ? "above 0"
                           : fmt::format("at least {}", in_unit(parameter, parameter.least));
    if (std::isfinite(parameter.greatest)) {
        text += fmt::format(", at most {}", in_unit(parameter, parameter.greatest));
    }
    return text;
}

std::string default_of(const LawParameter& parameter) {
    if (parameter.required) {
        return "must be given";
    }
    if (!parameter.text.empty()) {
        return std::string(parameter.text);
    }
    return parameter.kind == ParameterKind::number && !std::isnan(parameter.otherwise)
               ? in_unit(parameter, parameter.otherwise)
               : "none";
}

std::string_view class_text(const LawEntry& law) {
    switch (law.kind) {
    case LawClass::shape:
        return "a shape S times its rate; can be a factor of another law";
    case LawClass::physical:
        return "a scattering rate nu as it stands";
    case LawClass::combined:
        break;
    }
    return "made of other laws";
}

/// "formula   nu = rate", going on below where the text starts.
std::string field(std::string_view head, std::string_view text) {
    constexpr std::size_t column = 10;
    return wrapped(fmt::format("  {:<{}}{}", head, column - 2, text), column);
}

/// The text as a cell of a table in Markdown.
std::string cell(std::string_view text) {
    std::string result;
    for (const char c : text) {
        result += c == '|' ? "\\|" : std::string(1, c);
    }
    return result;
}

constexpr std::string_view page_head = R"(# Scattering laws

A law gives the rate nu [s-1] at which scattering makes the directions of cosmic rays isotropic. Along the field they
diffuse with kappa = v^2/(3 nu); their mean free path is v/nu. A scenario has any number of `[law.NAME]`, each of a kind
below; `transport.laws` says which of them are solved for, and [scenario.md](scenario.md) lists the keys. `aureole laws`
prints the list of kinds and `aureole laws KIND` what stands here of one. This page is made from the same catalogue.

- **Shapes** (S) have no dimension and are multiplied by their `rate`. They can also stand as factors of another law, without
  a rate of their own, in `[law.NAME.factor.ANOTHER]`. So can a `formula` that gives a factor.
- **Combined** laws name others in `of`. A law that is part of another is not solved for by itself unless `transport.laws`
  names it.
- **Anchors** scale a whole law by one factor, so that laws can be compared at the same observable: `anchor = "rate"` with
  `anchor_rate` at `anchor_radius`, `anchor_height` and `anchor_rigidity` (for a particle of speed c), `"energy_density"` or
  `"grammage"` with their values at a place, `"gamma_luminosity"` of the galaxy, or `"absolute"`, as it stands.
- In formulas r_g = rigidity/B is the gyroradius, Omega = v/r_g the gyrofrequency, R a rigidity where it stands over another
  one and else the distance from the axis. Every rate is kept between 1e-25 s-1 and Omega.

| kind | is | what it stands for | delta of nu ~ rigidity^-delta |
|---|---|---|---|
)";

constexpr std::string_view table_note = R"(
The file has the columns `R`, `z`, `rigidity` and `rate`, in any order and among others: ECSV with a unit for each, or CSV
with the units in its heads, `R [kpc],z [kpc],rigidity [GV],rate [s-1]`. Every combination of its R, z and rigidities must
have one row. z is the distance from the plane.
)";

std::string class_name(const LawEntry& law) {
    return law.kind == LawClass::shape ? "shape" : law.kind == LawClass::combined ? "combined" : "rate";
}

std::string section_of(const LawEntry& law) {
    std::string page = fmt::format("\n## {}\n\n{}: {}.\n\n    {}\n\n", law.name, law.mechanism,
                                   class_text(law), law.formula);
    page += fmt::format("- Needs: {}.\n- delta: {}.\n- Source: {}.\n- Caution: {}.\n", law.media, law.slope,
                        law.source, law.caution);
    if (is_read_from_file(law)) {
        page += table_note;
    } else if (!law.parameters.empty()) {
        page += "\n| key | unit | range | default | meaning |\n|---|---|---|---|---|\n";
        for (const LawParameter& parameter : law.parameters) {
            page += fmt::format("| `{}` | {} | {} | {} | {} |\n", parameter.name, unit_text(parameter),
                                cell(range_of(parameter)), cell(default_of(parameter)), cell(parameter.help));
        }
    }
    if (law.name == "formula") {
        page += "\n| variable | meaning |\n|---|---|\n";
        for (const auto& variable : transport::formula_variables()) {
            page += fmt::format("| `{}` | {} |\n", variable.name, cell(variable.help));
        }
    }
    return page + fmt::format("\n```toml\n{}```\n", law_example(law));
}

} // namespace

std::string law_list() {
    std::string text;
    for (const LawEntry& law : transport::law_catalogue()) {
        text += wrapped(fmt::format(" {:<21} {}", law.name, law.mechanism), 22).substr(1);
    }
    return text;
}

std::string law_example(const LawEntry& law) {
    const auto found = std::find_if(examples.begin(), examples.end(),
                                    [&](const auto& example) { return example.first == law.name; });
    return found == examples.end() ? "" : std::string(found->second);
}

std::string law_text(const LawEntry& law) {
    std::string text = wrapped(fmt::format("{}: {}", law.name, law.mechanism), 0);
    text += field("is", class_text(law)) + field("formula", law.formula) + field("needs", law.media) +
            field("delta", law.slope) + field("source", law.source) + field("caution", law.caution);
    if (is_read_from_file(law)) {
        text += "\nColumns of the file (ECSV, or CSV with units in its heads such as \"R [kpc]\"):\n"
                "  R, z, rigidity, rate; one row for every combination of R, z, rigidity\n";
    } else if (!law.parameters.empty()) {
        text += "\nParameters (unit; range; default):\n";
        for (const LawParameter& parameter : law.parameters) {
            const std::string range = range_of(parameter);
            text += wrapped(fmt::format("  {}  {}; {}{}{}", parameter.name, unit_text(parameter), range,
                                        range.empty() ? "" : "; ", default_of(parameter)),
                            6);
            text += wrapped(fmt::format("      {}", parameter.help), 6);
        }
    }
    if (law.name == "formula") {
        text += "\nVariables:\n";
        for (const auto& variable : transport::formula_variables()) {
            text += wrapped(fmt::format("  {:<10} {}", variable.name, variable.help), 13);
        }
    }
    return text + "\nExample:\n" + law_example(law);
}

std::string laws_page() {
    std::string page(page_head);
    for (const LawEntry& law : transport::law_catalogue()) {
        page += fmt::format("| [`{0}`](#{0}) | {1} | {2} | {3} |\n", law.name, class_name(law),
                            cell(law.mechanism), cell(law.slope));
    }
    for (const LawEntry& law : transport::law_catalogue()) {
        page += section_of(law);
    }
    return page;
}

int laws(const std::string& name) {
    if (name.empty()) {
        fmt::print("{}", law_list());
        return 0;
    }
    std::vector<std::string_view> names;
    for (const LawEntry& law : transport::law_catalogue()) {
        if (law.name == name) {
            fmt::print("{}", law_text(law));
            return 0;
        }
        names.push_back(law.name);
    }
    throw Error(ErrorKind::usage, fmt::format("laws: found no scattering law \"{}\", the nearest is \"{}\"; "
                                              "'aureole laws' lists them",
                                              name, transport::nearest_word(name, names)));
}

} // namespace aureole::app
