#pragma once

#include "aureole/transport/law_catalogue.hpp"
#include "aureole/transport/particle.hpp"
#include "aureole/transport/place.hpp"

#include <cstddef>
#include <map>
#include <memory>
#include <optional>
#include <span>
#include <string>
#include <string_view>
#include <vector>

/// Scattering laws. A law gives the rate nu [s-1] at which scattering makes the directions of particles
/// isotropic (momentum transfer). With it
///   diffusion along the field  kappa = v^2/(3 nu),   mean free path  v/nu = 3 kappa/v.
/// The pitch-angle rate 2 D_mumu/(1 - mu^2) of other papers is the same number only where it does not depend
/// on mu (Jokipii 1966, ApJ 146, 480; Hasselmann & Wibberenz 1968, Z. Geophys. 34, 353); else a factor 2-3
/// hides there. Physical laws of gyroresonance have nu = (pi/4) Omega F, F = (dB/B)^2 per ln k at k = 1/r_g,
/// with r_g = R/B (R rigidity) and Omega = v/r_g.
namespace aureole::transport {

/// A law as a scenario states it, not checked yet. Numbers CGS (rigidity statvolt); the names are those of
/// the catalogue. Children of `sum` and `maximum` are laws; those of any other law are shapes that multiply
/// it.
struct LawSpec {
    std::string name;
    std::map<std::string, double, std::less<>> numbers;
    std::map<std::string, std::vector<double>, std::less<>> lists;
    std::map<std::string, std::string, std::less<>> texts;
    std::vector<LawSpec> children;
};

/// A checked law: every parameter has a value (NaN: taken from the media, or no limit).
struct Law {
    const LawEntry* entry = nullptr;
    double scale = 1; ///< the rate is multiplied by it; set by anchored(). Not read of factors
    std::map<std::string, double, std::less<>> numbers;
    std::map<std::string, std::vector<double>, std::less<>> lists;
    std::map<std::string, std::string, std::less<>> texts;
    std::vector<Law> children;
};

/// Checks names, values and children. Throws one Error(scenario) with a line for every problem: an unknown
/// law or parameter with the nearest name, a value outside its range, lists that do not fit together, a
/// formula that cannot be read.
Law checked_law(const LawSpec& spec);

/// Whether the rate depends on the cosmic rays themselves, so that the transport has to be iterated.
bool depends_on_cosmic_rays(const Law& law);

/// Law `table` from rows in any order, each the rate [s-1] at a node (radius cm, height cm, rigidity
/// statvolt); every combination must occur once. Throws Error(scenario) for a missing, double or ragged one.
LawSpec table_law(std::span<const double> radius,
                  std::span<const double> height,
                  std::span<const double> rigidity,
                  std::span<const double> rate);

struct PreparedTerm;

/// A law with all that depends on places alone worked out. rates() may be called from several threads.
struct PreparedLaw {
    std::string name;
    std::vector<Place> places;
    std::vector<double> field; ///< [places] G; 0 where unknown
    std::shared_ptr<const PreparedTerm> term;
};

/// Throws Error(scenario) naming the law, the medium that is missing and the key that gives it.
PreparedLaw prepare(const Law& law, std::span<const Place> places);

/// What the rates are kept between.
struct RateLimits {
    double least = 1e-25; ///< s-1; at this rate light goes 1e14 kpc unscattered
    bool bohm = true; ///< nu <= Omega, that is a mean free path >= r_g, where the field is known and not 0
};

/// How many rates there were, and how many a limit changed.
struct RateCounts {
    std::size_t rates = 0;
    std::size_t at_bohm = 0;
    std::size_t at_least = 0;
};

/// Scattering rates [s-1] of one particle at all places.
/// pressure   needed by laws that depend on the cosmic rays; [places] or empty
/// out        [places]
/// Throws     Error(scenario) naming law and place where a rate is negative, infinite or no number, or 0 with
///            limits.least == 0; Error(runtime) if the pressure is needed and missing
RateCounts rates(const PreparedLaw& law,
                 const Particle& particle,
                 const ResonantPressure& pressure,
                 std::span<double> out,
                 const RateLimits& limits = {});

/// The rate at one place without limits [s-1]. Pressure and gradient as in ResonantPressure.
double rate_at(const Law& law,
               const Place& place,
               const Particle& particle,
               std::optional<double> pressure = {},
               std::optional<double> gradient = {});

/// Scattering near home, the rate that laws are compared with: 1e-9 s-1 at 1 GV, speed c, R = 8 kpc, z = 0
/// (from memory; the grammage and an extended halo without an edge: Hopkins et al. 2022, MNRAS 516, 3470).
inline constexpr double empirical_rate = 1e-9; ///< s-1
double empirical_rigidity();                   ///< statvolt
double empirical_radius();                     ///< cm

/// A particle of speed c and that rigidity [statvolt]: laws are anchored with it, so that electrons and
/// protons share one law.
Particle reference_particle(double rigidity);

/// A law scaled to have a given rate at one place.
struct Anchored {
    Law law;
    double factor = 1;         ///< rate wanted over the rate of the law as it stood
    double rate = 0;           ///< of the law as it stood, s-1
    double over_empirical = 0; ///< that rate over empirical_rate: compare at empirical_rigidity(), _radius()
};

/// Throws Error(scenario) if the law gives no positive, finite rate there.
Anchored anchored(const Law& law,
                  const Place& place,
                  const Particle& particle,
                  double rate,
                  std::optional<double> pressure = {},
                  std::optional<double> gradient = {});

} // namespace aureole::transport
