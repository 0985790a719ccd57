#include "run.hpp"

#include "aureole/base/constants.hpp"
#include "aureole/base/error.hpp"

#include <fmt/format.h>

#include <algorithm>
#include <cmath>

namespace aureole::transport {
namespace {

/// Rounds of the limiter in which the densities on outer sides settle.
constexpr int side_rounds = 4;
/// Part of the losses that converging streaming leaves; 0 would make systems singular.
constexpr double kept_loss = 0.01;
/// Width of the edge of that bound, in parts of it.
constexpr double rounded = 0.05;

double alignment_at(const Problem& problem, std::uint32_t cell, std::uint32_t axis) {
    return problem.media.alignment[cell][axis == 0 ? 0 : 2];
}

CornerTensor corner_alignment(const Problem& problem, const Corner& corner) {
    CornerTensor mean{};
    for (const std::uint32_t cell : corner.cell) {
        for (std::size_t part = 0; part < 3; ++part) {
            mean[part] += 0.25 * problem.media.alignment[cell][part];
        }
    }
    return mean;
}

class Evaluator {
  public:
    Evaluator(const Problem& problem,
              const SpeciesProblem& species,
              const Scattering& scattering,
              const SourceFunction& sources,
              const RunOptions& options)
        : problem_(problem), species_(species), scattering_(scattering), sources_(sources), options_(options),
          rate_(problem.march_places.size()), local_(problem, false, scattering.width) {
        for (const Corner& corner : problem.corners) {
            alignment_.push_back(corner_alignment(problem, corner));
        }
        if (!problem.wind.face.empty()) {
            wind_divergence_ = flow_divergence(problem.mesh, problem.wind.face, problem.wind.boundary);
        }
        if (options.streaming != Streaming::none) {
            find_alfven_speeds();
        }
    }

    void operator()(double momentum, MomentumData& data) {
        const Particle particle = particle_of_momentum(momentum, species_.rest_energy);
        const std::size_t cells = problem_.mesh.cells();
        data.kinetic_energy = particle.kinetic_energy;
        if (scattering_.self_made_from) {
            rates(*scattering_.self_made_from, particle, {}, rate_, limits_of(problem_));
            set_space(particle, false, data.space);
        } else {
            find_rates(particle);
            if (options_.streaming != Streaming::none) {
                linear_at(scattering_.resonance.direction, problem_.protons.momentum, momentum,
                          problem_.mesh.faces.size() + problem_.mesh.boundary.size(), row_.direction);
                set_drift();
            }
            set_space(particle, options_.streaming != Streaming::none, data.space);
        }
        momentum_losses(species_.losses, particle, cells, data.losses);
        if (species_.losses.catastrophic) {
            data.space.rate.resize(cells);
            species_.losses.catastrophic(particle, data.space.rate);
        }
        if (scattering_.self_made_from || options_.streaming == Streaming::none) {
            data.divergence = wind_divergence_;
        } else {
            held_back += set_divergence(particle, data);
        }
        data.sources.resize(options_.kinds);
        for (auto& source : data.sources) {
            source.assign(cells, 0.0);
        }
        sources_(momentum, data.sources);
    }

    /// Rates, drift and its heating with waves made by a density of protons [cells].
    void respond(double momentum, std::span<const double> density, MomentumData& data) {
        const Particle particle = particle_of_momentum(momentum, species_.rest_energy);
        local_.find(momentum, density, row_);
        rates(scattering_.at_march, particle, {row_.pressure, row_.gradient}, rate_, {});
        const double least = limits_of(problem_).least;
        for (double& rate : rate_) {
            rate += least;
        }
        const bool drifting = options_.streaming != Streaming::none;
        if (drifting) {
            set_drift();
        }
        set_space(particle, drifting, data.space);
        if (drifting) {
            data.held_back = set_divergence(particle, data);
        }
    }

    std::size_t held_back = 0;

  private:
    void find_alfven_speeds() {
        for (const Place& place : problem_.march_places) {
            if (!place.alfven_speed) {
                throw Error(ErrorKind::scenario,
                            "streaming needs the Alfven speed: found none, expected gas.hii and a field, or "
                            "transport.streaming = false");
            }
            alfven_.push_back(*place.alfven_speed);
        }
    }

    /// Speeds of the drift through faces along row_.direction, and its divergence.
    void set_drift() {
        const Mesh& mesh = problem_.mesh;
        const std::size_t faces = mesh.faces.size();
        drift_.face.resize(faces);
        drift_.boundary.resize(mesh.boundary.size());
        for (std::size_t f = 0; f < faces; ++f) {
            drift_.face[f] = alfven_[f] * row_.direction[f];
        }
        for (std::size_t f = 0; f < mesh.boundary.size(); ++f) {
            const bool closed = problem_.sides[mesh.boundary[f].side].kind == BoundaryKind::reflecting;
            drift_.boundary[f] = closed ? 0.0 : alfven_[faces + f] * row_.direction[faces + f];
        }
        drift_divergence_ = flow_divergence(mesh, drift_.face, drift_.boundary);
    }

    static void add(const std::vector<double>& more, std::vector<double>& to) {
        to.resize(more.size());
        for (std::size_t i = 0; i < more.size(); ++i) {
            to[i] += more[i];
        }
    }

    /// Resonance and rates where waves are made by protons that are known.
    void find_rates(const Particle& particle) {
        ResonantPressure resonant;
        if (!scattering_.resonance.empty()) {
            const auto& nodes = problem_.protons.momentum;
            const std::size_t places = rate_.size();
            resonance_at(scattering_.resonance.log_pressure, nodes, particle.momentum, places, row_.pressure);
            resonance_at(scattering_.resonance.log_gradient, nodes, particle.momentum, places, row_.gradient);
            resonant = {row_.pressure, row_.gradient};
        }
        rates(scattering_.at_march, particle, resonant, rate_, limits_of(problem_));
    }

    void set_space(const Particle& particle, bool drifting, SpatialCoefficients& space) {
        const std::size_t faces = problem_.mesh.faces.size();
        const std::size_t outer = problem_.mesh.boundary.size();
        parallel_.resize(rate_.size());
        for (std::size_t i = 0; i < rate_.size(); ++i) {
            parallel_[i] = particle.speed * particle.speed / (3 * rate_[i]);
        }
        space.flow = problem_.wind.face;
        space.boundary_flow = problem_.wind.boundary;
        std::vector<double>* const fully = problem_.corners.empty() ? &parallel_ : &streamed_;
        streamed_.assign(rate_.size(), 0.0);
        if (drifting && options_.streaming == Streaming::diffusion) {
            const double size = problem_.media.grid.x.back() / scattering_.width;
            for (std::size_t i = 0; i < rate_.size(); ++i) {
                (*fully)[i] += alfven_[i] / std::hypot(row_.gradient[i] / row_.pressure[i], turning / size);
            }
        } else if (drifting) {
            add(drift_.face, space.flow);
            add(drift_.boundary, space.boundary_flow);
        }
        const double across = problem_.corners.empty() ? 1.0 : problem_.spec.perpendicular;
        space.speed = particle.speed;
        space.diffusion.resize(faces);
        for (std::size_t f = 0; f < faces; ++f) {
            space.diffusion[f] = across * parallel_[f];
        }
        space.boundary_diffusion.resize(outer);
        for (std::size_t f = 0; f < outer; ++f) {
            const BoundaryFace& face = problem_.mesh.boundary[f];
            const double part = problem_.corners.empty() ? 0.0 : alignment_at(problem_, face.cell, face.axis);
            space.boundary_diffusion[f] =
                (across + (1 - across) * part) * parallel_[faces + f] + part * streamed_[faces + f];
        }
        space.aligned.resize(problem_.corners.size());
        for (std::size_t c = 0; c < problem_.corners.size(); ++c) {
            const std::size_t place = faces + outer + c;
            const double excess = (1 - across) * parallel_[place] + streamed_[place];
            for (std::size_t part = 0; part < 3; ++part) {
                space.aligned[c][part] = excess * alignment_[c][part];
            }
        }
        if (options_.frozen != nullptr && problem_.limiter != Limiter::none) {
            limit_by_frozen(particle.momentum, space);
        }
    }

    void limit_by_frozen(double momentum, SpatialCoefficients& space) {
        frozen_.resize(problem_.mesh.cells());
        at_momentum(*options_.frozen, node_weights(species_.momentum, momentum), frozen_.size(), frozen_);
        if (*std::max_element(frozen_.begin(), frozen_.end()) <= 0) {
            return;
        }
        LimitedFaces limited;
        for (int round = 0; round < side_rounds; ++round) {
            limit(problem_.mesh, problem_.corners, problem_.sides, problem_.limiter, space, frozen_, limited);
        }
        for (std::size_t f = 0; f < space.diffusion.size(); ++f) {
            space.diffusion[f] *= limited.face[f];
        }
        for (std::size_t f = 0; f < space.boundary_diffusion.size(); ++f) {
            space.boundary_diffusion[f] *= limited.boundary[f];
        }
        for (std::size_t c = 0; c < space.aligned.size(); ++c) {
            for (double& part : space.aligned[c]) {
                part *= limited.corner[c];
            }
        }
    }

    /// Wind and drift together; returns the cells in which the drift was held back.
    std::size_t set_divergence(const Particle& particle, MomentumData& data) const {
        std::size_t held = 0;
        data.divergence = wind_divergence_;
        data.divergence.resize(drift_divergence_.size());
        for (std::size_t cell = 0; cell < data.divergence.size(); ++cell) {
            double loss = 0;
            for (const auto& process : data.losses) {
                loss += process[cell];
            }
            const double least = -(1 - kept_loss) * 3 / particle.momentum * loss;
            double& sum = data.divergence[cell];
            const double with_drift = sum + drift_divergence_[cell];
            if (sum < least) {
                sum = with_drift;
                continue;
            }
            held += with_drift < least ? 1 : 0;
            // max(with_drift, least) with its edge rounded off
            const double above = with_drift - least;
            sum = least + 0.5 * (above + std::hypot(above, rounded * least));
        }
        return held;
    }

    const Problem& problem_;
    const SpeciesProblem& species_;
    const Scattering& scattering_;
    const SourceFunction& sources_;
    const RunOptions& options_;
    std::vector<double> rate_, frozen_;
    std::vector<double> parallel_, streamed_, alfven_;
    std::vector<double> wind_divergence_, drift_divergence_;
    std::vector<CornerTensor> alignment_;
    Flow drift_;
    LocalResonance local_;
    PlaceResonance row_;
};

} // namespace

RateLimits limits_of(const Problem& problem) {
    return {.least = constants::speed_of_light / (longest_path * problem.media.grid.x.back())};
}

NodeWeights node_weights(std::span<const double> descending, double momentum) {
    const double step = std::log(descending[0] / descending[1]);
    const double place = std::log(descending[0] / momentum) / step;
    NodeWeights nodes;
    nodes.count = std::min<std::size_t>(4, descending.size());
    const double last = static_cast<double>(descending.size() - nodes.count);
    const double first = std::clamp(std::floor(place + 1e-9) - 1, 0.0, last);
    nodes.first = static_cast<std::size_t>(first);
    for (std::size_t a = 0; a < nodes.count; ++a) {
        double weight = std::pow(descending[nodes.first + a] / momentum, spectra::weighting);
        for (std::size_t b = 0; b < nodes.count; ++b) {
            if (a != b) {
                weight *= (place - first - static_cast<double>(b)) /
                          (static_cast<double>(a) - static_cast<double>(b));
            }
        }
        nodes.weight[a] = weight;
    }
    return nodes;
}

void at_momentum(std::span<const double> values,
                 const NodeWeights& nodes,
                 std::size_t cells,
                 std::span<double> out) {
    std::fill(out.begin(), out.end(), 0.0);
    for (std::size_t a = 0; a < nodes.count; ++a) {
        const double* row = values.data() + (nodes.first + a) * cells;
        for (std::size_t cell = 0; cell < cells; ++cell) {
            out[cell] += nodes.weight[a] * row[cell];
        }
    }
    for (double& value : out) {
        value = std::max(value, 0.0);
    }
}

void linear_at(std::span<const double> values,
               std::span<const double> descending,
               double momentum,
               std::size_t places,
               std::vector<double>& out) {
    const double step = std::log(descending[0] / descending[1]);
    const double last = static_cast<double>(descending.size() - 1);
    const double place = std::clamp(std::log(descending[0] / momentum) / step, 0.0, last);
    const double low = std::min(std::floor(place), last - 1);
    const double* upper = values.data() + static_cast<std::size_t>(low) * places;
    const double* lower = upper + places;
    const double share = place - low;
    out.resize(places);
    for (std::size_t i = 0; i < places; ++i) {
        out[i] = upper[i] + share * (lower[i] - upper[i]);
    }
}

void resonance_at(std::span<const double> log_values,
                  std::span<const double> descending,
                  double momentum,
                  std::size_t places,
                  std::vector<double>& out) {
    linear_at(log_values, descending, momentum, places, out);
    for (double& value : out) {
        value = std::exp(value);
    }
}

SpeciesRun run_species(const Problem& problem,
                       const SpeciesProblem& species,
                       const Scattering& scattering,
                       const SourceFunction& sources,
                       const RunOptions& options,
                       const RunContext& context) {
    Evaluator evaluate(problem, species, scattering, sources, options);
    MarchSetup setup{.mesh = problem.mesh,
                     .corners = problem.corners,
                     .sides = problem.sides,
                     .momentum = species.momentum,
                     .kinds = options.kinds,
                     .limiter = options.limiter,
                     .limiter_tolerance = options.limiter_tolerance,
                     .limiter_iterations = options.limiter_iterations,
                     .ages = false,
                     .evaluate = std::ref(evaluate),
                     .respond = {}};
    if (scattering.self_made_from) {
        setup.respond = [&](double momentum, std::span<const double> density, MomentumData& data) {
            evaluate.respond(momentum, density, data);
        };
    }
    try {
        SpeciesRun run;
        run.result = march(setup, context);
        run.held_back = evaluate.held_back + run.result.held_back;
        return run;
    } catch (const MomentumGain& gain) {
        const Place& place = problem.cell_places[gain.cell];
        throw Error(
            ErrorKind::scenario,
            fmt::format("wind: found compression that gives particles of p c = {:.4g} GeV energy "
                        "faster than they lose it at R = {:.4g} kpc, z = {:.4g} kpc, expected a wind that "
                        "diverges or losses that outweigh it",
                        gain.momentum * constants::speed_of_light / constants::gigaelectronvolt,
                        place.radius / constants::kiloparsec, place.height / constants::kiloparsec));
    }
}

SourceFunction primary_sources(const SpeciesProblem& species) {
    return [&species](double momentum, std::vector<std::vector<double>>& out) {
        for (const SourceTerm& term : species.sources) {
            const double rate = injected(term, momentum, species.step_ln);
            for (std::size_t cell = 0; cell < out[0].size() && rate > 0; ++cell) {
                out[0][cell] += rate * term.where.density[cell];
            }
        }
    };
}

std::vector<double>
weighted_density(const SpeciesProblem& species, std::span<const double> density, std::size_t cells) {
    const auto energy = species.basis->energy();
    const std::size_t nodes = energy.size();
    std::vector<double> weighted(density.size());
    for (std::size_t node = 0; node < nodes; ++node) {
        const Particle particle =
            particle_of_momentum(species.momentum[nodes - 1 - node], species.rest_energy);
        const double factor = std::pow(energy[node], spectra::weighting) / particle.speed;
        for (std::size_t cell = 0; cell < cells; ++cell) {
            weighted[node * cells + cell] =
                factor * std::max(0.0, density[(nodes - 1 - node) * cells + cell]);
        }
    }
    return weighted;
}

std::vector<double>
moment(std::span<const double> weights, std::span<const double> weighted, std::size_t cells) {
    std::vector<double> sum(cells, 0.0);
    for (std::size_t node = 0; node < weights.size(); ++node) {
        for (std::size_t cell = 0; cell < cells; ++cell) {
            sum[cell] += weights[node] * weighted[node * cells + cell];
        }
    }
    return sum;
}

} // namespace aureole::transport
