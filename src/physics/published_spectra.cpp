#include "aureole/physics/published_spectra.hpp"

#include "aureole/base/constants.hpp"
#include "aureole/physics/kinematics.hpp"

#include <cmath>

namespace aureole::physics {

namespace {

constexpr double gev = constants::gigaelectronvolt;

/// Density per erg of a flux in cm-2 s-1 sr-1 GeV-1.
double density(double flux, double beta) {
    return 4 * constants::pi * flux / (beta * constants::speed_of_light * gev);
}

constexpr double per_square_metre_and_mev = 0.1; // m-2 MeV-1 in cm-2 GeV-1

} // namespace

double vos_potgieter_2015_protons(double kinetic_energy) {
    const double t = kinetic_energy / gev;
    const double beta = speed_over_c(kinetic_energy, constants::proton_rest_energy);
    const double flux = 2.70 * std::pow(t, 1.12) / (beta * beta) * std::pow((t + 0.67) / 1.67, -3.93) *
                        per_square_metre_and_mev;
    return density(flux, beta);
}

double dermer_1986_protons(double kinetic_energy) {
    const double total = total_energy(kinetic_energy, constants::proton_rest_energy) / gev;
    return density(2.2 * std::pow(total, -2.75), speed_over_c(kinetic_energy, constants::proton_rest_energy));
}

double potgieter_2015_electrons(double kinetic_energy) {
    const double t = kinetic_energy / gev;
    const double beta = speed_over_c(kinetic_energy, constants::electron_rest_energy);
    const double flux =
        0.21 * std::pow(t, -1.35) / (beta * beta) * std::pow((std::pow(t, 1.65) + 0.6920) / 1.6920, -1.1515) +
        1.73 * std::exp(4.19 - 5.40 * std::log(t) - 8.9 * std::pow(t, -0.64));
    return density(flux * per_square_metre_and_mev, beta);
}

} // namespace aureole::physics
