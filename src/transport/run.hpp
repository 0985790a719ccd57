#pragma once

#include "aureole/transport/law.hpp"
#include "aureole/transport/march.hpp"
#include "aureole/transport/problem.hpp"

#include <array>
#include <atomic>
#include <cstddef>
#include <functional>
#include <memory>
#include <optional>
#include <span>
#include <vector>

namespace aureole::transport {

/// Protons at every node and place, from which waves and streaming follow.
struct Resonance {
    std::vector<double> log_pressure,
        log_gradient; ///< dP/dlnp and its gradient along the field [nodes][places]
    /// [nodes][faces, outer faces] outward (from first to second) part of a unit vector along the field down
    /// the gradient, softened where the pressure is flat
    std::vector<double> direction;
    bool empty() const { return log_gradient.empty(); }
};

/// Protons of one momentum [places]: dP/dlnp and its gradient along the field, and the direction of the drift
/// as in Resonance.
struct PlaceResonance {
    std::vector<double> pressure, gradient, direction;
};

/// Finds resonances, momentum by momentum.
class LocalResonance {
  public:
    /// width      factor of both regularisations: of flat pressures and of the turning drift
    LocalResonance(const Problem& problem, bool at_cells, double width);
    ~LocalResonance();
    /// density    of protons [cells]
    void find(double momentum, std::span<const double> density, PlaceResonance& out);

  private:
    class Gradients;
    const Problem& problem_;
    bool at_cells_;
    double width_;
    std::vector<double> pressure_;
    std::unique_ptr<Gradients> gradients_;
};

/// How drifting with the waves is put into a march.
enum class Streaming {
    none,
    diffusion, ///< v_A psi/|grad psi| more diffusion: the protons themselves, whose gradient may turn around
    flow,      ///< at v_A: particles that drift with waves made by others
};

/// How particles are scattered at the places of the march.
struct Scattering {
    Law law; ///< scaled
    PreparedLaw at_march;
    Resonance resonance; ///< at march_places; empty where the law does not ask
    bool streaming = false;
    double width = 1; ///< of the regularisations
    /// Waves made by the marched protons themselves: their resonance is found with their density, from the
    /// rates of this law as a first guess. Empty: the resonance above counts.
    std::optional<PreparedLaw> self_made_from;
};

/// Mean free paths of light are at most this many outer radii: longer ones change nothing but make the linear
/// systems ill-conditioned.
inline constexpr double longest_path = 1e4;
RateLimits limits_of(const Problem& problem);

/// Cubic interpolation between nodes even in ln p, of functions that fall about as p^-2.5.
struct NodeWeights {
    std::size_t first = 0, count = 0;
    std::array<double, 4> weight{};
};
NodeWeights node_weights(std::span<const double> descending, double momentum);

/// Values [nodes][cells] at a momentum, not below 0.
void at_momentum(std::span<const double> values,
                 const NodeWeights& nodes,
                 std::size_t cells,
                 std::span<double> out);

/// Values [nodes][places] at a momentum, linear in ln p, constant outside.
void linear_at(std::span<const double> values,
               std::span<const double> descending,
               double momentum,
               std::size_t places,
               std::vector<double>& out);

/// Pressure or gradient at a momentum: exp of the same.
void resonance_at(std::span<const double> log_values,
                  std::span<const double> descending,
                  double momentum,
                  std::size_t places,
                  std::vector<double>& out);

/// Writes sources [kinds][cells] at a momentum.
using SourceFunction = std::function<void(double momentum, std::vector<std::vector<double>>& out)>;

struct RunOptions {
    std::size_t kinds = 1;
    Limiter limiter = Limiter::none;
    double limiter_tolerance = 1e-8;
    int limiter_iterations = 200;
    /// A density [nodes][cells] by which fluxes are limited, instead of by that of the march: makes the march
    /// linear.
    const std::vector<double>* frozen = nullptr;
    Streaming streaming = Streaming::none;
};

/// A march and how often streaming was kept from adding energy.
struct SpeciesRun {
    MarchResult result;
    std::size_t held_back = 0; ///< cells and momenta
};

/// Throws Error(scenario) naming the place where a wind compresses faster than particles lose energy.
SpeciesRun run_species(const Problem& problem,
                       const SpeciesProblem& species,
                       const Scattering& scattering,
                       const SourceFunction& sources,
                       const RunOptions& options,
                       const RunContext& context);

/// Primary sources of a species, of one kind.
SourceFunction primary_sources(const SpeciesProblem& species);

/// M = N T^2.5 [nodes, ascending][cells] of a density [nodes, descending][cells], not below 0.
std::vector<double>
weighted_density(const SpeciesProblem& species, std::span<const double> density, std::size_t cells);

/// sum_j weights_j M_j [cells].
std::vector<double>
moment(std::span<const double> weights, std::span<const double> weighted, std::size_t cells);

/// Resonance at march_places (of cells: `cells`) from a density of protons.
Resonance
resonance_of(const Problem& problem, std::span<const double> density, bool at_cells, double width = 1);

/// Where the pressure changes by less than this part over the outer radius, drifting is softened and turns
/// around.
inline constexpr double turning = 0.1;

} // namespace aureole::transport
