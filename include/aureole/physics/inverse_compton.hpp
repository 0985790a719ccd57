#pragma once

#include <span>

/// Inverse Compton scattering by electrons with gamma >> 1 (accept gamma >= 10, error of order 1/gamma^2),
/// photons that gain energy only. All photon energies in erg; results per erg.
namespace aureole::physics {

/// Scattered photons per target photon density, per electron, from isotropic photons [cm3 s-1 erg-1]:
///   (3 sigma_T c/(4 gamma^2 eps)) [2q ln q + (1+2q)(1-q) + (Gq)^2 (1-q)/(2(1+Gq))],
///   z = eps1/(gamma m c^2), G = 4 gamma eps/(m c^2), q = z/(G(1-z)), for 1/(4 gamma^2) <= q <= 1, else 0.
/// Source     Jones 1968, Phys. Rev. 167, 1159; Blumenthal & Gould 1970, Rev. Mod. Phys. 42, 237, eq. 2.48.
double inverse_compton_kernel(double gamma, double eps, double eps1);

/// The same for photons of one direction [cm3 s-1 erg-1]; mu = cosine between the velocities of electron
/// and photon (head-on: -1). The factor 1 - mu of the encounter rate is inside.
/// Source     Aharonian & Atoyan 1981, Ap&SS 79, 321; Moskalenko & Strong 2000, ApJ 528, 357.
double inverse_compton_kernel(double gamma, double eps, double eps1, double mu);

/// Energy-loss factor f(b), b = 4 gamma eps/(m c^2): -dE/dt = (4/3) sigma_T c gamma^2 int U_eps f(b) d eps.
/// f(0) = 1.
/// Accuracy   1e-12 relative for b < 1e8 (series below 0.25, closed form with the dilogarithm above).
/// Source     Jones 1968; closed form in Moderski et al. 2005, MNRAS 363, 954.
double klein_nishina_loss_factor(double b);

/// Scattering rate over sigma_T c n for isotropic photons, b = 4 gamma eps/(m c^2). 1 at b = 0.
/// Accuracy   1e-12 for b < 1e8.
/// Source     the integral of the kernel of Jones 1968, by quadrature.
double klein_nishina_rate_factor(double b);

/// Scatterings per second of one electron with isotropic photons of density [cm-3] and energy eps.
double inverse_compton_rate(double gamma, double eps, double photon_density);

/// Smallest Lorentz factor that turns eps into eps1 by isotropic scattering: (e1/2)(1 + sqrt(1 + 1/(e
/// e1))), energies over m c^2.
double minimum_lorentz_factor(double eps, double eps1);

/// Smallest target photon energy [erg] that an electron turns into eps1; infinite where eps1 >= gamma m
/// c^2.
double minimum_target_energy(double gamma, double eps1);

/// Photons per second and energy [s-1 erg-1] of one electron in an isotropic black-body spectrum of unit
/// energy density (1 erg cm-3): multiply by the energy density of the component. 0 below the kinematic
/// threshold's reach, exactly.
/// Accuracy   1e-11 relative (Gauss-Legendre from the threshold on), 3 us.
double inverse_compton_blackbody_kernel(double gamma, double eps1, double temperature);

/// The same for a photon density [cm-3 erg-1] tabulated on ascending energies [erg], straight in log-log
/// between nodes (straight in the energy where an end is 0), none outside; not normalised: the result is
/// s-1 erg-1 for the density given.
/// Accuracy   1e-11 relative for that interpolant.
/// Throws     Error(input) for fewer than two nodes, unequal lengths, energies not ascending and positive,
/// or a density that is negative or not finite.
double inverse_compton_tabulated_kernel(double gamma,
                                        double eps1,
                                        std::span<const double> energy,
                                        std::span<const double> density);

} // namespace aureole::physics
