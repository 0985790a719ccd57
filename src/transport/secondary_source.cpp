#include "aureole/transport/secondary_source.hpp"

#include "aureole/base/constants.hpp"
#include "aureole/base/parallel.hpp"
#include "aureole/base/quadrature.hpp"
#include "aureole/physics/kinematics.hpp"
#include "aureole/transport/particle.hpp"

#include <algorithm>
#include <array>
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

void fill_rows(const TransportSpec& spec,
               const spectra::Basis& protons,
               std::size_t row,
               SecondaryMatrix& m) {
    const Particle lepton = particle_of_momentum(m.momentum[row], constants::electron_rest_energy);
    const double energy = lepton.total_energy;
    const std::span all = std::span(m.electrons).subspan(row * m.protons, m.protons);
    const std::span positive = std::span(m.positrons).subspan(row * m.protons, m.protons);
    const double from = std::max(physics::pion_threshold(), energy);
    for_points(protons, 3, from, [&](double t, double width, std::size_t interval, double log_t) {
        const double cross_section = physics::secondary_cross_section(
            spec.secondary_model, spec.pion_model, physics::Secondary::electrons, energy, t);
        if (cross_section > 0) {
            const double weight = spec.nuclear_enhancement * width * std::pow(t, -spectra::weighting) *
                                  proton_speed(t) * cross_section * lepton.speed;
            const double share = physics::positron_fraction(spec.pion_model, t);
            add_point(protons, interval, log_t, (1 - share) * weight, all);
            add_point(protons, interval, log_t, share * weight, positive);
        }
    });
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
    matrix.electrons.assign(rows * matrix.protons, 0.0);
    matrix.positrons = matrix.electrons;
    const std::size_t step = rows > 8 ? 2 : 1;
    const std::size_t nodes = (rows + step - 1) / step;
    for_each_block(context, nodes, [&](std::size_t n) { fill_rows(spec, protons, n * step, matrix); });
    for (std::size_t row = 1; step == 2 && row < rows; row += 2) {
        const double x = std::log(matrix.momentum[row]);
        const std::size_t start =
            std::min(row / 2 == 0 ? std::size_t{0} : row / 2 - 1, nodes - std::min<std::size_t>(nodes, 4));
        std::array<double, 4> weight{};
        for (std::size_t a = 0; a < 4; ++a) {
            const auto ln = [&](std::size_t b) { return std::log(matrix.momentum[2 * (start + b)]); };
            weight[a] = std::pow(matrix.momentum[2 * (start + a)] / matrix.momentum[row], spectra::weighting);
            for (std::size_t b = 0; b < 4; ++b) {
                weight[a] *= a == b ? 1.0 : (x - ln(b)) / (ln(a) - ln(b));
            }
        }
        for (auto* part : {&matrix.electrons, &matrix.positrons}) {
            for (std::size_t j = 0; j < matrix.protons; ++j) {
                for (std::size_t a = 0; a < 4; ++a) {
                    (*part)[row * matrix.protons + j] +=
                        weight[a] * (*part)[2 * (start + a) * matrix.protons + j];
                }
            }
        }
    }
    return matrix;
}

std::vector<double> gamma_weights(const TransportSpec& spec, const spectra::Basis& protons) {
    static const QuadratureRule rule = gauss_legendre(12);
    constexpr double low = 0.1 * constants::gigaelectronvolt;
    constexpr double high = 100 * constants::gigaelectronvolt;
    const auto power = [&](double t) {
        const auto range = physics::pion_photon_range(t);
        const double from = std::max(low, range.min);
        const double to = std::min(high, spec.pion_model == physics::PionModel::kelner_2006 ? t : range.max);
        if (!(from < to)) {
            return 0.0;
        }
        const double photons = integrate_panels(
            rule,
            [&](double y) {
                const double e = std::exp(y);
                return e * e * physics::pion_gamma_cross_section(spec.pion_model, e, t);
            },
            std::log(from), std::log(to), static_cast<int>(std::ceil(std::log(to / from) / 1.0)));
        return spec.nuclear_enhancement * proton_speed(t) * photons;
    };
    return integral_weights(protons, power, 3, physics::pion_threshold());
}

} // namespace aureole::transport
