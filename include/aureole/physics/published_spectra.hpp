#pragma once

/// Local interstellar spectra as published, as densities per kinetic energy N = 4 pi J/(beta c) [cm-3
/// erg-1], kinetic energy in erg. Fits to measurements at Earth; not models of other places.
namespace aureole::physics {

/// Protons. Source: Vos & Potgieter 2015, ApJ 815, 119. Valid 3 MeV to 100 GeV.
double vos_potgieter_2015_protons(double kinetic_energy);

/// Protons. Source: Dermer 1986, A&A 157, 223. Valid above 1 GeV.
double dermer_1986_protons(double kinetic_energy);

/// Electrons. Source: Potgieter et al. 2015, ApJ 810, 141. Valid 5 MeV to 50 GeV.
double potgieter_2015_electrons(double kinetic_energy);

} // namespace aureole::physics
