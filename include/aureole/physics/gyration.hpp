#pragma once

#include "aureole/base/constants.hpp"

/// Motion of a charge in a uniform field, CGS-Gaussian. Kinetic energy, momentum (times c: erg), total
/// energy and rigidity are four numbers; physics/kinematics.hpp turns the first three into each other.
namespace aureole::physics {

/// Statvolts in a gigavolt, the unit that rigidities are quoted in: 1e17/c with c in cm s-1 (exact).
inline constexpr double gigavolt = 1e17 / constants::speed_of_light;

/// Rigidity p c/(|Z| e) [statvolt] from momentum times c [erg] and charge number |Z| >= 1.
constexpr double rigidity_from_momentum(double momentum_times_c, double charge_number = 1) {
    return momentum_times_c / (charge_number * constants::elementary_charge);
}

/// Momentum times c [erg] from rigidity [statvolt] and charge number |Z| >= 1.
constexpr double momentum_from_rigidity(double rigidity, double charge_number = 1) {
    return rigidity * charge_number * constants::elementary_charge;
}

/// Rigidity [statvolt] from kinetic energy [erg, of the whole particle], rest energy [erg] and |Z|.
double rigidity(double kinetic_energy, double rest_energy, double charge_number = 1);

/// Kinetic energy [erg, of the whole particle] from rigidity [statvolt], rest energy [erg] and |Z|; no
/// cancellation at low rigidity.
double kinetic_energy_from_rigidity(double rigidity, double rest_energy, double charge_number = 1);

/// Radius [cm] of the circle across a field [G, > 0], from the rigidity [statvolt]; a pitch angle a takes a
/// factor sin a. 1 GV in 1 uG: 3.336e12 cm.
constexpr double gyroradius(double rigidity, double field) {
    return rigidity / field;
}

/// Relativistic gyrofrequency |Z| e B/(gamma m c) = |Z| e c B/E [rad s-1] from the total energy [erg] and
/// the field [G]. Times gyroradius it is the speed.
constexpr double gyrofrequency(double total_energy, double field, double charge_number = 1) {
    return charge_number * constants::elementary_charge * constants::speed_of_light * field / total_energy;
}

} // namespace aureole::physics
