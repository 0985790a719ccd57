#include "aureole/spectra/closed_form.hpp"

#include "aureole/base/error.hpp"
#include "aureole/base/parallel.hpp"
#include "aureole/base/quadrature.hpp"
#include "aureole/media/cell_average.hpp"
#include "aureole/physics/published_spectra.hpp"

#include <fmt/format.h>

#include <algorithm>
#include <cmath>
#include <optional>

namespace aureole::spectra {

namespace {

using scenario::ProfileSpec;
using scenario::Scenario;

/// Reader of spectra whose spatial part is one number per cell.
Source separable(std::vector<float> amplitude,
                 std::vector<double> weighted_shape,
                 std::shared_ptr<const Basis> basis,
                 Species species) {
    Source source;
    source.species = species;
    source.basis = std::move(basis);
    source.cells = amplitude.size();
    source.name = key_of(species);
    const auto cells = std::make_shared<const std::vector<float>>(std::move(amplitude));
    const auto shape = std::make_shared<const std::vector<double>>(std::move(weighted_shape));
    source.open = [cells, shape]() -> Source::Reader {
        return [cells, shape](std::size_t first, std::size_t count, float* weighted, std::size_t stride) {
            for (std::size_t c = 0; c < count; ++c) {
                const auto value = static_cast<double>((*cells)[first + c]);
                for (std::size_t i = 0; i < shape->size(); ++i) {
                    weighted[c * stride + i] = static_cast<float>(value * (*shape)[i]);
                }
            }
        };
    };
    return source;
}

/// Spectra whose spatial profile has another height at each energy: all averages are worked out once.
Source with_changing_height(const ProfileSpec& space,
                            double height_slope,
                            double reference,
                            const std::vector<double>& weighted_shape,
                            std::shared_ptr<const Basis> basis,
                            const grid::Grid& grid,
                            Species species,
                            const RunContext& context) {
    const std::size_t nodes = basis->nodes();
    const auto values = std::make_shared<std::vector<float>>(grid.stored_cells() * nodes);
    const auto profile_at = [&](std::size_t node) {
        ProfileSpec profile = space;
        profile.height *= std::pow(basis->energy()[node] / reference, height_slope);
        return profile;
    };
    std::vector<std::optional<media::AverageFactors>> factors(nodes);
    for_each_block(context, nodes,
                   [&](std::size_t i) { factors[i] = media::average_factors(profile_at(i), grid); });
    for_each_block(context, grid.nz(), [&](std::size_t plane) {
        const std::size_t cells = grid.plane_cells();
        for (std::size_t i = 0; i < nodes; ++i) {
            float* out = values->data() + plane * cells * nodes + i;
            const auto average = factors[i]
                                     ? factors[i]->across
                                     : media::cell_averages(profile_at(i), grid, plane, plane + 1, false);
            const double scale = weighted_shape[i] * (factors[i] ? factors[i]->along[plane] : 1.0);
            for (std::size_t c = 0; c < cells; ++c) {
                out[c * nodes] = static_cast<float>(average[c] * scale);
            }
        }
    });
    Source source;
    source.species = species;
    source.basis = std::move(basis);
    source.cells = grid.stored_cells();
    source.name = key_of(species);
    source.open = [values, nodes]() -> Source::Reader {
        return [values, nodes](std::size_t first, std::size_t count, float* weighted, std::size_t stride) {
            for (std::size_t c = 0; c < count; ++c) {
                std::copy_n(values->data() + (first + c) * nodes, nodes, weighted + c * stride);
            }
        };
    };
    return source;
}

} // namespace

std::string key_of(Species species) {
    return species == Species::electrons ? "electrons" : "protons";
}

std::function<double(double)> spectral_shape(const Scenario& scenario, Species species) {
    const std::string key = key_of(species);
    const std::string kind = scenario.text(key + ".spectrum");
    if (kind == "local") {
        const std::string name = scenario.text(key + ".local");
        if (species == Species::electrons) {
            return physics::potgieter_2015_electrons;
        }
        return name == "dermer_1986" ? physics::dermer_1986_protons : physics::vos_potgieter_2015_protons;
    }
    const double reference = scenario.quantity(key + ".reference_energy");
    const double slope = scenario.number(key + ".slope");
    const double cutoff = scenario.quantity(key + ".cutoff_energy");
    std::function<double(double)> unnormalised = [reference, slope](double t) {
        return std::pow(t / reference, -slope);
    };
    if (kind == "broken_power_law") {
        const double at = scenario.quantity(key + ".break_energy");
        const double above = scenario.number(key + ".slope_above");
        const double width = scenario.number(key + ".break_smoothness");
        // ln(1 + (t/at)^(1/width)), which stays finite for the sharpest break.
        const auto log_bend = [at, width](double t) {
            const double u = std::log(t / at) / width;
            return u > 0 ? u + std::log1p(std::exp(-u)) : std::log1p(std::exp(u));
        };
        unnormalised = [reference, slope, above, width, log_bend](double t) {
            return std::exp(-slope * std::log(t / reference) -
                            (above - slope) * width * (log_bend(t) - log_bend(reference)));
        };
    }
    return [unnormalised, cutoff](double t) {
        const double cut = cutoff > 0 ? std::exp(-t / cutoff) : 1;
        return unnormalised(t) * cut;
    };
}

std::shared_ptr<const Basis> scenario_basis(const Scenario& scenario, Species species) {
    const std::string key = key_of(species);
    const double from = scenario.quantity(key + ".energy_from");
    const double to = scenario.quantity(key + ".energy_to");
    const auto nodes = static_cast<std::size_t>(scenario.integer(key + ".energy_nodes"));
    if (!(to > from)) {
        throw Error(ErrorKind::scenario,
                    fmt::format("{}.energy_to: found an energy not above {}.energy_from", key, key));
    }
    std::vector<double> energy;
    for (std::size_t i = 0; i < nodes; ++i) {
        energy.push_back(from * std::pow(to / from, static_cast<double>(i) / static_cast<double>(nodes - 1)));
    }
    return std::make_shared<const Basis>(std::move(energy));
}

Source
closed_form(const Scenario& scenario, const grid::Grid& grid, Species species, const RunContext& context) {
    const std::string key = key_of(species);
    const auto basis = scenario_basis(scenario, species);
    const auto shape = spectral_shape(scenario, species);
    const bool local = scenario.text(key + ".spectrum") == "local";
    const double norm = local ? 1 : scenario.quantity(key + ".norm");
    std::vector<double> weighted;
    for (const double t : basis->energy()) {
        weighted.push_back(norm * shape(t) * std::pow(t, weighting));
    }
    const ProfileSpec space = scenario.profile(key + ".space");
    const double height_slope = scenario.number(key + ".height_slope");
    if (height_slope != 0) {
        return with_changing_height(space, height_slope, scenario.quantity(key + ".reference_energy"),
                                    weighted, basis, grid, species, context);
    }
    return separable(media::cell_averages(space, grid, false, context), weighted, basis, species);
}

Source from_energy_density(std::vector<float> energy_density,
                           std::function<double(double)> shape,
                           std::shared_ptr<const Basis> basis,
                           Species species) {
    const auto rule = gauss_legendre(6);
    const auto energy = basis->energy();
    double total = 0; // integral of T N dT of the shape
    for (std::size_t j = 0; j + 1 < energy.size(); ++j) {
        total += integrate(
            rule,
            [&](double log_t) {
                const double t = std::exp(log_t);
                return t * t * shape(t);
            },
            std::log(energy[j]), std::log(energy[j + 1]));
    }
    if (!(total > 0) || !std::isfinite(total)) {
        throw Error(
            ErrorKind::scenario,
            fmt::format(
                "{}: found a spectrum without energy between its nodes, expected a shape above 0 there",
                key_of(species)));
    }
    std::vector<double> weighted;
    for (const double t : energy) {
        weighted.push_back(shape(t) / total * std::pow(t, weighting));
    }
    return separable(std::move(energy_density), weighted, std::move(basis), species);
}

} // namespace aureole::spectra
