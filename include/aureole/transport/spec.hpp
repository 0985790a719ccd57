#pragma once

#include "aureole/physics/pion_decay.hpp"
#include "aureole/physics/secondaries.hpp"
#include "aureole/transport/law.hpp"
#include "aureole/transport/limiter.hpp"

#include <optional>
#include <string>
#include <vector>

/// What a scenario asks of the transport solver, read and checked. CGS; rigidities in statvolt.
namespace aureole::transport {

/// Where sources are: axisymmetric and even in z, normalised to the power asked whatever the amplitude.
struct SourceShape {
    /// exponential, green_2015, case_bhattacharya_1996, case_bhattacharya_1998, lorimer_2006,
    /// yusifov_kucuk_2004, ring, nucleus, shell
    std::string kind = "exponential";
    double radius = 0; ///< cm: scale length; radius of the ring or shell
    double width = 0;  ///< cm: Gaussian width of a ring, nucleus or shell
    double height = 0; ///< cm: scale height, exp(-|z|/height); of nucleus and shell unused
};

/// Q(p) ~ p^-slope between breaks, per momentum, with exponential cut-off.
struct SourceSpectrum {
    double slope = 2.3;
    std::optional<double> break_rigidity; ///< statvolt
    double slope_above = 2.3;
    double break_smoothness = 0.2;
    std::optional<double> cutoff_rigidity; ///< statvolt
    double least_rigidity = 0;             ///< statvolt; none below
};

/// One population of sources of one species.
struct SourceSpec {
    SourceShape shape;
    SourceSpectrum spectrum;
    double power = 0; ///< erg/s in kinetic energy of all particles injected, over the whole galaxy
};

/// How a law is scaled before it is used.
struct AnchorSpec {
    enum class Kind { absolute, rate, energy_density, grammage, gamma_luminosity };
    Kind kind = Kind::absolute;
    double value = 0;    ///< s-1, erg cm-3, g cm-2 or erg s-1 (0.1 to 100 GeV)
    double radius = 0;   ///< cm; of rate, energy density and grammage
    double height = 0;   ///< cm
    double rigidity = 0; ///< statvolt; of rate and grammage
};

struct NamedLaw {
    std::string name; ///< the user's
    LawSpec law;
    AnchorSpec anchor;
};

enum class Edge { free_escape, marshak, one_over_r, outflow, closed };

/// An axisymmetric wind that leaves the plane on both sides.
struct WindSpec {
    /// none; constant: V0 sign(z) softened over `base`; linear: V0 |z|/height; accelerated: V0 (1 +
    /// |z|/height) softened over `base`; file: gas velocity of the media
    std::string kind = "none";
    double speed = 0;  ///< V0, cm/s
    double height = 0; ///< cm
    double base = 0;   ///< cm; V ~ z below it
};

struct TransportSpec {
    bool electrons = true, protons = true, secondaries = true;
    std::vector<SourceSpec> electron_sources, proton_sources;
    std::vector<NamedLaw> laws; ///< at least one
    WindSpec wind;
    double perpendicular = 1; ///< kappa_perp/kappa_par; 1: isotropic
    Edge edge_z = Edge::one_over_r, edge_r = Edge::one_over_r;
    std::string limiter = "square_root"; ///< none, square_root, levermore_pomraning, sum
    bool streaming = true; ///< of self-confined laws: drift at the Alfven speed and wave heating
    double energy_from = 0, energy_to = 0; ///< kinetic, erg; what the maps may ask for
    double bins_per_decade = 16;
    double headroom = 30;  ///< the march starts at so many times energy_to
    double source_age = 0; ///< s
    double helium_fraction = 0.1;
    double nuclear_enhancement = 1.8;
    physics::PionModel pion_model = physics::PionModel::kafexhiu_2014_continuous;
    physics::SecondaryModel secondary_model = physics::SecondaryModel::isospin_kelner_2006;
    bool pion_loss_is_catastrophic = false;
};

} // namespace aureole::transport
