#pragma once

#include "aureole/physics/pion_decay.hpp"

#include <array>
#include <optional>
#include <vector>

/// Electrons, positrons and neutrinos from p + p -> charged pions -> muons. Proton energies are kinetic,
/// lepton energies total [erg]; the electron's mass is neglected. Cross-sections [cm2], differential in
/// lepton energy [cm2 erg-1], particles and antiparticles together. The source per volume is n_H int N_p(T)
/// v (d sigma/dE) dT, times nuclear_enhancement for nuclei in beam and gas, as for gamma rays.
namespace aureole::physics {

enum class Secondary {
    electrons,               ///< e+ and e-
    muon_neutrinos_of_pions, ///< nu_mu and antinu_mu of pi -> mu nu
    muon_neutrinos_of_muons, ///< of mu -> e nu nu; in the limit m_e = 0 their spectrum is that of the
                             ///< electrons
    electron_neutrinos,      ///< of mu -> e nu nu
};

enum class SecondaryModel {
    /// The default: isospin below 0.5 TeV of proton energy, kelner_2006_direct above 2 TeV, blended in ln T.
    isospin_kelner_2006,
    /// Two charged pions with the spectrum of each neutral pion, which the photons of the PionModel imply;
    /// decay exact for massless leptons. Keeps the photons to the leptons in the ratio of 1/3 to 2/3 of the
    /// pions' energy. Our own; near threshold, where pi+ dominate, low by up to 2.5 (T < 1 GeV).
    isospin,
    /// Kelner, Aharonian & Bugayov 2006, Phys. Rev. D 74, 034018, sec. IV: spectra per collision, published
    /// for proton energies above 100 GeV and x > 1e-3; below 100 GeV its coefficients stay those of 100 GeV.
    /// The electrons' energy bulges at 0.1-0.7 TeV: 0.056, 0.102, 0.072, 0.063, 0.061 of E_p at 100, 150,
    /// 300, 500, 1000 GeV, where 0.056-0.061 is expected. Use above 1 TeV.
    kelner_2006_direct,
    /// The same for lepton energies above 100 GeV; below, the paper's continuation: pions of 0.17 T, in
    /// number 0.658 (electrons, muon neutrinos of muons), 0.638 (of pions) and 0.679 (electron neutrinos),
    /// ours for a proton slope of 2.5. Within 20 % of the default above 0.3 GeV, 1.3-1.6 times it at 0.1
    /// GeV.
    kelner_2006,
};

/// F(x, E_p): leptons per unit x = E/E_p and inelastic collision, E_p total proton energy [erg]. The paper
/// gives one function for electrons, electron neutrinos (to 5 %) and the muon neutrinos of muons.
/// Source     Kelner et al. 2006, coefficients from memory; they give the decay energies to 5 %
/// (1 TeV) and 15 % (10 PeV, electrons).
double kelner_2006_lepton_spectrum(Secondary secondary, double x, double total_energy);

/// f(x): leptons of one charged pion of energy E_pi >> m_pi per unit x = E/E_pi; its integral is 1.
/// Source     Kelner et al. 2006, from memory; muon polarisation after Lipari 1993, Astropart. Phys. 1, 195.
double pion_decay_spectrum(Secondary secondary, double x);

/// Leptons of one charged pion at rest per unit x = 2 E/m_pi: -x f'(x). Throws Error(runtime) for
/// muon_neutrinos_of_pions, all of which have x = 1 - (m_mu/m_pi)^2.
double pion_rest_spectrum(Secondary secondary, double x);

/// d sigma/dE [cm2 erg-1] of leptons of `energy` from protons of `kinetic_energy`; >= 0.
/// isospin: int rho(x) (d sigma_gamma/dE)(E/x) dx/x with rho = pion_rest_spectrum, for a photon has x = 1:
/// the pions' spectrum itself is not needed. Accuracy 1e-6 relative (measured 2e-7); about 0.1 ms.
double secondary_cross_section(
    SecondaryModel model, PionModel pions, Secondary secondary, double energy, double kinetic_energy);

/// The photons from protons of one kinetic energy, tabulated for many integrals over them; of a PionModel
/// whose photons are neutral pions' (not kelner_2006), so that they are even in ln E about m_pi0/2.
/// Method     at least 20 nodes even in ln E from there to the highest energy, at most 0.15 apart, degree 5
///            between them; as many calls of pion_gamma_cross_section(). Below pion_threshold() all is 0
class PionPhotons {
  public:
    PionPhotons(PionModel model, double kinetic_energy);

    /// int (d sigma/dE) E^-(k+1) dE over photon energies above `energy` [erg], k = 0 to 3 [cm2 erg^-(k+1)].
    std::array<double, 4> moments_above(double energy) const;

  private:
    double photons(double log_energy) const;
    std::array<double, 4> moments(double from, double to) const;

    double peak_ = 0, end_ = 0, step_ = 0; ///< ln m_pi0/2, half the range in ln E, distance of nodes
    std::vector<double> photons_;
    std::vector<std::array<double, 4>> above_; ///< from the lowest energy up
};

/// secondary_cross_section() for many energies of leptons from protons of one energy.
/// Method     isospin: rho is a polynomial in x on either side of (m_mu/m_pi)^2, and the integral a sum of
///            moments_above(). Pions of kelner_2006, neutrinos of pions, other models: nothing is tabulated
/// Accuracy   2e-5 of the largest E d sigma/dE of that proton energy, 1e-2 relative where it falls to 1e-3
///            of that; 4e-5 in sums over protons of N ~ T^-2.7
class SecondarySpectrum {
  public:
    SecondarySpectrum(SecondaryModel model, PionModel pions, Secondary secondary, double kinetic_energy);

    /// d sigma/dE [cm2 erg-1] at a total energy [erg]; >= 0. About 0.3 us.
    double operator()(double energy) const;

  private:
    SecondaryModel model_;
    PionModel pions_;
    Secondary secondary_;
    double kinetic_energy_;
    double direct_share_ = 0; ///< of kelner_2006_direct
    std::optional<PionPhotons> table_;
};

/// kelner_2006 with the multiplicity of its low-energy continuation given.
double kelner_2006_secondary_cross_section(Secondary secondary,
                                           double energy,
                                           double kinetic_energy,
                                           double multiplicity);

/// The multiplicity that makes the emissivity of J ~ E_p^-slope (total energy) continuous at 100 GeV lepton
/// energy. 2 <= slope <= 3.5.
double kelner_2006_secondary_multiplicity(Secondary secondary, double slope);

/// int E (d sigma/dE) dE/(T sigma_inel): the share of a proton's kinetic energy that goes to one kind of
/// lepton in an inelastic collision. About 0.05-0.07 each; gamma rays get 0.1-0.18 and all together no more
/// than pion_inelasticity. 0 below the threshold. For the models other than kelner_2006. Throws
/// Error(runtime) for kelner_2006, whose continuation conserves energy over a spectrum only.
double
secondary_energy_fraction(SecondaryModel model, PionModel pions, Secondary secondary, double kinetic_energy);

/// The same for gamma rays of the PionModel (kelner_2006: its direct spectra).
double gamma_energy_fraction(PionModel pions, double kinetic_energy);

/// Positrons among the electrons of `secondaries`: (1 + 0.7/n)/2, at most 1, n = 2 sigma_pi0/sigma_inel
/// charged pions a collision, 0.7 the charge that protons lose by turning into neutrons. Our own estimate
/// from charge conservation; the 0.7 from memory of bubble-chamber counts at 10-25 GeV. 1 near the threshold
/// (pi+ alone), 0.68 at 10 GeV, 1/2 at high energy. kelner_2006 counts pions as kafexhiu_2014_continuous.
double positron_fraction(PionModel pions, double kinetic_energy);

} // namespace aureole::physics
