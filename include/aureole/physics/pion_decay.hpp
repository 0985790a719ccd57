#pragma once

#include <span>

/// Gamma rays from p + p -> pi0 -> 2 gamma. Proton energies are kinetic [erg], photon energies [erg];
/// cross-sections [cm2], differential in photon energy [cm2 erg-1]. The emissivity per sr is  n_H int
/// J_p(T) (d sigma/dE) dT  for isotropic J_p (no 4 pi), times nuclear_enhancement.
namespace aureole::physics {

/// Factor for nuclei in cosmic rays and gas (heavier than hydrogen) on a p-p emissivity per hydrogen
/// nucleus. Source: Mori 2009, Astropart. Phys. 31, 341.
inline constexpr double nuclear_enhancement = 1.8;

enum class PionModel {
    kafexhiu_2014_continuous, ///< the default: as the next, its regimes joined (our own change)
    kafexhiu_2014, ///< Geant4 to 50 GeV and Pythia 8 above, as published, with its steps at the borders
    kafexhiu_2014_geant4, ///< as published, Geant4 at all energies
    kafexhiu_2014_sibyll, ///< as published, SIBYLL above 100 GeV
    kafexhiu_2014_qgsjet, ///< as published, QGSJET above 100 GeV
    kelner_2006,          ///< for photons above 100 GeV; its continuation is high below 3 GeV, by up to 2.7
};

/// Kinetic energy of the threshold of p + p -> p + p + pi0 [erg].
double pion_threshold();

/// Inelastic p-p cross-section [cm2] at a kinetic energy [erg]; 0 below the threshold.
/// Source     Kafexhiu et al. 2014, Phys. Rev. D 90, 123014 (kelner_2006: Kelner, Aharonian & Bugayov 2006,
/// Phys. Rev. D 74, 034018).
double inelastic_cross_section(PionModel model, double kinetic_energy);

/// Inclusive pi0 cross-section [cm2] at a kinetic energy [erg]; 0 below the threshold.
/// Throws     Error(runtime) for kelner_2006, which gives photons only.
double neutral_pion_cross_section(PionModel model, double kinetic_energy);

/// Photon energies [erg] that a proton can make; min > max below the threshold.
struct PhotonRange {
    double min = 0, max = 0;
};
PhotonRange pion_photon_range(double kinetic_energy);

/// Smallest kinetic energy [erg] whose photons reach `photon_energy` [erg] in the model: where an integral
/// over protons begins.
double minimum_proton_energy(PionModel model, double photon_energy);

/// d sigma/dE [cm2 erg-1] of photons of `photon_energy` from protons of `kinetic_energy`; >= 0, 0 outside
/// the kinematic range.
///   kafexhiu_2014_continuous: each published shape is scaled to 2 sigma_pi0 photons, and neighbouring
///   regimes are blended in ln T: shapes over 0.8-1.25, 1.6-4, 14-28 and 35-70 GeV, sigma_pi0 over 1.7-2.3,
///   4-6.25 and 35-70 GeV. The published form falls by 41 % in energy at 4 GeV. Here the mean pion energy
///   rises throughout (0.36, 0.45, 0.60, 1.10, 3.3, 33 GeV at T = 1.15, 2, 4, 10, 50, 1000 GeV), and above
///   2 GeV so does, within 1.5 %, the photons' share of T sigma_inel (0.080, 0.086, 0.108, 0.130, 0.151 at
///   2, 4, 10, 50, 1000 GeV).
///   kelner_2006: below 100 GeV of photon energy 2 n sigma_inel/sqrt(E_pi^2 - m_pi^2) for E_pi = 0.17 T
///   above E + m_pi^2/(4E), with n = 0.86, the paper's for a proton slope of 2.5.
double pion_gamma_cross_section(PionModel model, double photon_energy, double kinetic_energy);

/// kelner_2006 with the multiplicity n of its low-energy continuation given.
double kelner_2006_cross_section(double photon_energy, double kinetic_energy, double multiplicity);

/// The multiplicity that makes the emissivity of J ~ E_p^-slope (total energy) continuous at 100 GeV photon
/// energy. 2 <= slope <= 3.5.
double kelner_2006_multiplicity(double slope);

/// F_gamma(x, E_p): photons per unit x = E/E_p and inelastic collision, E_p total proton energy [erg]
/// (Kelner et al. 2006, eq. 58 ff.).
double kelner_2006_spectrum(double x, double total_energy);

/// Kinetic energies [erg], ascending, where d sigma/dE as a function of the proton energy jumps or bends:
/// split integrals over the proton energy here.
std::span<const double> pion_borders(PionModel model);

} // namespace aureole::physics
