#include "aureole/transport/particle.hpp"

#include "aureole/base/constants.hpp"

#include <cmath>

namespace aureole::transport {

Particle particle_of_momentum(double momentum, double rest_energy) {
    Particle particle;
    const double pc = momentum * constants::speed_of_light;
    particle.rest_energy = rest_energy;
    particle.momentum = momentum;
    particle.total_energy = std::hypot(pc, rest_energy);
    particle.kinetic_energy = pc * pc / (particle.total_energy + rest_energy);
    particle.rigidity = pc / constants::elementary_charge;
    particle.beta = pc / particle.total_energy;
    particle.speed = particle.beta * constants::speed_of_light;
    return particle;
}

} // namespace aureole::transport
