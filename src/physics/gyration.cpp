#include "aureole/physics/gyration.hpp"

#include "aureole/physics/kinematics.hpp"

namespace aureole::physics {

double rigidity(double kinetic_energy, double rest_energy, double charge_number) {
    return rigidity_from_momentum(momentum_times_c(kinetic_energy, rest_energy), charge_number);
}

double kinetic_energy_from_rigidity(double rigidity, double rest_energy, double charge_number) {
    return kinetic_energy_from_momentum(momentum_from_rigidity(rigidity, charge_number), rest_energy);
}

} // namespace aureole::physics
