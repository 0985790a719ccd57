#include "aureole/transport/secondary_source.hpp"

#include "aureole/base/constants.hpp"
#include "aureole/base/parallel.hpp"
#include "aureole/base/quadrature.hpp"
#include "aureole/physics/kinematics.hpp"
#include "aureole/transport/particle.hpp"

#include <algorithm>
#include <cmath>

namespace aureole::transport {
namespace {

/// Visits Gauss-Legendre points of the basis intervals: visit(T, weight of dT, interval, ln T).
template <class Visit> void for_points(const spectra::Basis& basis, int points, double from, Visit&& visit) {
    const QuadratureRule rule = gauss_legendre(points);
    const auto energy = basis.energy();
    for (std::size_t interval = 0; interval < basis.intervals(); ++interval) {
        if (energy[interval + 1] <= from) {
            continue;
        }
        const double low = std::log(std::max(energy[interval], from));
        const double half = 0.5 * (std::log(energy[interval + 1]) - low);
        for (std::size_t q = 0; q < rule.node.size(); ++q) {
            const double log_t = low + half * (1 + rule.node[q]);
            const double t = std::exp(log_t);
            visit(t, half * rule.weight[q] * t, interval, log_t);
        }
    }
}

void add_point(
    const spectra::Basis& basis, std::size_t interval, double log_t, double weight, std::span<double> out) {
    const auto cubic = basis.cubic(interval, log_t);
    const std::size_t start = basis.stencil_start(interval);
    for (std::size_t s = 0; s < basis.stencil_size(); ++s) {
        out[start + s] += weight * cubic[s];
    }
}

double proton_speed(double kinetic_energy) {
    return constants::speed_of_light * physics::speed_over_c(kinetic_energy, constants::proton_rest_energy);
}

/// A point of the integral over protons and what is the same for all leptons there.
struct ProtonPoint {
    double kinetic_energy, log_energy, weight, positrons;
    std::size_t interval;
};

std::vector<ProtonPoint> proton_points(const TransportSpec& spec, const spectra::Basis& protons) {
    std::vector<ProtonPoint> points;
    for_points(
        protons, 3, physics::pion_threshold(),
        [&](double t, double width, std::size_t interval, double log_t) {
            const double weight =
                spec.nuclear_enhancement * width * std::pow(t, -spectra::weighting) * proton_speed(t);
            points.push_back({t, log_t, weight, physics::positron_fraction(spec.pion_model, t), interval});
        });
    return points;
}

} // namespace

std::vector<double> integral_weights(const spectra::Basis& basis,
                                     const std::function<double(double)>& g,
                                     int points,
                                     double from) {
    std::vector<double> weights(basis.nodes(), 0.0);
    for_points(basis, points, from, [&](double t, double width, std::size_t interval, double log_t) {
        add_point(basis, interval, log_t, width * g(t) * std::pow(t, -spectra::weighting), weights);
    });
    return weights;
}

SecondaryMatrix secondary_matrix(const TransportSpec& spec,
                                 const spectra::Basis& protons,
                                 std::span<const double> lepton_momentum,
                                 const RunContext& context) {
    SecondaryMatrix matrix;
    matrix.momentum.assign(lepton_momentum.begin(), lepton_momentum.end());
    matrix.protons = protons.nodes();
    const std::size_t rows = matrix.momentum.size();
    std::vector<Particle> leptons;
    for (const double p : matrix.momentum) {
        leptons.push_back(particle_of_momentum(p, constants::electron_rest_energy));
    }
    const auto points = proton_points(spec, protons);
    std::vector<double> cross_section(points.size() * rows); // [points][leptons]
    for_each_block(context, points.size(), [&](std::size_t n) {
        const double t = points[n].kinetic_energy;
        const physics::SecondarySpectrum spectrum(spec.secondary_model, spec.pion_model,
                                                  physics::Secondary::electrons, t);
        for (std::size_t row = 0; row < rows; ++row) {
            const double energy = leptons[row].total_energy;
            cross_section[n * rows + row] = energy < t ? spectrum(energy) : 0.0;
        }
    });
    matrix.electrons.assign(rows * matrix.protons, 0.0);
    matrix.positrons = matrix.electrons;
    for (std::size_t n = 0; n < points.size(); ++n) {
        const ProtonPoint& point = points[n];
        for (std::size_t row = 0; row < rows; ++row) {
            const double weight = point.weight * leptons[row].speed * cross_section[n * rows + row];
            if (weight > 0) {
                const auto part = [&](std::vector<double>& of) {
                    return std::span(of).subspan(row * matrix.protons, matrix.protons);
                };
                add_point(protons, point.interval, point.log_energy, (1 - point.positrons) * weight,
                          part(matrix.electrons));
                add_point(protons, point.interval, point.log_energy, point.positrons * weight,
                          part(matrix.positrons));
            }
        }
    }
    return matrix;
}

std::vector<double>
gamma_weights(const TransportSpec& spec, const spectra::Basis& protons, const RunContext& context) {
    static const QuadratureRule rule = gauss_legendre(8);
    constexpr double low = 0.1 * constants::gigaelectronvolt;
    constexpr double high = 100 * constants::gigaelectronvolt;
    const bool edged = spec.pion_model == physics::PionModel::kelner_2006;
    const double panel = edged ? 0.2 : 2.4; // its spectrum below 100 GeV has an edge
    const auto power = [&](double t) {
        const auto range = physics::pion_photon_range(t);
        const double from = std::max(low, range.min);
        const double to = std::min(high, edged ? t : range.max);
        if (!(from < to)) {
            return 0.0;
        }
        return integrate_panels(
            rule,
            [&](double y) {
                const double e = std::exp(y);
                return e * e * physics::pion_gamma_cross_section(spec.pion_model, e, t);
            },
            std::log(from), std::log(to), static_cast<int>(std::ceil(std::log(to / from) / panel)));
    };
    const auto points = proton_points(spec, protons);
    std::vector<double> photons(points.size());
    for_each_block(context, points.size(),
                   [&](std::size_t n) { photons[n] = points[n].weight * power(points[n].kinetic_energy); });
    std::vector<double> weights(protons.nodes(), 0.0);
    for (std::size_t n = 0; n < points.size(); ++n) {
        add_point(protons, points[n].interval, points[n].log_energy, photons[n], weights);
    }
    return weights;
}

} // namespace aureole::transport
