#include "law_balance.hpp"

#include "aureole/base/constants.hpp"
#include "aureole/transport/place.hpp"
#include "aureole/transport/self_confinement.hpp"

#include <algorithm>
#include <cmath>
#include <limits>

namespace aureole::transport {

double alfven_speed(double field, double ion_density, double helium_fraction) {
    const double density = ion_density * constants::proton_mass * (1 + 4 * helium_fraction);
    return field / std::sqrt(4 * constants::pi * density);
}

double ion_neutral_damping(double neutral_density, double temperature, double coefficient) {
    return coefficient * neutral_density * std::pow(temperature / 1e4, 0.4);
}

double turbulent_damping(double turbulent_speed,
                         double turbulent_scale,
                         double gyroradius,
                         double alfven_speed_here) {
    const double cascade =
        std::pow(turbulent_speed, 3) / turbulent_scale * std::min(1.0, turbulent_speed / alfven_speed_here);
    return 2 * std::sqrt(cascade / (gyroradius * alfven_speed_here));
}

double cascade_damping(double gyroradius, double alfven_speed_here) {
    constexpr double c = 3.6;
    return std::pow(2 * c, -1.5) * alfven_speed_here / gyroradius;
}

double landau_damping(double gyroradius, double temperature) {
    const double ion_speed = std::sqrt(constants::boltzmann * temperature / constants::proton_mass);
    return 0.5 * std::sqrt(constants::pi / 2) * ion_speed / gyroradius;
}

double wave_growth(double alfven_speed_here, double gradient, double field) {
    return alfven_speed_here * std::abs(gradient) * 4 * constants::pi / (field * field);
}

double wave_energy(double growth, const WaveDamping& damping) {
    if (!(growth > 0)) {
        return 0;
    }
    const double start =
        std::min({growth / damping.linear, cascade_balance(growth, damping.nonlinear_cascade),
                  std::sqrt(growth / damping.nonlinear_landau)});
    if (std::isinf(start)) {
        return std::numeric_limits<double>::infinity();
    }
    return balance(growth, damping.linear, damping.nonlinear_cascade, damping.nonlinear_landau,
                   std::sqrt(start));
}

} // namespace aureole::transport
