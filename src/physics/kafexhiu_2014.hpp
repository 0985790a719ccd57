#pragma once

#include <span>

/// Kafexhiu, Aharonian, Taylor & Vila 2014, Phys. Rev. D 90, 123014; energies in GeV (protons: kinetic),
/// cross-sections in mb. Coefficients from memory; number and energy of the photons agree with the pion
/// multiplicity to the 20 % the paper states but at the borders.
namespace aureole::physics::kafexhiu_2014 {

inline constexpr double proton = 0.938272;
inline constexpr double pion = 0.134976;
inline constexpr double threshold = 2 * pion + pion * pion / (2 * proton);

/// The generator behind the fit above its lower border: pythia8 from 50 GeV, sibyll and qgsjet from 100
/// GeV; Geant4 below.
enum class Branch { geant4, pythia8, sibyll, qgsjet };

double inelastic(double t);
double neutral_pions(Branch branch, double t);
double highest_pion(double t);                                            // total energy in the laboratory
double highest_photon(double highest_pion);                               // of a pion of that energy
double lowest_proton(double pion_total_energy);                           // t whose highest_pion that is
double published_spectrum(Branch branch, double photon_energy, double t); // mb/GeV

double continuous_neutral_pions(double t);
double continuous_spectrum(double photon_energy, double t); // mb/GeV
std::span<const double> continuous_borders();               // erg

} // namespace aureole::physics::kafexhiu_2014
