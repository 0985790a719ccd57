#include "law_terms.hpp"

#include "aureole/base/constants.hpp"
#include "aureole/base/error.hpp"
#include "aureole/transport/law.hpp"
#include "aureole/transport/self_confinement.hpp"

#include <fmt/format.h>

#include <algorithm>
#include <array>
#include <cmath>

namespace aureole::transport {

namespace {

using Places = std::span<const Place>;
using Medium = std::optional<double> Place::*;

/// How a medium is called in messages, and the scenario keys that give it.
struct MediumText {
    Medium medium;
    std::string_view name, keys;
};

constexpr std::array media_texts{
    MediumText{&Place::field, "the magnetic field", "field.ordered or field.random"},
    MediumText{&Place::ordered_field, "the ordered field", "field.ordered"},
    MediumText{&Place::ion_density, "the density of ions", "gas.hii"},
    MediumText{&Place::neutral_density, "the density of neutral gas", "gas.hi or gas.h2"},
    MediumText{&Place::temperature, "the temperature of the ionised gas", "gas.temperature"},
    MediumText{&Place::alfven_speed, "the Alfven speed", "gas.hii and a field"},
    MediumText{&Place::turbulent_speed, "the turbulent speed", "turbulence.speed"},
    MediumText{&Place::turbulent_scale, "the turbulent scale", "turbulence.scale"},
};

double number_of(const Law& law, std::string_view name) {
    return law.numbers.find(name)->second;
}
const std::vector<double>& list_of(const Law& law, std::string_view name) {
    return law.lists.find(name)->second;
}
const std::string& text_of(const Law& law, std::string_view name) {
    return law.texts.find(name)->second;
}

/// One medium at all places. `parameter`: the parameter of the law that would do instead, if any.
std::vector<double> needed(const Law& law, Places places, Medium medium, std::string_view parameter = "") {
    std::vector<double> values;
    values.reserve(places.size());
    for (const Place& place : places) {
        const std::optional<double>& value = place.*medium;
        if (!value) {
            const auto text = std::find_if(media_texts.begin(), media_texts.end(),
                                           [&](const MediumText& row) { return row.medium == medium; });
            throw Error(ErrorKind::scenario,
                        fmt::format("law '{}' needs {}: found none, expected the key {}{}{}", law.entry->name,
                                    text->name, text->keys,
                                    parameter.empty() ? "" : ", or the law's parameter ", parameter));
        }
        if (!(*value >= 0) || std::isinf(*value)) {
            const auto text = std::find_if(media_texts.begin(), media_texts.end(),
                                           [&](const MediumText& row) { return row.medium == medium; });
            throw Error(
                ErrorKind::scenario,
                fmt::format("law '{}': found {:g} for {} at R = {:g} kpc, z = {:g} kpc, expected a finite "
                            "number of at least 0",
                            law.entry->name, *value, text->name, place.radius / constants::kiloparsec,
                            place.height / constants::kiloparsec));
        }
        values.push_back(*value);
    }
    return values;
}

/// A parameter where it is given, else the medium.
std::vector<double> given_or(const Law& law, Places places, std::string_view parameter, Medium medium) {
    const double given = number_of(law, parameter);
    return std::isnan(given) ? needed(law, places, medium, parameter)
                             : std::vector<double>(places.size(), given);
}

void multiply_power(const Law& law,
                    Places places,
                    Medium medium,
                    std::string_view power,
                    std::string_view reference,
                    std::vector<double>& amplitude) {
    const double exponent = number_of(law, power);
    if (exponent == 0) {
        return;
    }
    const double unit = number_of(law, reference);
    const auto values = needed(law, places, medium);
    for (std::size_t i = 0; i < values.size(); ++i) {
        amplitude[i] *= std::pow(values[i] / unit, exponent);
    }
}

void multiply_falling(const Law& law, Places places, std::vector<double>& amplitude) {
    const std::string& along = text_of(law, "along");
    const std::string& form = text_of(law, "form");
    const double length = number_of(law, "length");
    const double axis_ratio = along == "ellipsoidal" ? number_of(law, "axis_ratio") : 1;
    for (std::size_t i = 0; i < places.size(); ++i) {
        const double height = std::abs(places[i].height);
        double distance = std::hypot(places[i].radius, height / axis_ratio);
        if (along == "height") {
            distance = height;
        } else if (along == "radius") {
            distance = places[i].radius;
        }
        const double s = distance / length;
        if (form == "power") {
            amplitude[i] *= std::pow(1 + s, -number_of(law, "slope"));
        } else if (form == "stretched") {
            amplitude[i] *= std::exp(-std::pow(s, number_of(law, "stretch")));
        } else {
            amplitude[i] *= std::exp(-s);
        }
    }
}

/// The law's shape: what the place gives into the amplitude, what the particle gives into the shapes.
void multiply_shape(const Law& law, Places places, PreparedTerm& term) {
    const std::string_view name = law.entry->name;
    if (name == "rigidity_power") {
        term.shapes.push_back({.reference = number_of(law, "reference_rigidity"),
                               .slope = number_of(law, "slope"),
                               .beta_power = number_of(law, "beta_power"),
                               .break_rigidity = list_of(law, "break_rigidity"),
                               .break_slope = list_of(law, "break_slope"),
                               .break_width = list_of(law, "break_width")});
    } else if (name == "falling") {
        multiply_falling(law, places, term.amplitude);
    } else if (name == "plasma_power") {
        multiply_power(law, places, &Place::field, "field_power", "field_reference", term.amplitude);
        multiply_power(law, places, &Place::ion_density, "density_power", "density_reference",
                       term.amplitude);
        multiply_power(law, places, &Place::turbulent_speed, "speed_power", "speed_reference",
                       term.amplitude);
        multiply_power(law, places, &Place::turbulent_scale, "scale_power", "scale_reference",
                       term.amplitude);
        multiply_power(law, places, &Place::temperature, "temperature_power", "temperature_reference",
                       term.amplitude);
    } else {
        multiply_power(law, places, &Place::field, "field_power", "field_reference", term.amplitude);
        const double power = number_of(law, "density_power");
        if (power != 0) {
            const double unit = number_of(law, "density_reference");
            const auto ions = needed(law, places, &Place::ion_density);
            const auto neutral = needed(law, places, &Place::neutral_density);
            for (std::size_t i = 0; i < places.size(); ++i) {
                term.amplitude[i] *= std::pow((ions[i] + neutral[i]) / unit, power);
            }
        }
        term.shapes.push_back({.reference = number_of(law, "reference_rigidity"),
                               .slope = number_of(law, "slope"),
                               .beta_power = 0,
                               .break_rigidity = {},
                               .break_slope = {},
                               .break_width = {}});
    }
}

/// c Omega (q - 1) (dB/B)^2 (r_g/L)^(q-1), with Omega = v B/R and r_g = R/B.
void prepare_turbulence(const Law& law, Places places, PreparedTerm& term) {
    const double q = number_of(law, "slope");
    const auto field = needed(law, places, &Place::field);
    const auto scale = given_or(law, places, "outer_scale", &Place::turbulent_scale);
    const double given = number_of(law, "relative_field");
    const auto ordered = std::isnan(given) ? needed(law, places, &Place::ordered_field, "relative_field")
                                           : std::vector<double>(places.size(), 0.0);
    for (std::size_t i = 0; i < places.size(); ++i) {
        if (field[i] == 0) {
            term.amplitude[i] = 0;
            continue;
        }
        const double share = ordered[i] / field[i];
        const double energy = std::isnan(given) ? std::max(0.0, (1 - share) * (1 + share)) : given * given;
        term.amplitude[i] *= number_of(law, "coefficient") * (q - 1) * energy * field[i] *
                             std::pow(field[i] * scale[i], 1 - q);
    }
    term.speed_power = 1;
    term.rigidity_power = q - 2;
    if (law.entry->name != "fast_modes") {
        return;
    }
    const double damping_scale = number_of(law, "damping_scale");
    if (damping_scale > 0) {
        term.form = TermForm::cut;
        term.sharpness = number_of(law, "sharpness");
        for (const double strength : field) {
            term.second.push_back(std::log(strength) + std::log(damping_scale));
        }
    }
}

/// v^2 max(1, ln(l_A/r_g))/(3 c_A c l_A).
void prepare_anisotropic(const Law& law, Places places, PreparedTerm& term) {
    const auto field = needed(law, places, &Place::field);
    auto scale = std::vector<double>(places.size(), number_of(law, "alfven_scale"));
    if (std::isnan(number_of(law, "alfven_scale"))) {
        const auto alfven = needed(law, places, &Place::alfven_speed, "alfven_scale");
        const auto turbulent = needed(law, places, &Place::turbulent_speed, "alfven_scale");
        const auto outer = needed(law, places, &Place::turbulent_scale, "alfven_scale");
        for (std::size_t i = 0; i < places.size(); ++i) {
            scale[i] = turbulent[i] > 0 ? outer[i] * std::pow(alfven[i] / turbulent[i], 3) : 0;
        }
    }
    term.form = TermForm::logarithm;
    term.speed_power = 2;
    term.second.assign(places.size(), 0);
    for (std::size_t i = 0; i < places.size(); ++i) {
        if (!(scale[i] > 0) || !(field[i] > 0)) {
            term.amplitude[i] = 0;
            continue;
        }
        term.amplitude[i] /= 3 * number_of(law, "coefficient") * constants::speed_of_light * scale[i];
        term.second[i] = std::log(scale[i]) + std::log(field[i]);
    }
}

void prepare_patches(const Law& law, Places places, PreparedTerm& term) {
    const auto field = needed(law, places, &Place::field);
    const double slope = number_of(law, "slope");
    const double size = number_of(law, "size");
    const double least = number_of(law, "least_size");
    const double greatest = number_of(law, "greatest_size");
    term.form = TermForm::patches;
    term.slope = slope;
    term.speed_power = 1;
    term.lower = std::pow(least / size, -slope); // infinite: no limit
    term.upper = std::isnan(greatest) ? 0 : std::pow(greatest / size, -slope);
    for (std::size_t i = 0; i < places.size(); ++i) {
        term.amplitude[i] *= number_of(law, "filling") / (slope * size);
        term.second.push_back(std::pow(field[i] * size, slope));
    }
}

void prepare_self_confinement(const Law& law, Places places, PreparedTerm& term) {
    const std::size_t n = places.size();
    const auto field = needed(law, places, &Place::field);
    const auto alfven = needed(law, places, &Place::alfven_speed);
    const auto words = split_words(text_of(law, "damping"));
    const auto damped_by = [&](std::string_view word) {
        return std::find(words.begin(), words.end(), word) != words.end();
    };
    term.form = TermForm::equilibrium;
    term.speed_power = 1;
    term.rigidity_power = -1;
    term.growth.assign(n, 0);
    term.linear.assign(n, number_of(law, "linear_damping"));
    for (std::size_t i = 0; i < n; ++i) {
        term.amplitude[i] *= number_of(law, "coefficient") * field[i];
        term.growth[i] = field[i] > 0 ? wave_growth(alfven[i], 1, field[i]) : 0;
    }
    if (damped_by("ion_neutral")) {
        const auto neutral = needed(law, places, &Place::neutral_density);
        const auto temperature = needed(law, places, &Place::temperature);
        for (std::size_t i = 0; i < n; ++i) {
            term.linear[i] +=
                ion_neutral_damping(neutral[i], temperature[i], number_of(law, "ion_neutral_coefficient"));
        }
    }
    // Gyroradius of 1 statvolt: the rates below then fall as rigidity^-1/2 and rigidity^-1.
    if (damped_by("turbulent")) {
        const auto speed = needed(law, places, &Place::turbulent_speed);
        const auto scale = needed(law, places, &Place::turbulent_scale);
        for (std::size_t i = 0; i < n; ++i) {
            term.turbulent.push_back(
                alfven[i] > 0 ? turbulent_damping(speed[i], scale[i], 1 / field[i], alfven[i]) : 0);
        }
    }
    if (damped_by("nonlinear_cascade")) {
        for (std::size_t i = 0; i < n; ++i) {
            term.cascade.push_back(field[i] > 0 ? cascade_damping(1 / field[i], alfven[i]) : 0);
        }
    }
    if (damped_by("nonlinear_landau")) {
        const auto temperature = needed(law, places, &Place::temperature);
        for (std::size_t i = 0; i < n; ++i) {
            term.landau.push_back(field[i] > 0 ? landau_damping(1 / field[i], temperature[i]) : 0);
        }
    }
}

/// Where a value lies among ascending nodes: the node below and the way to the next, 0 to 1; the edge
/// outside.
struct Bracket {
    std::size_t node = 0;
    double share = 0;
};

Bracket bracket(const std::vector<double>& nodes, double value) {
    if (nodes.size() == 1 || value <= nodes.front()) {
        return {};
    }
    if (value >= nodes.back()) {
        return {nodes.size() - 2, 1};
    }
    const auto above = std::upper_bound(nodes.begin(), nodes.end(), value);
    const auto node = static_cast<std::size_t>(above - nodes.begin()) - 1;
    return {node, (value - nodes[node]) / (nodes[node + 1] - nodes[node])};
}

void prepare_table(const Law& law, Places places, PreparedTerm& term) {
    const auto& radius = list_of(law, "radius");
    const auto& height = list_of(law, "height");
    const auto& rigidity = list_of(law, "rigidity");
    const auto& rate = list_of(law, "rate");
    term.form = TermForm::table;
    for (const double value : rigidity) {
        term.log_rigidity.push_back(std::log(value));
    }
    const auto log_at = [&](std::size_t r, std::size_t z, std::size_t p) {
        const std::size_t row =
            std::min(r, radius.size() - 1) * height.size() + std::min(z, height.size() - 1);
        return std::log(rate[row * rigidity.size() + p]);
    };
    term.log_rate.reserve(places.size() * rigidity.size());
    for (const Place& place : places) {
        const Bracket r = bracket(radius, place.radius);
        const Bracket z = bracket(height, std::abs(place.height));
        for (std::size_t p = 0; p < rigidity.size(); ++p) {
            const double inner = std::lerp(log_at(r.node, z.node, p), log_at(r.node, z.node + 1, p), z.share);
            const double outer =
                std::lerp(log_at(r.node + 1, z.node, p), log_at(r.node + 1, z.node + 1, p), z.share);
            term.log_rate.push_back(std::lerp(inner, outer, r.share));
        }
    }
}

/// Variables of a formula that places give, in the order of formula_variables().
void prepare_formula(const Law& law, Places places, PreparedTerm& term) {
    struct Variable {
        std::size_t index;
        Medium medium;
        double unit;
    };
    static constexpr std::array media_variables{
        Variable{variable_field, &Place::field, constants::microgauss},
        Variable{6, &Place::ordered_field, constants::microgauss},
        Variable{7, &Place::ion_density, 1},
        Variable{8, &Place::neutral_density, 1},
        Variable{9, &Place::temperature, 1},
        Variable{10, &Place::alfven_speed, 1e5},
        Variable{11, &Place::turbulent_speed, 1e5},
        Variable{12, &Place::turbulent_scale, constants::kiloparsec},
    };
    const std::string& expression = text_of(law, "expression");
    const auto names = variable_names();
    const auto uses = [&](std::size_t variable) { return mentions(expression, names[variable]); };
    term.form = TermForm::formula;
    term.uses_pressure = uses(variable_pressure);
    term.uses_gradient = uses(variable_gradient);
    const auto choices = split_words(find_parameter(*law.entry, "gives")->choices);
    term.gives = static_cast<FormulaGives>(std::find(choices.begin(), choices.end(), text_of(law, "gives")) -
                                           choices.begin());
    term.values.assign(places.size() * names.size(), 1);
    for (std::size_t i = 0; i < places.size(); ++i) {
        const std::span values = std::span(term.values).subspan(i * names.size(), names.size());
        values[0] = places[i].radius / constants::kiloparsec;
        values[1] = places[i].height / constants::kiloparsec;
        values[2] = std::hypot(values[0], values[1]);
    }
    const bool gyration = uses(variable_gyroradius) || uses(variable_gyrofrequency);
    for (const Variable& variable : media_variables) {
        if (uses(variable.index) || (gyration && variable.index == variable_field)) {
            const auto medium = needed(law, places, variable.medium);
            for (std::size_t i = 0; i < places.size(); ++i) {
                term.values[i * names.size() + variable.index] = medium[i] / variable.unit;
            }
        }
    }
    term.formulas = std::make_shared<Pool<scenario::Formula>>(
        [expression, names] { return scenario::Formula(expression, names); });
}

/// Shapes merge into the term; a formula stays a part of it.
void multiply_factors(const Law& law, Places places, PreparedTerm& term) {
    for (const Law& factor : law.children) {
        if (factor.entry->kind == LawClass::shape) {
            multiply_shape(factor, places, term);
        } else {
            term.parts.emplace_back();
            term.parts.back().name = factor.entry->name;
            term.parts.back().amplitude.assign(places.size(), 1);
            prepare_formula(factor, places, term.parts.back());
        }
        multiply_factors(factor, places, term);
    }
}

PreparedTerm prepare_term(const Law& law, Places places) {
    PreparedTerm term;
    const std::string_view name = law.entry->name;
    term.name = name;
    term.amplitude.assign(places.size(), law.scale);
    if (law.entry->kind == LawClass::shape) {
        for (double& value : term.amplitude) {
            value *= number_of(law, "rate");
        }
        multiply_shape(law, places, term);
    } else if (name == "constant") {
        for (double& value : term.amplitude) {
            value *= number_of(law, "rate");
        }
    } else if (name == "slab_turbulence" || name == "fast_modes") {
        prepare_turbulence(law, places, term);
    } else if (name == "anisotropic_alfvenic") {
        prepare_anisotropic(law, places, term);
    } else if (name == "self_confinement") {
        prepare_self_confinement(law, places, term);
    } else if (name == "patchy") {
        prepare_patches(law, places, term);
    } else if (name == "formula") {
        prepare_formula(law, places, term);
    } else if (name == "table") {
        prepare_table(law, places, term);
    } else {
        term.form = name == "sum" ? TermForm::sum : TermForm::maximum;
    }
    if (law.entry->kind == LawClass::combined) {
        for (const Law& child : law.children) {
            term.parts.push_back(prepare_term(child, places));
        }
    } else {
        multiply_factors(law, places, term);
    }
    return term;
}

} // namespace

PreparedLaw prepare(const Law& law, std::span<const Place> places) {
    PreparedLaw prepared{.name = std::string(law.entry->name),
                         .places = std::vector<Place>(places.begin(), places.end()),
                         .field = {},
                         .term = std::make_shared<const PreparedTerm>(prepare_term(law, places))};
    for (const Place& place : places) {
        prepared.field.push_back(place.field.value_or(0));
    }
    return prepared;
}

} // namespace aureole::transport
