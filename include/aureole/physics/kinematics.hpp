#pragma once

namespace aureole::physics {

/// Lorentz factor of a particle from its kinetic energy [erg] and rest energy [erg]: 1 + T/(m c^2).
constexpr double lorentz_factor(double kinetic_energy, double rest_energy) {
    return 1 + kinetic_energy / rest_energy;
}

/// Total energy [erg] from kinetic energy [erg] and rest energy [erg].
constexpr double total_energy(double kinetic_energy, double rest_energy) {
    return kinetic_energy + rest_energy;
}

/// Kinetic energy [erg] of a Lorentz factor >= 1 and rest energy [erg].
constexpr double kinetic_energy(double lorentz, double rest_energy) {
    return (lorentz - 1) * rest_energy;
}

/// Speed over c from kinetic energy [erg] and rest energy [erg]; no cancellation at low energy.
double speed_over_c(double kinetic_energy, double rest_energy);

/// Momentum times c [erg] from kinetic energy [erg] and rest energy [erg]: sqrt(T (T + 2 m c^2)).
double momentum_times_c(double kinetic_energy, double rest_energy);

/// Kinetic energy [erg] from momentum times c [erg] and rest energy [erg]; no cancellation at low momentum.
double kinetic_energy_from_momentum(double momentum_times_c, double rest_energy);

} // namespace aureole::physics
