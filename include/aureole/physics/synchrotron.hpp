#pragma once

#include "aureole/base/constants.hpp"

/// Synchrotron radiation of electrons with gamma >> 1 in vacuum: no Razin suppression, no self-absorption,
/// no circular polarisation (of order 1/gamma).
namespace aureole::physics {

/// sqrt(3) e^3/(m c^2) [erg s-1 Hz-1 G-1]: the total power per unit frequency of one electron, in all
/// directions, is this times B sin(a) F(x).
inline constexpr double synchrotron_power_constant =
    1.7320508075688772 * constants::elementary_charge * constants::elementary_charge *
    constants::elementary_charge / constants::electron_rest_energy;

/// nu_1 = 3 e/(4 pi m c) [Hz G-1]: the critical frequency is nu_1 B_perp gamma^2.
inline constexpr double synchrotron_critical_constant =
    3 * constants::elementary_charge /
    (4 * constants::pi * constants::electron_mass * constants::speed_of_light);

/// F(x) = x int_x^inf K_{5/3}(y) dy, the total power against x = nu/nu_c; 0 for x = 0 and x = inf.
/// Accuracy   1e-12 relative (measured 5e-14 for 1e-6 <= x <= 80); underflows to exactly 0 above x = 745.
/// NaN for x < 0 or NaN.
/// Source     Westfold 1959, ApJ 130, 241; Ginzburg & Syrovatskii 1965, ARA&A 3, 297.
double synchrotron_f(double x);

/// G(x) = x K_{2/3}(x), the linearly polarised power. Accuracy and limits as synchrotron_f.
double synchrotron_g(double x);

/// R(x) = (1/2) int_0^pi sin^2(a) F(x/sin a) da: isotropic directions of a field of fixed strength, x =
/// nu/(nu_1 B gamma^2). The mean total power is synchrotron_power_constant B R(x); its polarisation is 0.
/// Accuracy   1e-12 relative (measured 2e-13 up to 300); exactly 0 where it underflows.
/// Source     Crusius & Schlickeiser 1986, A&A 164, L16; closed form: Ghisellini, Guilbert & Svensson 1988,
/// ApJ 334, L5.
double synchrotron_random(double x);

/// Averages of b F(x/b) and b G(x/b) cos 2phi; see mixed_field.
struct MixedField {
    double total = 0, polarised = 0;
};

/// Ordered field plus isotropic Gaussian turbulence in one place. b0: ordered field projected on the sky
/// [G]; sigma: standard deviation of each turbulent component, B_rms/sqrt(3) with B_rms the rms of the
/// three-dimensional turbulent vector. The projected field is Rice-distributed.
///   field_across = sqrt(b0^2 + 2 sigma^2), order t = b0^2/(b0^2 + 2 sigma^2), b = B_perp/field_across,
///   x = nu/(nu_1 field_across gamma^2), phi = angle of the projected field against the ordered one,
///   total = <b F(x/b)>, polarised = <b G(x/b) cos 2phi>.
/// The power of one electron is synchrotron_power_constant field_across total, its polarised part the same
/// with `polarised` (E-vector perpendicular to the projected ordered field).
/// Valid      x >= 0 (0 and inf give 0); order in [0, 1]: 1 gives F and G, 0 gives no polarisation.
/// Accuracy   1e-10 relative where the result exceeds 1e-30 (polarised: relative to total).
/// Throws     Error(runtime) for order outside [0, 1] or negative x.
/// Source     Rice 1945, Bell System Tech. J. 24, 46 for the distribution; the averages are derived here
/// and tested against closed power-law forms.
MixedField mixed_field(double x, double order);
double mixed_field_f(double x, double order); ///< total of mixed_field
double mixed_field_g(double x, double order); ///< polarised of mixed_field

/// Maximum degree of polarisation of a power law N = K gamma^-s in an ordered field: (s + 1)/(s + 7/3).
/// Source     Ginzburg & Syrovatskii 1965, ARA&A 3, 297; Rybicki & Lightman 1979, Radiative Processes, sec.
/// 6.5.
constexpr double maximum_polarisation(double s) {
    return (s + 1) / (s + 7.0 / 3.0);
}

/// Emissivity per sr [erg s-1 cm-3 Hz-1 sr-1] of N = K gamma^-s [K in cm-3 per unit Lorentz factor,
/// isotropic] without a cut in reach of `frequency` [Hz], in a field [G] across the line of sight. s > 1/3.
/// Source     Ginzburg & Syrovatskii 1965; Rybicki & Lightman 1979, eq. 6.36.
/// Throws     Error(runtime) for s <= 1/3.
double power_law_emissivity_ordered(double k, double s, double field_across, double frequency);

/// The same for random directions of a field of fixed strength [G].
double power_law_emissivity_random(double k, double s, double field, double frequency);

/// Total and polarised emissivity per sr of the same electrons in ordered plus Gaussian turbulent field; b0
/// and sigma [G] as in mixed_field.
/// Source     Burn 1966, MNRAS 133, 67 and Sokoloff et al. 1998, MNRAS 299, 189 for s = 3; general s
/// derived here.
MixedField power_law_emissivity_mixed(double k, double s, double b0, double sigma, double frequency);

} // namespace aureole::physics
