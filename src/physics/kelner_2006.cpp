#include "kelner_2006.hpp"

#include "aureole/base/quadrature.hpp"

#include <algorithm>
#include <cmath>

namespace aureole::physics::kelner_2006 {

namespace {

double continuation_pion(double photon_energy) {
    return photon_energy + neutral_pion * neutral_pion / (4 * photon_energy);
}

} // namespace

double inelastic(double total_energy) {
    constexpr double threshold = neutral_pion_threshold;
    if (total_energy <= threshold) {
        return 0;
    }
    const double l = std::log(total_energy / 1000);
    const double ratio = threshold / total_energy;
    const double edge = 1 - ratio * ratio * ratio * ratio;
    return (34.3 + (1.88 + 0.25 * l) * l) * edge * edge;
}

double spectrum(double x, double total_energy) {
    if (!(x > 0 && x < 1)) {
        return 0;
    }
    const double l = std::log(total_energy / 1000);
    const double b = 1.30 + (0.14 + 0.011 * l) * l;
    const double beta = 1 / (1.79 + (0.11 + 0.008 * l) * l);
    const double k = 1 / (0.801 + (0.049 + 0.014 * l) * l);
    const double log_x = std::log(x);
    const double power = std::exp(beta * log_x);
    const double left = -std::expm1(beta * log_x); // 1 - x^beta
    const double below = 1 + k * power * left;
    const double ratio = left / below;
    const double square = ratio * ratio;
    return b * log_x / x * square * square *
           (1 / log_x - 4 * beta * power / left - 4 * k * beta * power * (1 - 2 * power) / below);
}

double lowest_proton(double photon_energy) {
    if (photon_energy >= joint) {
        return photon_energy - proton;
    }
    return std::max(continuation_pion(photon_energy) / pion_energy_fraction, neutral_pion_threshold - proton);
}

double gamma(double photon_energy, double kinetic_energy, double multiplicity) {
    const double total = kinetic_energy + proton;
    if (photon_energy >= joint) {
        return inelastic(total) / total * spectrum(photon_energy / total, total);
    }
    const double pion = pion_energy_fraction * kinetic_energy;
    if (!(photon_energy > 0) || pion <= continuation_pion(photon_energy)) {
        return 0;
    }
    return 2 * multiplicity * inelastic(total) / std::sqrt((pion - neutral_pion) * (pion + neutral_pion));
}

double multiplicity(double slope) {
    const QuadratureRule rule = gauss_legendre(16);
    constexpr double decades_ln = 18.5; // of proton energies above the lowest
    const auto emissivity = [&](auto&& cross_section, double lowest) {
        return integrate_panels(
            rule,
            [&](double y) {
                const double total = std::exp(y);
                return cross_section(total) * std::pow(total / joint, 1 - slope);
            },
            std::log(lowest), std::log(lowest) + decades_ln, 40);
    };
    const double direct = emissivity([](double total) { return gamma(joint, total - proton, 1); }, joint);
    const double below = joint * (1 - 1e-12);
    const double continued = emissivity([&](double total) { return gamma(below, total - proton, 1); },
                                        lowest_proton(below) + proton);
    return direct / continued;
}

} // namespace aureole::physics::kelner_2006
