#include "aureole/transport/solve.hpp"

#include "anchor_search.hpp"
#include "reports.hpp"
#include "run.hpp"

#include "aureole/base/constants.hpp"
#include "aureole/physics/gyration.hpp"

#include <Eigen/Dense>
#include <fmt/format.h>

#include <algorithm>
#include <cmath>
#include <numeric>

namespace aureole::transport {
namespace {

/// Of densities whose waves they make, and of electrons among those waves.
constexpr double confined_tolerance = 1e-5;
constexpr double confined_anchor = 1e-4;
/// Of densities that are only compared.
constexpr double loose_tolerance = 1e-4;

double momentum_of(double rigidity) {
    return rigidity * constants::elementary_charge / constants::speed_of_light;
}

/// Protons for one factor of a law.
struct Protons {
    Scattering scattering;
    double factor = 1;
    SpeciesRun run;
    ConfinementReport confinement;
    std::vector<double> weighted;
    const std::vector<double>& density() const { return run.result.density[0]; }
};

class Solver {
  public:
    Solver(const Problem& problem,
           const NamedLaw& law,
           const RunContext& context,
           const SolveOptions& options)
        : problem_(problem), named_(law), context_(context), options_(options), law_(checked_law(law.law)),
          cells_(problem.mesh.cells()), resonant_(depends_on_cosmic_rays(law_)) {
        choose_place();
        if (resonant_ && !problem.spec.protons) {
            throw Error(ErrorKind::scenario, "found a law that depends on the cosmic rays without protons, "
                                             "which drive the waves; expected transport.protons = true");
        }
        if (needs_search() && !problem.spec.protons) {
            throw Error(ErrorKind::scenario,
                        "anchor: found a quantity of the protons to meet without protons, expected "
                        "transport.protons = true or another anchor");
        }
    }

    Solution run() {
        Solution solution;
        solution.law = named_.name;
        solution.grid = problem_.media.grid;
        solution.of_gas = problem_.media.of_gas;
        solution.of_field_energy = problem_.media.of_field_energy;
        solution.of_radiation = problem_.media.of_radiation;
        report_ = &solution.anchor;
        solution.anchor = {
            .kind = named_.anchor.kind, .value = named_.anchor.value, .radius = radius_, .height = height_};
        Scattering scattering;
        if (problem_.spec.protons) {
            Protons protons = find_protons();
            add_protons(protons, solution);
            scattering = std::move(protons.scattering);
            if (problem_.spec.electrons) {
                add_electrons(scattering, protons.weighted, solution);
            }
        } else {
            scattering = scattered_by(anchored_law(1, {}), {});
            add_electrons(scattering, {}, solution);
        }
        report_rates(scattering);
        return solution;
    }

  private:
    bool needs_search() const {
        return named_.anchor.kind == AnchorSpec::Kind::energy_density ||
               named_.anchor.kind == AnchorSpec::Kind::grammage ||
               named_.anchor.kind == AnchorSpec::Kind::gamma_luminosity;
    }

    void choose_place() {
        const grid::Grid& grid = problem_.media.grid;
        const auto kind = named_.anchor.kind;
        if (kind == AnchorSpec::Kind::absolute || kind == AnchorSpec::Kind::gamma_luminosity) {
            radius_ = empirical_radius() < grid.x.back() ? empirical_radius() : 0.5 * grid.x.back();
            height_ = 0;
        } else {
            radius_ = named_.anchor.radius;
            height_ = named_.anchor.height;
            const double bottom = grid.mirrored ? -grid.z.back() : grid.z.front();
            if (!(radius_ >= 0 && radius_ <= grid.x.back() && height_ >= bottom &&
                  height_ <= grid.z.back())) {
                throw Error(ErrorKind::scenario,
                            fmt::format("anchor: found the place R = {:.4g} kpc, z = {:.4g} kpc, expected "
                                        "one inside the grid",
                                        radius_ / constants::kiloparsec, height_ / constants::kiloparsec));
            }
        }
        if (kind != AnchorSpec::Kind::absolute &&
            !(named_.anchor.value > 0 && std::isfinite(named_.anchor.value))) {
            throw Error(ErrorKind::scenario, fmt::format("anchor: found the value {:g}, expected one above 0",
                                                         named_.anchor.value));
        }
        if ((kind == AnchorSpec::Kind::rate || kind == AnchorSpec::Kind::grammage) &&
            !(named_.anchor.rigidity > 0)) {
            throw Error(ErrorKind::scenario,
                        fmt::format("anchor: found the rigidity {:g} statvolt, expected one above 0",
                                    named_.anchor.rigidity));
        }
        around_ = surroundings(grid, radius_, height_);
        place_ = place_at(problem_.media, radius_, height_, problem_.spec.helium_fraction);
    }

    /// Pressure and gradient in resonance at the place of the report.
    struct Local {
        std::optional<double> pressure, gradient;
    };
    Local local_resonance(const Resonance& at_cells, double rigidity) const {
        if (at_cells.empty()) {
            return {};
        }
        std::vector<double> values;
        const auto& nodes = problem_.protons.momentum;
        resonance_at(at_cells.log_pressure, nodes, momentum_of(rigidity), cells_, values);
        const double pressure = interpolated(values, around_);
        resonance_at(at_cells.log_gradient, nodes, momentum_of(rigidity), cells_, values);
        return {pressure, interpolated(values, around_)};
    }

    /// The law times a factor, or with the rate that it is anchored with.
    std::pair<Law, double> anchored_law(double factor, const Resonance& at_cells) const {
        if (named_.anchor.kind == AnchorSpec::Kind::rate) {
            const Local local = local_resonance(at_cells, named_.anchor.rigidity);
            const Anchored result = anchored(law_, place_, reference_particle(named_.anchor.rigidity),
                                             named_.anchor.value, local.pressure, local.gradient);
            return {result.law, result.factor};
        }
        return scaled_law(factor);
    }

    std::pair<Law, double> scaled_law(double factor) const {
        Law law = law_;
        law.scale *= factor;
        return {law, factor};
    }

    Scattering scattered_by(const std::pair<Law, double>& law, Resonance resonance) const {
        return {law.first,
                prepare(law.first, problem_.march_places),
                std::move(resonance),
                resonant_ && problem_.spec.streaming,
                1,
                {}};
    }

    static Streaming drift(const Scattering& scattering) {
        return scattering.streaming ? Streaming::flow : Streaming::none;
    }

    SpeciesRun march_protons(const Scattering& scattering, double tolerance) const {
        const RunOptions options{.limiter = problem_.limiter,
                                 .limiter_tolerance = tolerance,
                                 .streaming = scattering.streaming ? Streaming::diffusion : Streaming::none};
        return run_species(problem_, problem_.protons, scattering, primary_sources(problem_.protons), options,
                           context_);
    }

    double tolerance() const { return resonant_ ? confined_tolerance : RunOptions{}.limiter_tolerance; }

    Protons protons_with(double factor) {
        ++report_->solutions;
        return protons_with(factor, 1, tolerance());
    }

    Protons protons_with(double factor, double width, double to) const {
        Protons protons;
        protons.confinement.needed = resonant_;
        const auto law = resonant_ ? scaled_law(factor) : anchored_law(factor, {});
        protons.scattering = scattered_by(law, {});
        protons.factor = law.second;
        protons.scattering.width = width;
        if (resonant_) {
            const Law start = checked_law(
                {.name = "rigidity_power", .numbers = {}, .lists = {}, .texts = {}, .children = {}});
            protons.scattering.self_made_from = prepare(start, problem_.march_places);
        }
        protons.run = march_protons(protons.scattering, to);
        if (resonant_) {
            protons.scattering.self_made_from.reset();
            protons.scattering.resonance = resonance_of(problem_, protons.density(), false, width);
            protons.confinement.converged = protons.run.result.not_converged.empty();
            protons.confinement.change.assign(1, protons.run.result.largest_change);
            protons.confinement.factorizations = protons.run.result.factorizations;
            protons.confinement.solves = protons.run.result.solves;
        }
        protons.weighted = weighted_density(problem_.protons, protons.density(), cells_);
        return protons;
    }

    double energy_density(const Protons& protons) const {
        return interpolated(moment(energy_weights(*problem_.protons.basis), protons.weighted, cells_),
                            around_);
    }

    double gamma_luminosity(const Protons& protons) const {
        const auto per_nucleus = moment(problem_.gamma, protons.weighted, cells_);
        double sum = 0;
        for (std::size_t cell = 0; cell < cells_; ++cell) {
            sum += problem_.mesh.volume[cell] * problem_.hydrogen[cell] * per_nucleus[cell];
        }
        return problem_.halves * sum;
    }

    /// Densities of age (source psi) and of grammage (source rho v psi), [2][nodes][cells].
    std::vector<std::vector<double>> tracers(const SpeciesProblem& species,
                                             const Scattering& scattering,
                                             const std::vector<double>& density) const {
        const double gram = constants::proton_mass * (1 + 4 * problem_.spec.helium_fraction);
        const SourceFunction sources = [&](double momentum, std::vector<std::vector<double>>& out) {
            at_momentum(density, node_weights(species.momentum, momentum), cells_, out[0]);
            const double speed = particle_of_momentum(momentum, species.rest_energy).speed;
            for (std::size_t cell = 0; cell < cells_; ++cell) {
                out[1][cell] = gram * problem_.hydrogen[cell] * speed * out[0][cell];
            }
        };
        const RunOptions options{.kinds = 2, .frozen = &density, .streaming = drift(scattering)};
        return run_species(problem_, species, scattering, sources, options, context_).result.density;
    }

    /// Tracer over density at the place of the report.
    double tracer_at(const SpeciesProblem& species,
                     std::span<const double> tracer,
                     std::span<const double> density,
                     double momentum) const {
        std::vector<double> upper(cells_);
        std::vector<double> lower(cells_);
        const NodeWeights nodes = node_weights(species.momentum, momentum);
        at_momentum(tracer, nodes, cells_, upper);
        at_momentum(density, nodes, cells_, lower);
        const double particles = interpolated(lower, around_);
        return particles > 0 ? interpolated(upper, around_) / particles : 0;
    }

    bool marched(const SpeciesProblem& species, double momentum) const {
        return momentum <= species.momentum.front() && momentum >= species.momentum.back();
    }

    double quantity(const Protons& protons) const {
        switch (named_.anchor.kind) {
        case AnchorSpec::Kind::energy_density:
            return energy_density(protons);
        case AnchorSpec::Kind::gamma_luminosity:
            return gamma_luminosity(protons);
        case AnchorSpec::Kind::grammage: {
            const double momentum = momentum_of(named_.anchor.rigidity);
            if (!marched(problem_.protons, momentum)) {
                throw Error(ErrorKind::scenario,
                            fmt::format("anchor: found the rigidity {:g} GV, expected one within the "
                                        "energies of the protons",
                                        named_.anchor.rigidity / physics::gigavolt));
            }
            const auto density = tracers(problem_.protons, protons.scattering, protons.density());
            return tracer_at(problem_.protons, density[1], protons.density(), momentum);
        }
        case AnchorSpec::Kind::rate: {
            const Local local =
                local_resonance(resonance_of(problem_, protons.density(), true), named_.anchor.rigidity);
            return rate_at(protons.scattering.law, place_, reference_particle(named_.anchor.rigidity),
                           local.pressure, local.gradient);
        }
        case AnchorSpec::Kind::absolute:
            break;
        }
        return 0;
    }

    std::string quantity_name() const {
        switch (named_.anchor.kind) {
        case AnchorSpec::Kind::energy_density:
            return "energy density";
        case AnchorSpec::Kind::gamma_luminosity:
            return "gamma-ray luminosity";
        case AnchorSpec::Kind::rate:
            return "scattering rate";
        default:
            return "grammage";
        }
    }

    Protons find_protons() {
        const bool found_by_rate = resonant_ && named_.anchor.kind == AnchorSpec::Kind::rate;
        if (!needs_search() && !found_by_rate) {
            return protons_with(1);
        }
        Protons last;
        factor_for(
            [&](double factor) {
                last = protons_with(factor);
                report_->achieved = quantity(last);
                return report_->achieved;
            },
            named_.anchor.value, quantity_name(), resonant_ ? confined_anchor : 1e-7);
        return last;
    }

    /// Protons with the regularisation halved and doubled.
    void compare_regularisations(const Protons& protons, ConfinementReport& report) const {
        const auto total = [&](const Protons& of) {
            const auto energy = moment(energy_weights(*problem_.protons.basis), of.weighted, cells_);
            return std::inner_product(energy.begin(), energy.end(), problem_.mesh.volume.begin(), 0.0);
        };
        for (const double width : {0.5, 2.0}) {
            const Protons other = protons_with(protons.factor, width, loose_tolerance);
            report.regularised.push_back({.width = width,
                                          .energy_density = energy_density(other),
                                          .total_energy = total(other) / total(protons),
                                          .converged = other.confinement.converged});
        }
    }

    void add_protons(const Protons& protons, Solution& solution) {
        const SpeciesProblem& species = problem_.protons;
        if (resonant_) {
            cell_resonance_ = resonance_of(problem_, protons.density(), true);
        }
        solution.confinement = protons.confinement;
        if (resonant_ && options_.regularisation) {
            compare_regularisations(protons, solution.confinement);
        }
        solution.pressure = moment(pressure_weights(*problem_.protons.basis), protons.weighted, cells_);
        solution.energy_density = moment(energy_weights(*problem_.protons.basis), protons.weighted, cells_);
        report_->factor = protons.factor;
        report_->energy_density = interpolated(solution.energy_density, around_);
        report_->gamma_luminosity = gamma_luminosity(protons);
        solution.marches.push_back(
            march_report(problem_, "protons", species, protons.run, protons.density()));
        warn(solution.marches.back());
        solution.budgets.push_back(whole_budget(problem_, "protons", species, protons.run.result.budget[0],
                                                power_of(problem_.spec.proton_sources)));
        report_->proton_power = solution.budgets.back().marched;
        const auto tracer = tracers(species, protons.scattering, protons.density());
        solution.protons =
            spectra_of(species, protons.scattering, protons.density(), protons.run.result.limited);
        set_ages(species, tracer[0], protons.density(), *solution.protons);
        for (std::size_t i = 0; i < 3; ++i) {
            report_->rigidity[i] = std::pow(10.0, static_cast<double>(i)) * physics::gigavolt;
            const double momentum = momentum_of(report_->rigidity[i]);
            if (!marched(species, momentum)) {
                continue;
            }
            report_->age[i] = tracer_at(species, tracer[0], protons.density(), momentum);
            report_->grammage[i] = tracer_at(species, tracer[1], protons.density(), momentum);
            std::vector<double> here(cells_);
            at_momentum(protons.density(), node_weights(species.momentum, momentum), cells_, here);
            double number = 0;
            for (std::size_t cell = 0; cell < cells_; ++cell) {
                number += problem_.halves * problem_.mesh.volume[cell] * here[cell];
            }
            double injection = 0;
            for (const SourceTerm& term : species.sources) {
                injection += injected(term, momentum, species.step_ln);
            }
            report_->residence[i] = injection > 0 ? number / injection : 0;
        }
    }

    void
    add_electrons(const Scattering& scattering, std::span<const double> proton_weighted, Solution& solution) {
        const SpeciesProblem& species = problem_.electrons;
        const bool secondaries = !problem_.secondaries.momentum.empty() && !proton_weighted.empty();
        const auto primary = primary_sources(species);
        Eigen::MatrixXd electrons;
        Eigen::MatrixXd positrons;
        if (secondaries) {
            using Rows = Eigen::Matrix<double, Eigen::Dynamic, Eigen::Dynamic, Eigen::RowMajor>;
            const SecondaryMatrix& matrix = problem_.secondaries;
            const auto leptons = static_cast<Eigen::Index>(matrix.momentum.size());
            const auto nodes = static_cast<Eigen::Index>(matrix.protons);
            const Eigen::Map<const Eigen::MatrixXd> protons(proton_weighted.data(),
                                                            static_cast<Eigen::Index>(cells_), nodes);
            electrons = protons * Eigen::Map<const Rows>(matrix.electrons.data(), leptons, nodes).transpose();
            positrons = protons * Eigen::Map<const Rows>(matrix.positrons.data(), leptons, nodes).transpose();
        }
        const SourceFunction sources = [&](double momentum, std::vector<std::vector<double>>& out) {
            primary(momentum, out);
            if (!secondaries) {
                return;
            }
            const auto row = static_cast<Eigen::Index>(stage_of(momentum));
            for (std::size_t cell = 0; cell < cells_; ++cell) {
                const auto c = static_cast<Eigen::Index>(cell);
                out[1][cell] += problem_.hydrogen[cell] * std::max(0.0, electrons(c, row));
                out[2][cell] += problem_.hydrogen[cell] * std::max(0.0, positrons(c, row));
            }
        };
        const RunOptions options{.kinds = secondaries ? 3U : 1U,
                                 .limiter = problem_.limiter,
                                 .limiter_tolerance = tolerance(),
                                 .streaming = drift(scattering)};
        SpeciesRun run = run_species(problem_, species, scattering, sources, options, context_);
        std::vector<double> all = run.result.density[0];
        for (std::size_t kind = 1; kind < run.result.density.size(); ++kind) {
            for (std::size_t i = 0; i < all.size(); ++i) {
                all[i] += run.result.density[kind][i];
            }
        }
        solution.electrons = spectra_of(species, scattering, all, run.result.limited);
        solution.marches.push_back(march_report(problem_, "electrons", species, run, all));
        warn(solution.marches.back());
        solution.budgets.push_back(whole_budget(problem_, "electrons", species, run.result.budget[0],
                                                power_of(problem_.spec.electron_sources)));
        if (secondaries) {
            solution.positrons = spectra_of(species, scattering, run.result.density[2], run.result.limited);
            solution.budgets.push_back(
                whole_budget(problem_, "secondary electrons", species, run.result.budget[1], 0));
            solution.budgets.push_back(whole_budget(problem_, "positrons", species, run.result.budget[2], 0));
        }
        if (!problem_.spec.protons) {
            const auto tracer = tracers(species, scattering, all);
            set_ages(species, tracer[0], all, *solution.electrons);
        }
    }

    std::size_t stage_of(double momentum) const {
        const auto& stages = problem_.secondaries.momentum; // descending
        const auto after = std::lower_bound(stages.begin(), stages.end(), momentum * (1 + 1e-9),
                                            [](double a, double b) { return a > b; });
        return std::min(static_cast<std::size_t>(after - stages.begin()), stages.size() - 1);
    }

    std::size_t kept_nodes(const SpeciesProblem& species) const {
        const auto energy = species.basis->energy();
        const auto above = std::lower_bound(energy.begin(), energy.end(), problem_.spec.energy_to);
        return std::min(static_cast<std::size_t>(above - energy.begin()) + 2, energy.size());
    }

    Spectra spectra_of(const SpeciesProblem& species,
                       const Scattering& scattering,
                       const std::vector<double>& density,
                       const std::vector<float>& limited) {
        Spectra spectra;
        const std::size_t nodes = kept_nodes(species);
        const std::size_t all = species.momentum.size();
        const auto energy = species.basis->energy();
        spectra.energy.assign(energy.begin(), energy.begin() + static_cast<std::ptrdiff_t>(nodes));
        const auto weighted = weighted_density(species, density, cells_);
        spectra.weighted.resize(cells_ * nodes);
        spectra.scattering_rate.resize(cells_ * nodes);
        spectra.limited.resize(limited.empty() ? 0 : cells_ * nodes);
        const PreparedLaw law = prepare(scattering.law, problem_.cell_places);
        std::vector<double> rate(cells_);
        std::vector<double> pressure;
        std::vector<double> gradient;
        for (std::size_t node = 0; node < nodes; ++node) {
            const double momentum = species.momentum[all - 1 - node];
            spectra.momentum.push_back(momentum);
            ResonantPressure resonant;
            if (resonant_) {
                const auto& protons = problem_.protons.momentum;
                resonance_at(cell_resonance_.log_pressure, protons, momentum, cells_, pressure);
                resonance_at(cell_resonance_.log_gradient, protons, momentum, cells_, gradient);
                resonant = {pressure, gradient};
            }
            const auto counts = rates(law, particle_of_momentum(momentum, species.rest_energy), resonant,
                                      rate, limits_of(problem_));
            spectra.counted.rates += counts.rates;
            spectra.counted.at_bohm += counts.at_bohm;
            spectra.counted.at_least += counts.at_least;
            for (std::size_t cell = 0; cell < cells_; ++cell) {
                spectra.weighted[cell * nodes + node] = static_cast<float>(weighted[node * cells_ + cell]);
                spectra.scattering_rate[cell * nodes + node] = static_cast<float>(rate[cell]);
                if (!limited.empty()) {
                    spectra.limited[cell * nodes + node] = limited[(all - 1 - node) * cells_ + cell];
                }
            }
        }
        return spectra;
    }

    void set_ages(const SpeciesProblem& species,
                  std::span<const double> tracer,
                  std::span<const double> density,
                  Spectra& spectra) const {
        const std::size_t nodes = spectra.energy.size();
        const std::size_t all = species.momentum.size();
        spectra.age.resize(cells_ * nodes);
        for (std::size_t node = 0; node < nodes; ++node) {
            for (std::size_t cell = 0; cell < cells_; ++cell) {
                const std::size_t at = (all - 1 - node) * cells_ + cell;
                spectra.age[cell * nodes + node] =
                    density[at] > 0 ? static_cast<float>(tracer[at] / density[at]) : 0.0F;
            }
        }
    }

    void warn(const MarchReport& report) const {
        if (report.limiter_not_converged > 0) {
            context_.say(LogLevel::warning,
                         fmt::format("law '{}', {}: {} did not converge at {} momenta; the last change of "
                                     "the density was up to {:.2g}, at {:.4g} GeV, R = {:.4g} kpc, z = "
                                     "{:.4g} kpc",
                                     named_.name, report.name,
                                     resonant_ ? "waves and flux limiter" : "the flux limiter",
                                     report.limiter_not_converged, report.worst.change,
                                     report.worst.kinetic_energy / constants::gigaelectronvolt,
                                     report.worst.radius / constants::kiloparsec,
                                     report.worst.height / constants::kiloparsec));
        }
    }

    void report_rates(const Scattering& scattering) {
        const Local local = local_resonance(cell_resonance_, empirical_rigidity());
        report_->rate = rate_at(scattering.law, place_, reference_particle(empirical_rigidity()),
                                local.pressure, local.gradient);
        report_->factor = scattering.law.scale / law_.scale;
        report_->over_empirical = report_->rate / report_->factor / empirical_rate;
        if (named_.anchor.kind == AnchorSpec::Kind::rate) {
            const Local there = local_resonance(cell_resonance_, named_.anchor.rigidity);
            report_->achieved = rate_at(scattering.law, place_, reference_particle(named_.anchor.rigidity),
                                        there.pressure, there.gradient);
        }
    }

    const Problem& problem_;
    const NamedLaw& named_;
    const RunContext& context_;
    const SolveOptions& options_;
    Law law_;
    std::size_t cells_;
    bool resonant_;
    double radius_ = 0, height_ = 0;
    Surroundings around_;
    Place place_;
    Resonance cell_resonance_;
    AnchorReport* report_ = nullptr;
};

} // namespace

Solution
solve(const Problem& problem, const NamedLaw& law, const RunContext& context, const SolveOptions& options) {
    try {
        return Solver(problem, law, context, options).run();
    } catch (Error& error) {
        if (error.kind() == ErrorKind::scenario) {
            error.in("law '" + law.name + "'");
        }
        throw;
    }
}

Solution solve(const TransportSpec& spec,
               const NamedLaw& law,
               const grid::Grid& grid,
               const media::Media& media,
               const RunContext& context,
               const SolveOptions& options) {
    return solve(prepare_problem(spec, grid, media, context), law, context, options);
}

} // namespace aureole::transport
