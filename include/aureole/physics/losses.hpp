#pragma once

#include "aureole/base/constants.hpp"
#include "aureole/physics/bremsstrahlung.hpp"
#include "aureole/physics/pion_decay.hpp"

#include <span>
#include <vector>

/// Energy losses -dE/dt >= 0 [erg s-1] of one particle, by process. Energies are kinetic and in erg unless a
/// name says otherwise (-dE/dt is the same for kinetic and total energy); densities in cm-3; `hydrogen`
/// counts hydrogen nuclei and `helium` is helium atoms per hydrogen nucleus. Pure functions; the table
/// objects are immutable once built and may be shared by threads.
namespace aureole::physics {

/// Values of a positive function on even steps of ln x, read by 6-point Lagrange interpolation of its
/// logarithm; x must lie in the table.
class LogTable {
  public:
    /// nodes >= 6 values, node i at exp(first_ln + i step_ln).
    LogTable(double first_ln, double step_ln, std::vector<double> log_values);
    /// ln f at ln x.
    double log_value(double ln_x) const;
    double last_ln() const;

  private:
    double first_ln_, step_ln_;
    std::vector<double> log_values_;
};

// Electrons and positrons

/// Synchrotron: (4/3) sigma_T c (B^2/8 pi) gamma^2 beta^2, mean over isotropic pitch angles. `field`: rms of
/// the total field, ordered and turbulent [G]: the one that radiates in the synchrotron emissivity.
/// Source     Rybicki & Lightman 1979, Radiative Processes, eq. 6.7b.
double synchrotron_loss(double kinetic_energy, double field);

/// Inverse Compton in the Thomson limit: (4/3) sigma_T c gamma^2 beta^2 u for isotropic photons of energy
/// density u [erg cm-3].
double thomson_loss(double kinetic_energy, double energy_density);

/// Inverse Compton on isotropic photons with a black-body spectrum, full Klein-Nishina. The net loss:
/// outgoing less incoming photon energy. The kernels of inverse_compton.hpp count outgoing energy and leave
/// out photons that lose energy, so their integral exceeds this by a fraction 1/gamma^2.
class BlackbodyLoss {
  public:
    /// Tabulates the factor in ln(gamma k T/m c^2): one table for all temperatures. About 10 ms.
    BlackbodyLoss();

    /// Loss over Thomson loss: int x^3/(e^x - 1) f(4 gamma kT x/m c^2) dx/(pi^4/15), f =
    /// klein_nishina_loss_factor; the same for a diluted black body. `lorentz_factor` >= 1, temperature [K].
    /// Accuracy   1e-9 relative between gamma k T/m c^2 = 1e-6 and 1e7, measured 4e-10; series below
    /// (1e-12); logarithmic limit above, to 2e-6.
    /// Source     Jones 1968, Phys. Rev. 167, 1159; Moderski et al. 2005, MNRAS 363, 954.
    double factor(double lorentz_factor, double temperature) const;

    /// -dE/dt [erg s-1] in a diluted black body of energy density [erg cm-3].
    double loss(double kinetic_energy, double temperature, double energy_density) const;

  private:
    LogTable table_;
};

/// Inverse Compton on isotropic photons of density [cm-3 erg-1] tabulated on energies [erg], straight in
/// log-log between nodes as in inverse_compton_tabulated_kernel.
/// Accuracy   1e-10 relative for that interpolant.
/// Throws     Error(input) as inverse_compton_tabulated_kernel.
double inverse_compton_tabulated_loss(double kinetic_energy,
                                      std::span<const double> energy,
                                      std::span<const double> density);

/// Bremsstrahlung as continuous loss: beta c int k (d sigma/dk) dk over the cross-sections of
/// bremsstrahlung.hpp, so that the loss is the energy that the emission room radiates. Photons carry a large
/// part of the electron's energy: the continuous form is exact for N ~ E^-2 and 31 % high for E^-3.
class BremsstrahlungLoss {
  public:
    /// Tabulates both phases in ln T. About 0.03 s.
    explicit BremsstrahlungLoss(double helium = helium_per_hydrogen);

    /// -dE/dt in neutral gas, atomic or molecular.
    /// Accuracy   2e-5 of the integral from 2 MeV (3e-6 at 20 MeV to 10 GeV) to 10 TeV, where the screening
    /// is complete and the loss goes on in proportion to E. Below 2 MeV the cross-sections are not valid:
    /// the loss over beta c E goes on with continuous slope to a constant, a guess that does not matter, for
    /// it is below 0.4 % of the ionisation loss there.
    double neutral(double kinetic_energy, double hydrogen) const;

    /// -dE/dt in ionised gas: protons, He++ and their free electrons; above 10 TeV in proportion to E times
    /// a straight line in ln E. `hydrogen`: protons [cm-3].
    double ionised(double kinetic_energy, double hydrogen) const;

  private:
    LogTable neutral_, ionised_;
};

/// Handbook forms for hydrogen alone, for comparison with BremsstrahlungLoss. Ionised: 8 alpha r_e^2 c n E
/// (ln 2 gamma - 1/3). Neutral: the same below gamma = 100, complete screening (phi1 = 45.79, phi2 = 44.46)
/// above 800, straight in E between.
/// Source     Ginzburg 1979, Theoretical Physics and Astrophysics; Blumenthal & Gould 1970, Rev. Mod. Phys.
/// 42, 237.
double bremsstrahlung_handbook_ionised(double kinetic_energy, double hydrogen);
double bremsstrahlung_handbook_neutral(double kinetic_energy, double hydrogen);

/// Mean excitation energies [erg] of the gas. Atomic hydrogen 15.0 eV (molecular: 19.2), helium 41.8 eV
/// (ICRU Report 37, from memory); 15 to 19 eV moves the loss by 2 %.
struct ExcitationEnergies {
    double hydrogen = 15.0 * constants::electronvolt;
    double helium = 41.8 * constants::electronvolt;
};

/// Ionisation and excitation by an electron in neutral gas: (2 pi r_e^2 m c^3/beta) sum_s Z_s n_s {ln[tau^2
/// (tau + 2)/(2 (I_s/m c^2)^2)] + [1 + tau^2/8 - (2 tau + 1) ln 2]/gamma^2}, tau = T/m c^2, which tends to
/// the usual ln[(gamma-1) beta^2 E^2/(2 I^2)] + 1/8. No density effect. Positrons differ by a few per cent
/// below 1 MeV. Below 1 keV the loss goes to 0 with T.
/// Source     Berger & Seltzer 1964 (Moller scattering), as in ICRU Report 37; limit: Ginzburg 1979.
double electron_ionisation_loss(double kinetic_energy,
                                double hydrogen,
                                double helium = helium_per_hydrogen,
                                const ExcitationEnergies& excitation = {});

/// Coulomb loss of an electron to free electrons of a density [cm-3]: (2 pi r_e^2 m c^3/beta) n_e {ln[E m
/// c^2/(4 pi r_e (hbar c)^2 n_e)] - 3/4}, E total energy. Relativistic electrons, T >> k T_e; below gamma =
/// 2 only an order of magnitude, and below 1 keV the loss goes to 0 with T. 0 for n_e = 0.
/// Source     Ginzburg 1979; Strong & Moskalenko 1998, ApJ 509, 212.
double electron_coulomb_loss(double kinetic_energy, double electron_density);

// Protons

/// Ionisation by a proton in neutral gas: (2 pi r_e^2 m c^3/beta) sum_s n_s Z_s {ln[2 m c^2 beta^2 gamma^2
/// Q/I_s^2] - 2 beta^2}, Q = 2 m c^2 beta^2 gamma^2/(1 + 2 gamma m/M). No shell, density or charge-exchange
/// terms: valid for beta > 0.01; below, the loss goes to 0 with T.
/// Source     Mannheim & Schlickeiser 1994, A&A 286, 983, explicit form.
double proton_ionisation_loss(double kinetic_energy,
                              double hydrogen,
                              double helium = helium_per_hydrogen,
                              const ExcitationEnergies& excitation = {});

/// (1/2) ln[(m c/hbar)^2 M gamma^2 beta^4/(pi r_e n_e (M + 2 gamma m))], at least 1.
double proton_coulomb_logarithm(double kinetic_energy, double electron_density);

/// x^3 = (3 sqrt(pi)/4) (2 k T_e/m c^2)^(3/2) of electrons of a temperature [K].
double electron_thermal_cube(double temperature);

/// Coulomb loss of a proton to free electrons: 4 pi r_e^2 m c^3 n_e ln L beta^2/(x^3 + beta^3), x^3 =
/// electron_thermal_cube(T_e). 0 for n_e = 0.
/// Source     Mannheim & Schlickeiser 1994, with the Coulomb logarithm in place of their 20 (it is 30-45:
/// twice their fit).
double proton_coulomb_loss(double kinetic_energy, double electron_density, double electron_temperature);

/// Energy that a proton loses to pions in an inelastic collision, as a fraction of its kinetic energy.
/// Source     Kelner, Aharonian & Bugayov 2006, Phys. Rev. D 74, 034018.
inline constexpr double pion_inelasticity = 0.5;

/// Collisions of a proton with gas per hydrogen nucleus, over p + p: 1 + helium (4^(3/8))^2.
/// Source     geometric scaling (A_p^(3/8) + A_t^(3/8) - 1)^2 of Orth & Buffington 1976, ApJ 206, 312, from
/// memory; metals (1-2 %) left out.
double target_nuclei_factor(double helium = helium_per_hydrogen);

/// What is left of nuclear_enhancement for nuclei in the beam: enhancement/target_nuclei_factor. Pions made
/// per hydrogen nucleus are p + p times target times beam factor; a proton loses energy to p + p times the
/// target factor alone, and the beam factor's part is lost by the heavier nuclei.
double beam_nuclei_factor(double enhancement = nuclear_enhancement, double helium = helium_per_hydrogen);

/// Inelastic collisions per second [s-1]: n c beta sigma_inel times target_nuclei_factor. As the rate of a
/// catastrophic loss it takes the place of pion_loss; never use both.
double inelastic_collision_rate(PionModel model,
                                double kinetic_energy,
                                double hydrogen,
                                double helium = helium_per_hydrogen);

/// Pion production as continuous loss: pion_inelasticity T inelastic_collision_rate. Keeps the energy
/// budget; for N ~ E^-2.7 the leading protons of the discrete process make the removal 20-35 % slower.
double
pion_loss(PionModel model, double kinetic_energy, double hydrogen, double helium = helium_per_hydrogen);

} // namespace aureole::physics
