#include "aureole/physics/bremsstrahlung.hpp"

#include "aureole/base/constants.hpp"
#include "aureole/base/quadrature.hpp"

#include <algorithm>
#include <cmath>

namespace aureole::physics {

namespace {

constexpr double rest = constants::electron_rest_energy;
constexpr double alpha = constants::fine_structure;
constexpr double square_radius = constants::classical_electron_radius * constants::classical_electron_radius;

constexpr double heavy_from = 20 * constants::megaelectronvolt; // bound electrons radiate like protons above
constexpr double free_below = 5 * constants::megaelectronvolt;  // and like free electrons below
constexpr double born_below = 2000;                             // m c^2
constexpr double bethe_heitler_from = 4000;                     // m c^2

/// 0 below `low`, 1 above `high`, with continuous slope in ln x between.
double smooth_step(double x, double low, double high) {
    const double t = std::clamp(std::log(x / low) / std::log(high / low), 0.0, 1.0);
    return t * t * (3 - 2 * t);
}

bool possible(double e0, double k) {
    return k > 0 && k < e0 - rest;
}

struct Charges {
    double nucleus, electrons, total; // Z, N, Z^2 + N
};

constexpr Charges charges(Atom atom) {
    return atom == Atom::hydrogen ? Charges{1, 1, 2} : Charges{2, 2, 6};
}

/// Scattering function S of an atom at momentum transfer q = 2 alpha x, in m c.
double scattering_function(Atom atom, double x) {
    if (atom == Atom::hydrogen) {
        const double y = x * x;
        return 2 * y * (2 + y) / ((1 + y) * (1 + y));
    }
    constexpr double effective_charge = 27.0 / 16;
    const double y = x * x / (effective_charge * effective_charge);
    const double form = 1 / ((1 + y) * (1 + y));
    return 2 * y * (2 + y) * form * (3 - form);
}

const QuadratureRule& panel_rule() {
    static const QuadratureRule rule = gauss_legendre(12);
    return rule;
}

/// (E/E0)-weighted sum of the two functions, times alpha r_e^2/k.
double screened_sum(const Screening& phi, double e0, double k) {
    const double ratio = (e0 - k) / e0;
    return alpha * square_radius / k * ((1 + ratio * ratio) * phi.phi1 - 2.0 / 3 * ratio * phi.phi2);
}

double delta_of(double e0, double k) {
    return k * rest / (4 * alpha * e0 * (e0 - k));
}

double atom_cross_section(Atom atom, double e0, double k) {
    const Charges z = charges(atom);
    const double proton = bremsstrahlung_born(e0, k);
    const double heavy = smooth_step(e0 - rest, free_below, heavy_from);
    const double electron =
        heavy < 1 ? heavy * proton + (1 - heavy) * bremsstrahlung_electron_electron(e0, k) : proton;
    const double screening = screened_sum(screening_correction(atom, delta_of(e0, k)), e0, k);
    return std::max(0.0, z.nucleus * z.nucleus * proton + z.electrons * electron + screening);
}

} // namespace

double bremsstrahlung_bethe_heitler(double e0, double k) {
    if (!possible(e0, k)) {
        return 0;
    }
    const double e = e0 - k;
    const double ratio = e / e0;
    return std::max(0.0, 4 * alpha * square_radius / k * (1 + ratio * ratio - 2.0 / 3 * ratio) *
                             (std::log(2 * e0 * e / (k * rest)) - 0.5));
}

double bremsstrahlung_3bn(double e0_erg, double k_erg) {
    if (!possible(e0_erg, k_erg)) {
        return 0;
    }
    using Real = long double;
    const Real e0 = Real(e0_erg) / Real(rest);
    const Real k = Real(k_erg) / Real(rest);
    const Real e = e0 - k;
    const Real pp0 = (e0 - 1) * (e0 + 1);
    const Real pp = (e - 1) * (e + 1);
    const Real p0 = std::sqrt(pp0);
    const Real p = std::sqrt(pp);
    const Real product = e0 * e;
    const Real l0 = 2 * std::log(e0 + p0);
    const Real l = 2 * std::log(e + p);
    const Real big = 2 * std::log((product + p0 * p - 1) / k);
    const Real plain = 4.0L / 3 - 2 * product * (pp + pp0) / (pp0 * pp) + l0 * e / (pp0 * p0) +
                       l * e0 / (pp * p) - l * l0 / (p * p0);
    const Real inner =
        (product + pp0) * l0 / (pp0 * p0) - (product + pp) * l / (pp * p) + 2 * k * product / (pp * pp0);
    const Real factor = 8 * product / (3 * p0 * p) +
                        k * k * (product * product + pp0 * pp) / (pp0 * p0 * pp * p) +
                        k / (2 * p0 * p) * inner;
    const Real sum = p / p0 * (plain + big * factor);
    return std::max(0.0, alpha * square_radius / k_erg * static_cast<double>(sum));
}

double bremsstrahlung_born(double e0, double k) {
    const double limit = smooth_step(e0 / rest, born_below, bethe_heitler_from);
    if (limit == 1) {
        return bremsstrahlung_bethe_heitler(e0, k);
    }
    const double exact = bremsstrahlung_3bn(e0, k);
    return limit == 0 ? exact : (1 - limit) * exact + limit * bremsstrahlung_bethe_heitler(e0, k);
}

double bremsstrahlung_electron_electron(double e0, double k_erg) {
    if (!possible(e0, k_erg)) {
        return 0;
    }
    const double g = e0 / rest;
    const double k = k_erg / rest;
    const double first = 4 * (1 + (1.0 / 3 - k / g) * (1 - k / g)) * (std::log(2 * g * (g - k) / k) - 0.5);
    double second = 0; // photons of the recoiling target
    if (k < 0.02) {
        // the bracket in powers of k: -1/k^2 + 3/k - 4 + ... cancels against the logarithm there
        double rest_of_bracket = -4 + 4 * k - 8 * k * k;
        const auto series = [&](int power) { // coefficient of k^power in -2(1-2k) ln(1-2k)
            return power == 1 ? 4.0 : -2 * std::pow(2.0, power) / (power * (power - 1.0));
        };
        const double factor[] = {0.25, -0.5, 3.0, -2.0, 4.0}; // of k^-3 ... k^1
        for (int total = 0; total <= 12; ++total) {
            double coefficient = 0;
            for (int j = 0; j < 5; ++j) {
                const int power = total + 3 - j;
                if (power >= 1) {
                    coefficient += factor[j] * series(power);
                }
            }
            rest_of_bracket += coefficient * std::pow(k, total);
        }
        second = (16 * (1 - k + k * k) * std::log(g / k) + rest_of_bracket) / 3;
    } else if (k < 0.5) {
        second = (16 * (1 - k + k * k) * std::log(g / k) - 1 / (k * k) + 3 / k - 4 + 4 * k - 8 * k * k -
                  2 * (1 - 2 * k) * std::log1p(-2 * k) *
                      (1 / (4 * k * k * k) - 1 / (2 * k * k) + 3 / k - 2 + 4 * k)) /
                 3;
    } else {
        second =
            2 / (3 * k) * ((4 - 1 / k + 1 / (4 * k * k)) * std::log(2 * g) - 2 + 2 / k - 5 / (8 * k * k));
    }
    const double low_energy = 1 - 8.0 / 3 * std::pow(g - 1, 0.2) / (g + 1) * std::cbrt(k / g);
    return std::max(0.0, alpha * square_radius / k_erg * (first + second) * low_energy);
}

Screening screening_functions(Atom atom, double delta) {
    const double total = charges(atom).total;
    const double highest = 1 / (2 * alpha); // q = 1
    double first = 0;
    double second = 0;
    // in ln x, x = q/(2 alpha); S falls as x^2, so nothing below 1e-6 counts at 1e-12
    const double from = std::max(delta, 1e-6);
    if (from < highest) {
        const double low = std::log(from);
        const double high = std::log(highest);
        const int panels = static_cast<int>(std::ceil((high - low) / 1.5));
        const double width = (high - low) / panels;
        for (int panel = 0; panel < panels; ++panel) {
            const double middle = low + (panel + 0.5) * width;
            for (std::size_t i = 0; i < panel_rule().node.size(); ++i) {
                const double x = std::exp(middle + 0.5 * width * panel_rule().node[i]);
                const double u = delta / x;
                const double weight = 0.5 * width * panel_rule().weight[i] * scattering_function(atom, x);
                first += weight * (1 - u) * (1 - u);
                if (u > 0) {
                    second += weight * (1 + u * u * (6 * std::log(u) + 3 - 4 * u));
                } else {
                    second += weight;
                }
            }
        }
    }
    return {4 * (total + first), 4 * (5.0 / 6 * total + second)};
}

Screening screening_correction(Atom atom, double delta) {
    if (delta > 1 / (2 * alpha)) {
        return {};
    }
    const double total = charges(atom).total;
    const double d = 2 * alpha * delta;
    const double logarithm = -std::log(d);
    const double unscreened = 4 * total * (logarithm - 0.5);
    const Screening phi = screening_functions(atom, delta);
    return {std::min(0.0, phi.phi1 - unscreened - 4 * total * (2 * d - d * d / 2)),
            std::min(0.0, phi.phi2 - unscreened - 4 * total * d * d * (3 * logarithm + 4.0 / 3 * d))};
}

double bremsstrahlung_screened(Atom atom, double e0, double k) {
    return possible(e0, k) ? screened_sum(screening_functions(atom, delta_of(e0, k)), e0, k) : 0;
}

double bremsstrahlung_atomic(double e0, double k, double helium) {
    if (!possible(e0, k)) {
        return 0;
    }
    return atom_cross_section(Atom::hydrogen, e0, k) +
           (helium > 0 ? helium * atom_cross_section(Atom::helium, e0, k) : 0.0);
}

double bremsstrahlung_molecular(double e0, double k, double helium) {
    return bremsstrahlung_atomic(e0, k, helium);
}

double bremsstrahlung_ionised(double e0, double k, double helium) {
    return (1 + 4 * helium) * bremsstrahlung_born(e0, k) +
           (1 + 2 * helium) * bremsstrahlung_electron_electron(e0, k);
}

} // namespace aureole::physics
