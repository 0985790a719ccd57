#include "aureole/physics/losses.hpp"

#include "photon_table.hpp"

#include "aureole/base/constants.hpp"
#include "aureole/base/quadrature.hpp"
#include "aureole/physics/inverse_compton.hpp"
#include "aureole/physics/kinematics.hpp"

#include <algorithm>
#include <array>
#include <cassert>
#include <cmath>
#include <utility>

namespace aureole::physics {

namespace {

using constants::pi;
constexpr double rest = constants::electron_rest_energy;
constexpr double proton_rest = constants::proton_rest_energy;
constexpr double thomson_rate = constants::thomson_cross_section * constants::speed_of_light; // cm3 s-1
constexpr double square_radius = constants::classical_electron_radius * constants::classical_electron_radius;
constexpr double hbar_c = constants::planck * constants::speed_of_light / (2 * pi); // erg cm
/// 2 pi r_e^2 m c^3 [erg cm3 s-1].
constexpr double collision_constant = 2 * pi * square_radius * constants::speed_of_light * rest;
constexpr double lowest_electron = 1e3 * constants::electronvolt;
constexpr double lowest_beta = 0.01;

/// beta^2 gamma^2 from T/m c^2.
double square_momentum(double tau) {
    return tau * (tau + 2);
}

/// loss(T), and below `lowest` in proportion to T.
template <class Loss> double vanishing_below(double lowest, double kinetic_energy, Loss&& loss) {
    return kinetic_energy >= lowest ? loss(kinetic_energy) : kinetic_energy / lowest * loss(lowest);
}

} // namespace

LogTable::LogTable(double first_ln, double step_ln, std::vector<double> log_values)
    : first_ln_(first_ln), step_ln_(step_ln), log_values_(std::move(log_values)) {
    assert(log_values_.size() >= 6 && step_ln > 0);
}

double LogTable::log_value(double ln_x) const {
    const double place = (ln_x - first_ln_) / step_ln_;
    const double last = static_cast<double>(log_values_.size()) - 6;
    const double first = std::clamp(std::floor(place) - 2, 0.0, last);
    const double t = place - first;
    const double* y = log_values_.data() + static_cast<std::size_t>(first);
    const std::array<double, 6> d{t, t - 1, t - 2, t - 3, t - 4, t - 5};
    const double low = d[0] * d[1] * d[2];
    const double high = d[3] * d[4] * d[5];
    return high * (-y[0] * d[1] * d[2] / 120 + y[1] * d[0] * d[2] / 24 - y[2] * d[0] * d[1] / 12) +
           low * (y[3] * d[4] * d[5] / 12 - y[4] * d[3] * d[5] / 24 + y[5] * d[3] * d[4] / 120);
}

double LogTable::last_ln() const {
    return first_ln_ + step_ln_ * static_cast<double>(log_values_.size() - 1);
}

double synchrotron_loss(double kinetic_energy, double field) {
    return thomson_loss(kinetic_energy, field * field / (8 * pi));
}

double thomson_loss(double kinetic_energy, double energy_density) {
    return 4.0 / 3 * thomson_rate * square_momentum(kinetic_energy / rest) * energy_density;
}

namespace {

constexpr double lowest_theta = 1e-6; // gamma k T/m c^2
constexpr double highest_theta = 1e7;

double blackbody_factor(double theta) {
    const double norm = 15 / (pi * pi * pi * pi);
    static const QuadratureRule rule = gauss_legendre(12);
    // against ln x; in the Klein-Nishina limit the integrand falls only as x to the left
    return norm * integrate_panels(
                      rule,
                      [&](double y) {
                          const double x = std::exp(y);
                          return x * x * x * x / std::expm1(x) * klein_nishina_loss_factor(4 * theta * x);
                      },
                      -18, 4.1, 20);
}

LogTable blackbody_table() {
    constexpr double step = 0.1;
    const double first = std::log(lowest_theta);
    const int nodes = static_cast<int>(std::ceil((std::log(highest_theta) - first) / step)) + 1;
    std::vector<double> values;
    for (int i = 0; i < nodes; ++i) {
        values.push_back(std::log(blackbody_factor(std::exp(first + i * step))));
    }
    return {first, step, std::move(values)};
}

} // namespace

BlackbodyLoss::BlackbodyLoss() : table_(blackbody_table()) {}

double BlackbodyLoss::factor(double lorentz_factor, double temperature) const {
    const double theta = lorentz_factor * constants::boltzmann * temperature / rest;
    if (theta < lowest_theta) {
        // 1 - (63/40) b + (441/200) b^2 with the means of x and x^2 over the energy of the black body
        constexpr double mean = 3.832229496, mean_square = 18.799246; // 24 zeta(5), 120 zeta(6) over pi^4/15
        return 1 - 6.3 * theta * mean + 35.28 * theta * theta * mean_square;
    }
    if (theta > highest_theta) {
        // f = (9/(2 b^2)) (ln b - 11/6); the means of x^-2 and x^-2 ln x are 5/(2 pi^2) times 1 and -0.1472
        return 45 / (64 * pi * pi * theta * theta) * (std::log(4 * theta) - 0.147176658 - 11.0 / 6);
    }
    return std::exp(table_.log_value(std::log(theta)));
}

double BlackbodyLoss::loss(double kinetic_energy, double temperature, double energy_density) const {
    return thomson_loss(kinetic_energy, energy_density) *
           factor(lorentz_factor(kinetic_energy, rest), temperature);
}

double inverse_compton_tabulated_loss(double kinetic_energy,
                                      std::span<const double> energy,
                                      std::span<const double> density) {
    photon_table::check(energy, density);
    static const QuadratureRule rule = gauss_legendre(14);
    const double gamma = lorentz_factor(kinetic_energy, rest);
    double effective = 0; // energy density times the Klein-Nishina factor
    for (std::size_t i = 1; i < energy.size(); ++i) {
        const photon_table::Segment segment{energy[i - 1], energy[i], density[i - 1], density[i]};
        if (segment.empty()) {
            continue;
        }
        effective += integrate_panels(
            rule,
            [&](double y) {
                const double e = std::exp(y);
                return e * e * segment.at(e) * klein_nishina_loss_factor(4 * gamma * e / rest);
            },
            std::log(segment.e0), std::log(segment.e1), segment.panels(segment.e0, segment.e1));
    }
    return thomson_loss(kinetic_energy, effective);
}

namespace {

constexpr double lowest_radiating = 2 * constants::megaelectronvolt;
constexpr double highest_radiating = 1e4 * constants::gigaelectronvolt;
constexpr double radiation_step = 0.25; // of the table, in ln T

/// int k (d sigma/dk) dk/E [cm2]: logarithmic at k = 0, bends at 0.02 and 0.5 m c^2, a square root at the
/// tip.
template <class CrossSection> double radiated_fraction(double kinetic_energy, CrossSection&& cross_section) {
    static const QuadratureRule rule = gauss_legendre(8);
    const double e0 = kinetic_energy + rest;
    const double middle = 0.5 * kinetic_energy;
    const auto power = [&](double k) { return k * cross_section(e0, k); };
    std::vector<double> edges{0.02 * rest, 0.5 * rest};
    while (edges.back() < middle) {
        edges.push_back(std::min(middle, 4 * edges.back()));
    }
    double sum = integrate(
        rule, [&](double v) { return 3 * v * v * edges[0] * power(edges[0] * v * v * v); }, 0, 1);
    sum += integrate_pieces(rule, power, edges);
    sum += integrate_panels(
        rule, [&](double v) { return 2 * v * middle * power(kinetic_energy - middle * v * v); }, 0, 1, 3);
    return sum / e0;
}

template <class CrossSection> LogTable radiation_table(CrossSection&& cross_section) {
    const double first = std::log(lowest_radiating);
    const int nodes = static_cast<int>(std::ceil((std::log(highest_radiating) - first) / radiation_step)) + 1;
    std::vector<double> values;
    for (int i = 0; i < nodes; ++i) {
        values.push_back(std::log(radiated_fraction(std::exp(first + i * radiation_step), cross_section)));
    }
    return {first, radiation_step, std::move(values)};
}

double emitting(double kinetic_energy, double hydrogen) {
    return hydrogen * constants::speed_of_light * speed_over_c(kinetic_energy, rest) *
           total_energy(kinetic_energy, rest);
}

/// Below the table the slope of ln value fades as e^y, y = ln(T/lowest).
double below_table(const LogTable& table, double ln_t) {
    const double first = std::log(lowest_radiating);
    constexpr double h = 0.05;
    const double start = table.log_value(first);
    const double slope =
        (-3 * start + 4 * table.log_value(first + h) - table.log_value(first + 2 * h)) / (2 * h);
    return std::exp(start + slope * std::expm1(ln_t - first));
}

} // namespace

BremsstrahlungLoss::BremsstrahlungLoss(double helium)
    : neutral_(
          radiation_table([helium](double e0, double k) { return bremsstrahlung_atomic(e0, k, helium); })),
      ionised_(
          radiation_table([helium](double e0, double k) { return bremsstrahlung_ionised(e0, k, helium); })) {}

double BremsstrahlungLoss::neutral(double kinetic_energy, double hydrogen) const {
    const double ln_t = std::log(kinetic_energy);
    const double fraction = kinetic_energy < lowest_radiating
                                ? below_table(neutral_, ln_t)
                                : std::exp(neutral_.log_value(std::min(ln_t, neutral_.last_ln())));
    return emitting(kinetic_energy, hydrogen) * fraction;
}

double BremsstrahlungLoss::ionised(double kinetic_energy, double hydrogen) const {
    const double ln_t = std::log(kinetic_energy);
    const double last = ionised_.last_ln();
    double fraction = 0;
    if (kinetic_energy < lowest_radiating) {
        fraction = below_table(ionised_, ln_t);
    } else if (ln_t <= last) {
        fraction = std::exp(ionised_.log_value(ln_t));
    } else {
        const double end = std::exp(ionised_.log_value(last));
        fraction = end + (ln_t - last) * (end - std::exp(ionised_.log_value(last - 1)));
    }
    return emitting(kinetic_energy, hydrogen) * fraction;
}

namespace {

constexpr double radiation_constant_electron = // alpha r_e^2 c [cm3 s-1]
    constants::fine_structure * square_radius * constants::speed_of_light;

double handbook_unscreened(double lorentz) {
    return 8 * radiation_constant_electron * rest * lorentz * (std::log(2 * lorentz) - 1.0 / 3);
}

} // namespace

double bremsstrahlung_handbook_ionised(double kinetic_energy, double hydrogen) {
    return hydrogen * handbook_unscreened(lorentz_factor(kinetic_energy, rest));
}

double bremsstrahlung_handbook_neutral(double kinetic_energy, double hydrogen) {
    constexpr double low = 100, high = 800; // gamma
    constexpr double complete = radiation_constant_electron * rest * (4.0 / 3 * 45.79 - 44.46 / 3);
    const double lorentz = lorentz_factor(kinetic_energy, rest);
    if (lorentz <= low) {
        return hydrogen * handbook_unscreened(lorentz);
    }
    if (lorentz >= high) {
        return hydrogen * complete * lorentz;
    }
    const double part = (lorentz - low) / (high - low);
    return hydrogen * ((1 - part) * handbook_unscreened(low) + part * complete * high);
}

double electron_ionisation_loss(double kinetic_energy,
                                double hydrogen,
                                double helium,
                                const ExcitationEnergies& excitation) {
    return vanishing_below(lowest_electron, kinetic_energy, [&](double t) {
        const double tau = t / rest;
        const double lorentz = 1 + tau;
        const double exchange = (1 + tau * tau / 8 - (2 * tau + 1) * std::log(2.0)) / (lorentz * lorentz);
        const auto stopping = [&](double energy) {
            const double i = energy / rest;
            return std::log(tau * square_momentum(tau) / (2 * i * i)) + exchange;
        };
        return collision_constant / speed_over_c(t, rest) * hydrogen *
               (stopping(excitation.hydrogen) + 2 * helium * stopping(excitation.helium));
    });
}

double electron_coulomb_loss(double kinetic_energy, double electron_density) {
    if (!(electron_density > 0)) {
        return 0;
    }
    constexpr double scale = rest / (4 * pi * constants::classical_electron_radius * hbar_c * hbar_c);
    return vanishing_below(lowest_electron, kinetic_energy, [&](double t) {
        return collision_constant / speed_over_c(t, rest) * electron_density *
               (std::log(total_energy(t, rest) * scale / electron_density) - 0.75);
    });
}

double proton_ionisation_loss(double kinetic_energy,
                              double hydrogen,
                              double helium,
                              const ExcitationEnergies& excitation) {
    constexpr double lowest = 0.5 * lowest_beta * lowest_beta * proton_rest;
    return vanishing_below(lowest, kinetic_energy, [&](double t) {
        const double lorentz = lorentz_factor(t, proton_rest);
        const double beta = speed_over_c(t, proton_rest);
        const double transfer = 2 * rest * square_momentum(t / proton_rest);
        const double highest = transfer / (1 + 2 * lorentz * rest / proton_rest);
        const auto stopping = [&](double energy) {
            return std::log(transfer * highest / (energy * energy)) - 2 * beta * beta;
        };
        return collision_constant / beta * hydrogen *
               (stopping(excitation.hydrogen) + 2 * helium * stopping(excitation.helium));
    });
}

double proton_coulomb_logarithm(double kinetic_energy, double electron_density) {
    const double lorentz = lorentz_factor(kinetic_energy, proton_rest);
    const double beta = speed_over_c(kinetic_energy, proton_rest);
    const double wave_number = rest / hbar_c;
    const double ratio = wave_number * wave_number * square_momentum(kinetic_energy / proton_rest) * beta *
                         beta /
                         (pi * constants::classical_electron_radius * electron_density *
                          (1 + 2 * lorentz * rest / proton_rest));
    return std::max(1.0, 0.5 * std::log(ratio));
}

double electron_thermal_cube(double temperature) {
    const double thermal = std::sqrt(2 * constants::boltzmann * temperature / rest);
    return 0.75 * std::sqrt(pi) * thermal * thermal * thermal;
}

double proton_coulomb_loss(double kinetic_energy, double electron_density, double electron_temperature) {
    if (!(electron_density > 0)) {
        return 0;
    }
    const double beta = speed_over_c(kinetic_energy, proton_rest);
    return 2 * collision_constant * electron_density *
           proton_coulomb_logarithm(kinetic_energy, electron_density) * beta * beta /
           (electron_thermal_cube(electron_temperature) + beta * beta * beta);
}

double target_nuclei_factor(double helium) {
    return 1 + helium * std::pow(4.0, 0.75);
}

double beam_nuclei_factor(double enhancement, double helium) {
    return enhancement / target_nuclei_factor(helium);
}

double inelastic_collision_rate(PionModel model, double kinetic_energy, double hydrogen, double helium) {
    return hydrogen * target_nuclei_factor(helium) * constants::speed_of_light *
           speed_over_c(kinetic_energy, proton_rest) * inelastic_cross_section(model, kinetic_energy);
}

double pion_loss(PionModel model, double kinetic_energy, double hydrogen, double helium) {
    return pion_inelasticity * kinetic_energy *
           inelastic_collision_rate(model, kinetic_energy, hydrogen, helium);
}

} // namespace aureole::physics
