#pragma once

/// How much power cosmic rays get from stars, where their sources sit, and the light of the disc.
namespace aureole::physics {

enum class InitialMassFunction {
    salpeter_1955, ///< dN/dm ~ m^-2.35. Salpeter 1955, ApJ 121, 161
    kroupa_2001,   ///< slopes 0.3, 1.3, 2.3 with breaks at 0.08 and 0.5. Kroupa 2001, MNRAS 322, 231
    chabrier_2003, ///< disc, single stars: log-normal (0.079, sigma 0.69) below 1, slope 2.3 above.
                   ///< Chabrier 2003, PASP 115, 763
};

/// Masses in solar masses.
struct MassRange {
    double lightest, heaviest;
};

/// Stars of `progenitors` per solar mass of stars formed in `stars` [Msun-1]: core-collapse supernovae. By
/// quadrature, 1e-10. Salpeter from 0.1: 0.0068, Kroupa from 0.01: 0.0095, Chabrier: 0.0108; type Ia add
/// 10-25 %.
/// Throws     Error(runtime) unless 0 < lightest < heaviest and the progenitors lie within the stars.
double supernovae_per_solar_mass(InitialMassFunction imf,
                                 MassRange progenitors = {8, 40},
                                 MassRange stars = {0.1, 100});

/// Star formation rate [Msun yr-1] from the luminosity of 3-1100 um [erg s-1]: 10^-43.41 L.
/// Source     Kennicutt & Evans 2012, ARA&A 50, 531 (Kroupa stars), from memory.
double star_formation_rate_kennicutt_evans_2012(double infrared_luminosity);

/// Power of cosmic rays [erg s-1] from supernovae per year, their energy [erg] and the fraction of it given
/// to cosmic rays. 0.02 yr-1: 6.34e40.
double cosmic_ray_power(double supernovae_per_year, double fraction = 0.1, double supernova_energy = 1e51);

/// Sources per area of the disc at a radius [cm, >= 0] over those at 8.5 kpc, as fitted to the Milky Way:
/// (R/R0)^a exp(-b (R - R0)/R0), R0 = 8.5 kpc. Coefficients from memory.
double sources_case_bhattacharya_1996(double radius); ///< remnants: 1.69, 3.33. A&AS 120, 437
double sources_case_bhattacharya_1998(double radius); ///< remnants: 2.0, 3.53. ApJ 504, 761
double sources_green_2015(double radius);             ///< remnants: 1.09, 3.87. MNRAS 454, 1517
double sources_lorimer_2006(double radius);           ///< pulsars: 1.9, 5.0. MNRAS 372, 777

/// Pulsars: 1.64, 4.01 in (R + 0.55 kpc)/(R0 + 0.55 kpc); not 0 in the centre.
/// Source     Yusifov & Kucuk 2004, A&A 422, 545, from memory.
double sources_yusifov_kucuk_2004(double radius);

/// exp(-(R - R0)/scale_length) with R0 = 8.5 kpc; scale length > 0 [cm].
double sources_exponential(double radius, double scale_length);

/// Energy density [erg cm-3] of the light of an optically thin, infinitely thin disc of surface brightness ~
/// exp(-R/scale_length), seen from (radius, height) [cm]: (1/2c) int S R' dR'/sqrt((R^2 + R'^2 + Z^2)^2 - 4
/// R^2 R'^2), Z^2 = height^2 + softening^2, S = luminosity/(2 pi scale_length^2) exp(-R'/scale_length).
/// luminosity [erg s-1]; softening > 0 [cm], about the thickness of the disc, keeps the logarithm at the
/// disc finite. Tends to luminosity/(4 pi c r^2) far away. No dust in the way.
/// Accuracy   1e-9.
double exponential_disc_energy_density(
    double radius, double height, double luminosity, double scale_length, double softening);

} // namespace aureole::physics
