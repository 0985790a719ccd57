#pragma once

#include "aureole/base/run_context.hpp"
#include "aureole/media/media.hpp"
#include "aureole/spectra/basis.hpp"
#include "aureole/transport/axisymmetric_media.hpp"
#include "aureole/transport/limiter.hpp"
#include "aureole/transport/loss_rates.hpp"
#include "aureole/transport/operator.hpp"
#include "aureole/transport/secondary_source.hpp"
#include "aureole/transport/sources.hpp"
#include "aureole/transport/spec.hpp"

#include <memory>
#include <vector>

namespace aureole::transport {

/// A flow by its normal component on faces and outer faces, as SpatialCoefficients has it [cm s-1]; empty at
/// rest.
struct Flow {
    std::vector<double> face, boundary;
};

/// The wind of a spec. constant: V0 tanh(z/base); linear: V0 z/height; accelerated: V0 (1 + |z|/height)
/// tanh(z/base), exact on faces (base 0: V0 from the first face off the plane on); file: velocity of the
/// media, between the cells of a face by distance. Throws Error(scenario) for an unknown kind, a height that
/// is missing, a negative length or speed, or media without velocity.
Flow wind_flow(const WindSpec& wind, const AxisymmetricMedia& media, const Mesh& mesh);

/// One species, without scattering.
struct SpeciesProblem {
    double rest_energy = 0;
    std::vector<double> momentum;                ///< nodes of the march, descending
    double step_ln = 0;                          ///< of them
    std::shared_ptr<const spectra::Basis> basis; ///< kinetic energies of all nodes, ascending
    LossRates losses;
    std::vector<SourceTerm> sources;
};

/// All that the scattering laws of one scenario share. Made once, used for every law.
struct Problem {
    TransportSpec spec;
    AxisymmetricMedia media;
    std::vector<double> hydrogen; ///< [cells] cm-3
    Mesh mesh;
    std::vector<Corner> corners; ///< empty for isotropic diffusion
    std::vector<Boundary> sides;
    Limiter limiter = Limiter::none;
    std::vector<Place> march_places; ///< faces, outer faces, corners
    std::vector<Place> cell_places;
    Flow wind;
    SpeciesProblem protons, electrons;
    SecondaryMatrix secondaries; ///< on march_momenta() of the electrons; empty without
    std::vector<double> gamma;   ///< weights of protons, see gamma_weights()
    double halves = 1;           ///< galaxy over mesh: 2 on a mirrored grid
};

/// Momenta are even in ln p, at least bins_per_decade, from `headroom` energy_to (protons that make
/// secondaries: 10 times that) down to energy_from, which is the last to the bit. Throws Error(scenario) with
/// what is wrong with the spec.
Problem prepare_problem(const TransportSpec& spec,
                        const grid::Grid& grid,
                        const media::Media& media,
                        const RunContext& context);

} // namespace aureole::transport
