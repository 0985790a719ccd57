#include "aureole/physics/radiation.hpp"

#include <cmath>

namespace aureole::physics {

double blackbody_energy_density(double temperature) {
    const double square = temperature * temperature;
    return radiation_constant * square * square;
}

double blackbody_photon_density(double photon_energy, double temperature) {
    const double thermal = constants::boltzmann * temperature;
    const double wave = constants::planck * constants::speed_of_light;
    if (!(photon_energy > 0)) {
        return 0;
    }
    return 8 * constants::pi / (wave * wave * wave) * photon_energy * photon_energy /
           std::expm1(photon_energy / thermal);
}

double diluted_blackbody_photon_density(double photon_energy, double temperature, double energy_density) {
    return blackbody_photon_density(photon_energy, temperature) * energy_density /
           blackbody_energy_density(temperature);
}

} // namespace aureole::physics
