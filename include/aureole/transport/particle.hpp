#pragma once

namespace aureole::transport {

/// A particle of charge number |Z| = 1 at one momentum. Momentum, kinetic energy, total energy and rigidity
/// are four different numbers; each has its name.
struct Particle {
    double rest_energy = 0;    ///< m c^2, erg
    double momentum = 0;       ///< g cm s-1
    double kinetic_energy = 0; ///< erg
    double total_energy = 0;   ///< erg, rest energy included
    double rigidity = 0;       ///< p c/(Z e), statvolt
    double speed = 0;          ///< cm s-1
    double beta = 0;           ///< speed over c
};

/// All of them from the momentum [g cm s-1] and the rest energy [erg]; no digits lost at either end.
Particle particle_of_momentum(double momentum, double rest_energy);

} // namespace aureole::transport
