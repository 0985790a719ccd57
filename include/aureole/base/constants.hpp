#pragma once

#include <numbers>

/// Physical constants in CGS-Gaussian units. Source: CODATA 2018 (NIST) unless a line says otherwise; c, h, k
/// and e are exact in SI.
namespace aureole::constants {

inline constexpr double pi = std::numbers::pi;
inline constexpr double speed_of_light = 2.99792458e10;               ///< cm s-1
inline constexpr double elementary_charge = 4.803204712570263e-10;    ///< esu (1.602176634e-19 C times c/10)
inline constexpr double planck = 6.62607015e-27;                      ///< erg s
inline constexpr double boltzmann = 1.380649e-16;                     ///< erg K-1
inline constexpr double electron_mass = 9.1093837015e-28;             ///< g
inline constexpr double proton_mass = 1.67262192369e-24;              ///< g
inline constexpr double classical_electron_radius = 2.8179403262e-13; ///< cm
inline constexpr double thomson_cross_section = 6.6524587321e-25;     ///< cm2
inline constexpr double fine_structure = 7.2973525693e-3;
inline constexpr double electronvolt = 1.602176634e-12; ///< erg
inline constexpr double parsec = 3.0856775814913673e18; ///< cm (IAU 2015 Resolution B2)
inline constexpr double kiloparsec = 1e3 * parsec;      ///< cm
inline constexpr double year = 3.15576e7;               ///< s (Julian year, IAU)
inline constexpr double jansky = 1e-23;                 ///< erg s-1 cm-2 Hz-1
inline constexpr double electron_rest_energy = electron_mass * speed_of_light * speed_of_light; ///< erg
inline constexpr double proton_rest_energy = proton_mass * speed_of_light * speed_of_light;     ///< erg
inline constexpr double gigaelectronvolt = 1e9 * electronvolt;                                  ///< erg
inline constexpr double megaelectronvolt = 1e6 * electronvolt;                                  ///< erg
inline constexpr double millibarn = 1e-27;                                                      ///< cm2
inline constexpr double microgauss = 1e-6;                                                      ///< G
inline constexpr double degree = pi / 180;                                                      ///< rad
inline constexpr double arcminute = degree / 60;                                                ///< rad
inline constexpr double arcsecond = degree / 3600;                                              ///< rad

} // namespace aureole::constants
