#pragma once

/// Bremsstrahlung of electrons on gas. Cross-sections differential in photon energy [cm2 erg-1]; E0 is the
/// electron's total energy before, k the photon energy, both in erg; 0 unless 0 < k < E0 - m c^2. Valid
/// above 2 MeV kinetic energy.
namespace aureole::physics {

/// Helium atoms per hydrogen atom of interstellar gas (common practice).
inline constexpr double helium_per_hydrogen = 0.1;

/// Unscreened relativistic limit for a charge of 1 [cm2 erg-1].
/// Source     Bethe & Heitler 1934; Koch & Motz 1959, Rev. Mod. Phys. 31, 920; Blumenthal & Gould 1970,
/// Rev. Mod. Phys. 42, 237.
double bremsstrahlung_bethe_heitler(double e0, double k);

/// Exact Born approximation, unscreened, charge 1: bremsstrahlung_3bn, blended from E0 = 2000 to 4000 m c^2
/// into bremsstrahlung_bethe_heitler, which by then differs by 4e-6 at half and 2e-4 at 0.95 of the
/// electron energy.
/// Source     Koch & Motz 1959.
double bremsstrahlung_born(double e0, double k);

/// Formula 3BN itself, in extended precision. Terms cancel as E0 grows: 1e-8 is left at 10 GeV, 1e-5 at
/// 1 TeV.
double bremsstrahlung_3bn(double e0, double k);

/// Electron on a free electron at rest. Valid above 2 MeV kinetic energy; never negative.
/// Source     Baring et al. 1999, ApJ 513, 311, after Haug 1975.
double bremsstrahlung_electron_electron(double e0, double k);

enum class Atom { hydrogen, helium };

/// Screening functions at Delta = k m c^2/(4 alpha E0 (E0 - k)) >= 0.
struct Screening {
    double phi1 = 0, phi2 = 0;
};

/// phi_1, phi_2 of a neutral atom with its electrons, as published: integrals of the form factor cut at q =
/// 1 (hydrogen: exact 1s; helium: 1s^2 with effective charge 27/16). Accuracy 1e-10.
/// Source     Gould 1969, Phys. Rev. 185, 72; Blumenthal & Gould 1970, eq. 3.1 ff.
Screening screening_functions(Atom atom, double delta);

/// phi of screening_functions less the terms of first and higher order in the smallest momentum transfer
/// that come from the cut at q = 1, and less the unscreened limit 4(Z^2 + N)(ln(1/d) - 1/2), d = 2 alpha
/// Delta: the effect of screening alone, <= 0, which vanishes as Delta^-4. Delta > 0. Our own change to the
/// published form.
Screening screening_correction(Atom atom, double delta);

/// Screened cross-section per atom with its electrons, published form with screening_functions (E0, E >> m
/// c^2; Delta < 2).
double bremsstrahlung_screened(Atom atom, double e0, double k);

/// Neutral atomic gas per hydrogen nucleus: (Z^2 + N) Born plus the screening correction, hydrogen and
/// `helium` atoms per hydrogen atom. Bound electrons count as heavy targets above 20 MeV and as free
/// electrons (bremsstrahlung_electron_electron) below 5 MeV, blended between. Never negative.
double bremsstrahlung_atomic(double e0, double k, double helium = helium_per_hydrogen);

/// Molecular gas per hydrogen nucleus: two atoms to a molecule, the same as atomic gas (a few per cent of
/// error).
double bremsstrahlung_molecular(double e0, double k, double helium = helium_per_hydrogen);

/// Fully ionised gas per hydrogen nucleus: protons, `helium` He++ and 1 + 2 `helium` free electrons.
double bremsstrahlung_ionised(double e0, double k, double helium = helium_per_hydrogen);

} // namespace aureole::physics
