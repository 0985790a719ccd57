#include "aureole/physics/kinematics.hpp"

#include <cmath>

namespace aureole::physics {

double momentum_times_c(double kinetic_energy, double rest_energy) {
    return std::sqrt(kinetic_energy * (kinetic_energy + 2 * rest_energy));
}

double speed_over_c(double kinetic_energy, double rest_energy) {
    return momentum_times_c(kinetic_energy, rest_energy) / (kinetic_energy + rest_energy);
}

double kinetic_energy_from_momentum(double momentum_times_c, double rest_energy) {
    return momentum_times_c * momentum_times_c / (std::hypot(momentum_times_c, rest_energy) + rest_energy);
}

} // namespace aureole::physics
