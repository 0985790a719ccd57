#pragma once

#include "aureole/base/constants.hpp"

namespace aureole::physics {

/// Temperature of the cosmic microwave background [K]. Source: Fixsen 2009, ApJ 707, 916.
inline constexpr double cmb_temperature = 2.7255;

/// Radiation constant a [erg cm-3 K-4]: 8 pi^5 k^4/(15 h^3 c^3).
inline constexpr double radiation_constant =
    8 * constants::pi * constants::pi * constants::pi * constants::pi * constants::pi * constants::boltzmann *
    constants::boltzmann * constants::boltzmann * constants::boltzmann /
    (15 * constants::planck * constants::planck * constants::planck * constants::speed_of_light *
     constants::speed_of_light * constants::speed_of_light);

/// Energy density of a black body [erg cm-3] at a temperature [K].
double blackbody_energy_density(double temperature);

/// Photons per volume and energy [cm-3 erg-1] of a black body at a temperature [K]: 8 pi/(h c)^3
/// e^2/(exp(e/kT) - 1), e in erg, >= 0.
double blackbody_photon_density(double photon_energy, double temperature);

/// The same spectrum diluted to an energy density [erg cm-3].
double diluted_blackbody_photon_density(double photon_energy, double temperature, double energy_density);

} // namespace aureole::physics
