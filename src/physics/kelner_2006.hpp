#pragma once

/// Kelner, Aharonian & Bugayov 2006, Phys. Rev. D 74, 034018 (erratum 79, 039901); energies in GeV,
/// cross-sections in mb. Coefficients from memory; they reproduce the multiplicities printed in the paper
/// (1.10, 0.86, 0.91).
namespace aureole::physics::kelner_2006 {

inline constexpr double proton = 0.93827209;
inline constexpr double neutral_pion = 0.1349768;
/// Total proton energy of the threshold of pi0 production.
inline constexpr double neutral_pion_threshold =
    proton + 2 * neutral_pion + neutral_pion * neutral_pion / (2 * proton);
inline constexpr double pion_energy_fraction = 0.17; // K_pi
inline constexpr double usual_multiplicity = 0.86;   // for a proton slope of 2.5
inline constexpr double joint = 100;                 // photon energy where the continuation begins

double inelastic(double total_energy);
double spectrum(double x, double total_energy);
double lowest_proton(double photon_energy); // kinetic
double gamma(double photon_energy, double kinetic_energy, double multiplicity);
double multiplicity(double slope);

} // namespace aureole::physics::kelner_2006
