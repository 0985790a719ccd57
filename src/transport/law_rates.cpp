#include "law_balance.hpp"
#include "law_terms.hpp"

#include "aureole/base/constants.hpp"
#include "aureole/base/error.hpp"
#include "aureole/transport/law.hpp"

#include <fmt/format.h>

#include <algorithm>
#include <array>
#include <cassert>
#include <cmath>
#include <limits>

namespace aureole::transport {

namespace {

/// Places worked on at once: scratch memory of a few of these stays in the first cache.
constexpr std::size_t block_size = 256;
using Scratch = std::array<double, block_size>;

struct Task {
    const PreparedLaw& law;
    const Particle& particle;
    const ResonantPressure& pressure;
};

/// ln(1 + x^(1/width)), without overflow.
double log_bend(double log_x, double width) {
    const double t = log_x / width;
    return t > 0 ? t + std::log1p(std::exp(-t)) : std::log1p(std::exp(t));
}

double shape_value(const RigidityShape& shape, const Particle& particle) {
    const double log_ratio = std::log(particle.rigidity / shape.reference);
    double log_value = -shape.slope * log_ratio;
    double slope_below = shape.slope;
    for (std::size_t i = 0; i < shape.break_rigidity.size(); ++i) {
        const double width = shape.break_width[i];
        const double log_break = std::log(shape.break_rigidity[i] / shape.reference);
        log_value -= (shape.break_slope[i] - slope_below) * width *
                     (log_bend(log_ratio - log_break, width) - log_bend(-log_break, width));
        slope_below = shape.break_slope[i];
    }
    return std::exp(log_value) * std::pow(particle.beta, shape.beta_power);
}

double particle_factor(const PreparedTerm& term, const Particle& particle) {
    double factor =
        std::pow(particle.speed, term.speed_power) * std::pow(particle.rigidity, term.rigidity_power);
    for (const RigidityShape& shape : term.shapes) {
        factor *= shape_value(shape, particle);
    }
    return factor;
}

[[noreturn]] void
refuse(const Task& task, std::string_view name, std::size_t i, double value, std::string_view expected) {
    const Place& place = task.law.places[i];
    throw Error(
        ErrorKind::scenario,
        fmt::format("law '{}': found {:g} at R = {:g} kpc, z = {:g} kpc, rigidity {:g} GV, expected {}", name,
                    value, place.radius / constants::kiloparsec, place.height / constants::kiloparsec,
                    task.particle.rigidity / gigavolt(), expected));
}

std::span<const double>
needed_pressure(const PreparedTerm& term, std::span<const double> values, std::size_t places) {
    if (values.size() != places) {
        throw Error(
            ErrorKind::runtime,
            fmt::format("law '{}' needs the pressure of the cosmic rays in resonance: found {} values, "
                        "expected {}",
                        term.name, values.size(), places));
    }
    return values;
}

void set_balance(const PreparedTerm& term, const Task& task, std::size_t begin, std::span<double> out) {
    const auto gradient = needed_pressure(term, task.pressure.gradient, task.law.places.size());
    const std::size_t n = out.size();
    const double inverse = 1 / task.particle.rigidity;
    const double root = std::sqrt(inverse);
    Scratch growth;
    Scratch linear;
    Scratch cascade;
    Scratch landau;
    Scratch start;
    for (std::size_t i = 0; i < n; ++i) {
        // Far below any growth that matters: stands for 0 and keeps the divisions finite.
        growth[i] = std::max(term.growth[begin + i] * std::abs(gradient[begin + i]), 1e-150);
        linear[i] = term.linear[begin + i];
        cascade[i] = 0;
        landau[i] = 0;
    }
    if (!term.turbulent.empty()) {
        for (std::size_t i = 0; i < n; ++i) {
            linear[i] += root * term.turbulent[begin + i];
        }
    }
    for (std::size_t i = 0; i < n; ++i) {
        start[i] = growth[i] / linear[i];
    }
    if (!term.cascade.empty()) {
        for (std::size_t i = 0; i < n; ++i) {
            cascade[i] = inverse * term.cascade[begin + i];
            start[i] = std::min(start[i], cascade_balance(growth[i], cascade[i]));
        }
    }
    if (!term.landau.empty()) {
        for (std::size_t i = 0; i < n; ++i) {
            landau[i] = inverse * term.landau[begin + i];
            start[i] = std::min(start[i], std::sqrt(growth[i] / landau[i]));
        }
    }
    if (term.cascade.empty() && term.landau.empty()) {
        std::copy_n(start.begin(), n, out.begin());
    } else {
        for (std::size_t i = 0; i < n; ++i) {
            out[i] = std::sqrt(start[i]); // apart: it may set errno, which keeps a loop from vector code
        }
        for (std::size_t i = 0; i < n; ++i) {
            out[i] = balance(growth[i], linear[i], cascade[i], landau[i], out[i]);
        }
    }
    constexpr double infinity = std::numeric_limits<double>::infinity();
    for (std::size_t i = 0; i < n; ++i) {
        out[i] = start[i] == infinity ? infinity : out[i]; // undamped waves grow to the Bohm limit
    }
    for (std::size_t i = 0; i < n; ++i) {
        out[i] = growth[i] <= 1e-150 ? 0 : out[i];
    }
}

void set_table(const PreparedTerm& term, const Task& task, std::size_t begin, std::span<double> out) {
    const auto& nodes = term.log_rigidity;
    const double x = std::clamp(std::log(task.particle.rigidity), nodes.front(), nodes.back());
    const auto above = std::upper_bound(nodes.begin(), nodes.end(), x);
    const std::size_t high = std::min(static_cast<std::size_t>(above - nodes.begin()), nodes.size() - 1);
    const std::size_t low = high == 0 ? 0 : high - 1;
    const double share = high == low ? 0 : (x - nodes[low]) / (nodes[high] - nodes[low]);
    for (std::size_t i = 0; i < out.size(); ++i) {
        const double* row = term.log_rate.data() + (begin + i) * nodes.size();
        out[i] = std::exp(row[low] + share * (row[high] - row[low]));
    }
}

void set_formula(const PreparedTerm& term, const Task& task, std::size_t begin, std::span<double> out) {
    const std::size_t variables = formula_variables().size();
    const Particle& particle = task.particle;
    const std::size_t places = task.law.places.size();
    const auto pressure = term.uses_pressure ? needed_pressure(term, task.pressure.pressure, places)
                                             : std::span<const double>{};
    const auto gradient = term.uses_gradient ? needed_pressure(term, task.pressure.gradient, places)
                                             : std::span<const double>{};
    const bool is_rate = term.gives == FormulaGives::rate || term.gives == FormulaGives::factor;
    double numerator = particle.speed * particle.speed / 3;
    if (term.gives == FormulaGives::isotropic_third) {
        numerator /= 3;
    } else if (term.gives == FormulaGives::mean_free_path) {
        numerator = particle.speed / constants::kiloparsec;
    }
    std::vector<double> values(variables);
    term.formulas->with([&](scenario::Formula& formula) {
        for (std::size_t i = 0; i < out.size(); ++i) {
            std::copy_n(term.values.data() + (begin + i) * variables, variables, values.data());
            values[variable_rigidity] = particle.rigidity / gigavolt();
            values[variable_beta] = particle.beta;
            const double field = values[variable_field] * constants::microgauss;
            values[variable_gyroradius] = particle.rigidity / field / constants::kiloparsec;
            values[variable_gyrofrequency] = particle.speed * field / particle.rigidity;
            if (term.uses_pressure) {
                values[variable_pressure] = pressure[begin + i] / constants::electronvolt;
            }
            if (term.uses_gradient) {
                values[variable_gradient] =
                    std::abs(gradient[begin + i]) * constants::kiloparsec / constants::electronvolt;
            }
            const double value = formula.eval(values);
            if (!std::isfinite(value) || value < 0 || (!is_rate && value == 0)) {
                refuse(task, term.name, begin + i, value,
                       is_rate ? "a finite value of at least 0" : "a finite value above 0");
            }
            out[i] = is_rate ? value : numerator / value;
        }
    });
}

void evaluate(const PreparedTerm& term, const Task& task, std::size_t begin, std::span<double> out);

void combine(const PreparedTerm& term, const Task& task, std::size_t begin, std::span<double> out) {
    std::fill(out.begin(), out.end(), 0.0);
    Scratch scratch;
    const std::span<double> part(scratch.data(), out.size());
    for (const PreparedTerm& one : term.parts) {
        evaluate(one, task, begin, part);
        for (std::size_t i = 0; i < out.size(); ++i) {
            out[i] = term.form == TermForm::sum ? out[i] + part[i] : std::max(out[i], part[i]);
        }
    }
}

/// What depends on place and particle at once; 1 for a product.
void set_own(const PreparedTerm& term, const Task& task, std::size_t begin, std::span<double> out) {
    const std::size_t n = out.size();
    const double log_rigidity = std::log(task.particle.rigidity);
    switch (term.form) {
    case TermForm::product:
        std::fill(out.begin(), out.end(), 1.0);
        return;
    case TermForm::cut:
        for (std::size_t i = 0; i < n; ++i) {
            out[i] = std::exp(-std::exp(term.sharpness * (term.second[begin + i] - log_rigidity)));
        }
        return;
    case TermForm::logarithm:
        for (std::size_t i = 0; i < n; ++i) {
            out[i] = std::max(1.0, term.second[begin + i] - log_rigidity);
        }
        return;
    case TermForm::patches: {
        const double rigidity = std::pow(task.particle.rigidity, -term.slope);
        for (std::size_t i = 0; i < n; ++i) {
            out[i] = std::max(0.0, std::min(rigidity * term.second[begin + i], term.lower) - term.upper);
        }
        return;
    }
    case TermForm::equilibrium:
        set_balance(term, task, begin, out);
        return;
    case TermForm::table:
        set_table(term, task, begin, out);
        return;
    case TermForm::formula:
        set_formula(term, task, begin, out);
        return;
    case TermForm::sum:
    case TermForm::maximum:
        combine(term, task, begin, out);
        return;
    }
}

void evaluate(const PreparedTerm& term, const Task& task, std::size_t begin, std::span<double> out) {
    set_own(term, task, begin, out);
    const double factor = particle_factor(term, task.particle);
    for (std::size_t i = 0; i < out.size(); ++i) {
        out[i] *= factor * term.amplitude[begin + i];
    }
    if (term.form == TermForm::sum || term.form == TermForm::maximum) {
        return;
    }
    Scratch scratch;
    const std::span<double> part(scratch.data(), out.size());
    for (const PreparedTerm& one : term.parts) {
        evaluate(one, task, begin, part);
        for (std::size_t i = 0; i < out.size(); ++i) {
            out[i] *= part[i];
        }
    }
}

void limit(const Task& task,
           const RateLimits& limits,
           std::size_t begin,
           std::span<double> out,
           RateCounts& counts) {
    const double per_field = task.particle.speed / task.particle.rigidity;
    constexpr double greatest = std::numeric_limits<double>::max();
    std::size_t at_bohm = 0;
    std::size_t at_least = 0;
    bool bad = false;
    for (std::size_t i = 0; i < out.size(); ++i) {
        const double field = task.law.field[begin + i];
        const double bohm = limits.bohm && field > 0 ? per_field * field : greatest;
        const double wanted = out[i];
        const bool above = wanted > bohm && bohm < greatest;
        double rate = above ? bohm : wanted;
        const bool below = rate < limits.least && rate >= 0;
        rate = below ? limits.least : rate;
        at_bohm += above ? 1U : 0U;
        at_least += below ? 1U : 0U;
        bad = bad || !(rate > 0) || rate > greatest;
        out[i] = rate;
    }
    if (bad) {
        for (std::size_t i = 0; i < out.size(); ++i) {
            if (!(out[i] > 0) || out[i] > greatest) {
                refuse(task, task.law.name, begin + i, out[i], "a finite scattering rate above 0 s-1");
            }
        }
    }
    counts.at_bohm += at_bohm;
    counts.at_least += at_least;
}

} // namespace

RateCounts rates(const PreparedLaw& law,
                 const Particle& particle,
                 const ResonantPressure& pressure,
                 std::span<double> out,
                 const RateLimits& limits) {
    assert(out.size() == law.places.size());
    const Task task{law, particle, pressure};
    RateCounts counts{.rates = out.size(), .at_bohm = 0, .at_least = 0};
    for (std::size_t begin = 0; begin < out.size(); begin += block_size) {
        const auto block = out.subspan(begin, std::min(block_size, out.size() - begin));
        evaluate(*law.term, task, begin, block);
        limit(task, limits, begin, block, counts);
    }
    return counts;
}

} // namespace aureole::transport
