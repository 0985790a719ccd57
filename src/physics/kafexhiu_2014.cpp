#include "kafexhiu_2014.hpp"

#include "aureole/base/constants.hpp"
#include "aureole/base/quadrature.hpp"

#include <algorithm>
#include <array>
#include <cmath>
#include <cstddef>

namespace aureole::physics::kafexhiu_2014 {

namespace {

/// F = (1 - X^a)^b/(1 + X/C)^g with C = lambda m_pi/Y_max.
struct Shape {
    double lambda, a, b, g;
};

/// A_max = b1 theta^-b2 exp(b3 ln^2 theta) sigma_pi0/m_p.
struct Amplitude {
    double b1, b2, b3;
};

/// Pion multiplicity a1 xi^a4 [1 + exp(-a2 xi^a5)][1 - exp(-a3 xi^(1/4))].
struct Multiplicity {
    double a1, a2, a3, a4, a5;
};

enum class Regime { below_1, from_1, from_4, from_20, geant4_high, pythia8, sibyll, qgsjet };

constexpr Multiplicity geant4_multiplicity{.728, .596, .491, .2503, .117};
constexpr Multiplicity pythia8_multiplicity{.652, .0016, .488, .1928, .483};
constexpr Multiplicity sibyll_multiplicity{5.436, .254, .072, .075, .166};
constexpr Multiplicity qgsjet_multiplicity{.908, .0009, 6.089, .176, .448};

double multiplicity(const Multiplicity& m, double t) {
    const double xi = (t - 3) / proton;
    return m.a1 * std::pow(xi, m.a4) * (1 + std::exp(-m.a2 * std::pow(xi, m.a5))) *
           (1 - std::exp(-m.a3 * std::pow(xi, 0.25)));
}

double multiplicity_below_5(double t) {
    const double q = (t - threshold) / proton;
    return -6e-3 + (0.237 - 0.023 * q) * q;
}

/// Sum of the one-pion (resonance) and two-pion channels, fitted below 2 GeV.
double exclusive_channels(double t) {
    constexpr double mass = 1.1883;
    constexpr double width = 0.2264;
    constexpr double pion2 = pion * pion;
    constexpr double proton2 = proton * proton;
    const double s = 2 * proton * (t + 2 * proton);
    const double root = std::sqrt(s);
    const double excess = s - pion2 - 4 * proton2;
    const double eta = std::sqrt(std::max(0.0, excess * excess - 16 * pion2 * proton2)) / (2 * pion * root);
    const double g = mass * std::hypot(mass, width);
    const double k = std::sqrt(8.0) * mass * width * g / (constants::pi * std::sqrt(mass * mass + g));
    const double away = (root - proton) * (root - proton) - mass * mass;
    const double resonance = proton * k / (away * away + mass * mass * width * width);
    const double eta2 = eta * eta;
    const double one =
        7.66e-3 * std::pow(eta, 1.95) * (1 + eta + eta2 * eta2 * eta) * std::pow(resonance, 1.86);
    const double two = t >= 0.56 ? 5.7 / (1 + std::exp(-9.3 * (t - 1.4))) : 0.0;
    return one + two;
}

Regime regime_of(Branch branch, double t) {
    if (t > 50 && branch == Branch::pythia8) {
        return Regime::pythia8;
    }
    if (t > 100) {
        return branch == Branch::sibyll   ? Regime::sibyll
               : branch == Branch::qgsjet ? Regime::qgsjet
                                          : Regime::geant4_high;
    }
    return t <= 1 ? Regime::below_1 : t <= 4 ? Regime::from_1 : t <= 20 ? Regime::from_4 : Regime::from_20;
}

Shape shape_of(Regime regime, double t) {
    const double q = std::max(0.0, (t - 1) / proton);
    const double mu = 1.25 * std::pow(q, 1.25) * std::exp(-1.25 * q);
    switch (regime) {
    case Regime::below_1:
        return {1, 1, 3.29 - 0.2 * std::pow(t / proton, -1.5), 0};
    case Regime::from_1:
        return {3, 1, mu + 2.45, mu + 1.45};
    case Regime::from_4:
        return {3, 1, 1.5 * mu + 4.95, mu + 1.50};
    case Regime::from_20:
        return {3, .5, 4.2, 1};
    case Regime::geant4_high:
        return {3, .5, 4.9, 1};
    case Regime::pythia8:
        return {3.5, .5, 4.0, 1};
    case Regime::sibyll:
        return {3.55, .5, 3.6, 1};
    case Regime::qgsjet:
        break;
    }
    return {3.55, .5, 4.5, 1};
}

double shape_value(const Shape& shape, double x, double highest) {
    const double power = shape.a == 1 ? x : std::sqrt(x);
    const double top = std::pow(1 - power, shape.b);
    if (shape.g == 0) {
        return top;
    }
    const double bottom = 1 + x * highest / (shape.lambda * pion);
    return top / (shape.g == 1 ? bottom : std::pow(bottom, shape.g));
}

/// Position of a photon between the most probable energy (0) and the ends of its range (1); above 1: out of
/// range.
double position(double photon_energy, double highest) {
    const double y = photon_energy + pion * pion / (4 * photon_energy);
    return std::max(0.0, (y - pion) / (highest - pion));
}

/// int F dE over the whole range. With Y = m cosh u, the two photon energies of a Y add up to  dE = m cosh
/// u du.
double shape_integral(const Shape& shape, double highest) {
    static const QuadratureRule rule = gauss_legendre(24);
    const double end = std::acosh(highest / pion);
    return integrate_panels(
        rule,
        [&](double v) { // u = end (1 - v^2): the power of 1 - X at the end becomes twice as high
            const double u = end * (1 - v) * (1 + v);
            const double half = std::sinh(u / 2);
            const double x = std::min(1.0, 2 * pion * half * half / (highest - pion));
            return 2 * end * v * shape_value(shape, x, highest) * pion * (1 + 2 * half * half);
        },
        0, 1, highest > 30 ? 3 : 2);
}

Amplitude amplitude_of(Branch branch, double t) {
    switch (regime_of(branch, t)) {
    case Regime::pythia8:
        return {9.06, .3795, .01105};
    case Regime::sibyll:
        return {10.77, .412, .01264};
    case Regime::qgsjet:
        return {13.16, .4419, .01439};
    default:
        return t < 5 ? Amplitude{9.53, .52, .054} : Amplitude{9.13, .35, 9.7e-3};
    }
}

double published_maximum(Branch branch, double t, double highest) {
    const double pions = neutral_pions(branch, t);
    if (t <= 1) {
        return 5.9 * pions / highest;
    }
    const Amplitude b = amplitude_of(branch, t);
    const double theta = t / proton;
    const double log_theta = std::log(theta);
    return b.b1 * std::pow(theta, -b.b2) * std::exp(b.b3 * log_theta * log_theta) * pions / proton;
}

/// Range of T over which one piece gives way to the next.
struct Joint {
    double from, to;

    double after(double t) const { // 0 before, 1 after, smooth in ln t
        const double s = std::clamp(std::log(t / from) / std::log(to / from), 0.0, 1.0);
        return s * s * (3 - 2 * s);
    }
};

constexpr std::array<Joint, 3> pion_joints{{{1.7, 2.3}, {4, 6.25}, {35, 70}}};
constexpr std::array<Joint, 4> shape_joints{{{0.8, 1.25}, {1.6, 4}, {14, 28}, {35, 70}}};
constexpr std::array<Regime, 5> shape_order{Regime::below_1, Regime::from_1, Regime::from_4, Regime::from_20,
                                            Regime::pythia8};

double pion_piece(std::size_t piece, double t) {
    switch (piece) {
    case 0:
        return exclusive_channels(t);
    case 1:
        return inelastic(t) * multiplicity_below_5(t);
    case 2:
        return inelastic(t) * multiplicity(geant4_multiplicity, t);
    default:
        return inelastic(t) * multiplicity(pythia8_multiplicity, t);
    }
}

/// Sum over the pieces in force at t, weighted; joints do not overlap, so there are one or two.
template <std::size_t Joints, class Piece>
double joined(const std::array<Joint, Joints>& joints, double t, Piece&& piece) {
    std::size_t i = 0;
    while (i < Joints && t >= joints[i].to) {
        ++i;
    }
    const double after = i < Joints ? joints[i].after(t) : 0.0;
    return (1 - after) * piece(i) + (after > 0 ? after * piece(i + 1) : 0.0);
}

} // namespace

double inelastic(double t) {
    if (t <= threshold) {
        return 0;
    }
    const double l = std::log(t / threshold);
    const double edge = 1 - std::exp(-1.9 * l);
    return (30.7 + (-0.96 + 0.18 * l) * l) * edge * edge * edge;
}

double neutral_pions(Branch branch, double t) {
    if (t <= threshold) {
        return 0;
    }
    if (t < 2) {
        return exclusive_channels(t);
    }
    if (t < 5) {
        return inelastic(t) * multiplicity_below_5(t);
    }
    switch (regime_of(branch, t)) {
    case Regime::pythia8:
        return inelastic(t) * multiplicity(pythia8_multiplicity, t);
    case Regime::sibyll:
        return inelastic(t) * multiplicity(sibyll_multiplicity, t);
    case Regime::qgsjet:
        return inelastic(t) * multiplicity(qgsjet_multiplicity, t);
    default:
        return inelastic(t) * multiplicity(geant4_multiplicity, t);
    }
}

double highest_pion(double t) {
    const double s = 2 * proton * (t + 2 * proton);
    const double root = std::sqrt(s);
    const double energy = (s - 4 * proton * proton + pion * pion) / (2 * root);
    const double momentum = std::sqrt(std::max(0.0, (energy - pion) * (energy + pion)));
    const double lorentz = (t + 2 * proton) / root;
    return lorentz * energy + std::sqrt(lorentz * lorentz - 1) * momentum;
}

double highest_photon(double highest) {
    return (highest + std::sqrt((highest - pion) * (highest + pion))) / 2;
}

double lowest_proton(double pion_total_energy) {
    if (pion_total_energy <= highest_pion(threshold)) {
        return threshold;
    }
    double low = threshold;
    double high = pion_total_energy + 4; // the two protons keep less than 4 GeV of kinetic energy
    while (highest_pion(high) < pion_total_energy) {
        high *= 2;
    }
    for (int i = 0; i < 200 && high - low > 4e-16 * high; ++i) {
        const double middle = 0.5 * (low + high);
        (highest_pion(middle) < pion_total_energy ? low : high) = middle;
    }
    return high;
}

double published_spectrum(Branch branch, double photon_energy, double t) {
    if (t <= threshold || !(photon_energy > 0)) {
        return 0;
    }
    const double highest = highest_pion(t);
    const double x = position(photon_energy, highest);
    if (!(x < 1)) {
        return 0;
    }
    return published_maximum(branch, t, highest) * shape_value(shape_of(regime_of(branch, t), t), x, highest);
}

double continuous_neutral_pions(double t) {
    if (t <= threshold) {
        return 0;
    }
    return joined(pion_joints, t, [&](std::size_t i) { return pion_piece(i, t); });
}

double continuous_spectrum(double photon_energy, double t) {
    if (t <= threshold || !(photon_energy > 0)) {
        return 0;
    }
    const double highest = highest_pion(t);
    const double x = position(photon_energy, highest);
    if (!(x < 1)) {
        return 0;
    }
    const double photons = joined(shape_joints, t, [&](std::size_t i) {
        const Shape shape = shape_of(shape_order[i], t);
        return shape_value(shape, x, highest) / shape_integral(shape, highest);
    });
    return 2 * continuous_neutral_pions(t) * photons;
}

std::span<const double> continuous_borders() {
    constexpr double gev = constants::gigaelectronvolt;
    static constexpr std::array<double, 12> borders{0.56 * gev, 0.8 * gev, 1.25 * gev, 1.6 * gev,
                                                    1.7 * gev,  2.3 * gev, 4 * gev,    6.25 * gev,
                                                    14 * gev,   28 * gev,  35 * gev,   70 * gev};
    return borders;
}

} // namespace aureole::physics::kafexhiu_2014
