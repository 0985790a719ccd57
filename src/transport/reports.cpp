#include "reports.hpp"

#include "aureole/base/constants.hpp"

#include <algorithm>
#include <cmath>

namespace aureole::transport {

std::vector<double> pressure_weights(const spectra::Basis& protons) {
    return integral_weights(protons, [](double t) {
        // p v/3 = T (T + 2 m c^2)/(3 (T + m c^2))
        constexpr double rest = constants::proton_rest_energy;
        return t * (t + 2 * rest) / (3 * (t + rest));
    });
}

std::vector<double> energy_weights(const spectra::Basis& protons) {
    return integral_weights(protons, [](double t) { return t; });
}

double density_change(const Problem& problem, std::span<const double> before, std::span<const double> next) {
    double sum = 0;
    double whole = 0;
    const std::size_t cells = problem.mesh.cells();
    const auto& momentum = problem.protons.momentum;
    for (std::size_t node = 0; node < momentum.size(); ++node) {
        const Particle particle = particle_of_momentum(momentum[node], problem.protons.rest_energy);
        for (std::size_t cell = 0; cell < cells; ++cell) {
            const double a = before[node * cells + cell];
            const double b = next[node * cells + cell];
            if (!(a > 0) || !(b > 0)) {
                continue;
            }
            const double weight = problem.mesh.volume[cell] * particle.momentum * particle.kinetic_energy * b;
            const double step = std::log(b / a);
            sum += weight * step * step;
            whole += weight;
        }
    }
    return whole > 0 ? std::sqrt(sum / whole) : 0;
}

double power_of(const std::vector<SourceSpec>& sources) {
    double sum = 0;
    for (const SourceSpec& source : sources) {
        sum += source.power;
    }
    return sum;
}

namespace {

OpenPlace
worst_place(const Problem& problem, const SpeciesProblem& species, std::span<const NotConverged> open) {
    const auto worst = std::max_element(open.begin(), open.end(),
                                        [](const auto& a, const auto& b) { return a.change < b.change; });
    if (worst == open.end()) {
        return {};
    }
    const Place& place = problem.cell_places[worst->cell];
    return {.momentum = worst->momentum,
            .kinetic_energy = particle_of_momentum(worst->momentum, species.rest_energy).kinetic_energy,
            .cell = worst->cell,
            .radius = place.radius,
            .height = place.height,
            .change = worst->change};
}

} // namespace

MarchReport march_report(const Problem& problem,
                         const std::string& name,
                         const SpeciesProblem& species,
                         const SpeciesRun& run,
                         std::span<const double> density) {
    const MarchResult& result = run.result;
    MarchReport report{.name = name,
                       .redone_steps = result.redone_steps,
                       .pivoted = result.pivoted,
                       .factorizations = result.factorizations,
                       .solves = result.solves,
                       .limiter_not_converged = result.not_converged.size(),
                       .worst = worst_place(problem, species, result.not_converged),
                       .most_limiter_iterations = result.most_limiter_iterations,
                       .held_back = run.held_back,
                       .worst_residual = result.worst_residual};
    const std::size_t cells = problem.mesh.cells();
    double limited = 0;
    double whole = 0;
    for (std::size_t node = 0; node < species.momentum.size() && !result.limited.empty(); ++node) {
        const Particle particle = particle_of_momentum(species.momentum[node], species.rest_energy);
        for (std::size_t cell = 0; cell < cells; ++cell) {
            const double energy = problem.mesh.volume[cell] * particle.momentum * particle.kinetic_energy *
                                  density[node * cells + cell];
            whole += energy;
            limited += result.limited[node * cells + cell] < 0.5F ? energy : 0;
        }
    }
    report.limited_energy = whole > 0 ? limited / whole : 0;
    return report;
}

KindBudget whole_budget(const Problem& problem,
                        const std::string& name,
                        const SpeciesProblem& species,
                        const Budget& of_mesh,
                        double power) {
    KindBudget kind{.name = name,
                    .processes = species.losses.names,
                    .sides = problem.mesh.sides,
                    .budget = of_mesh,
                    .power = power};
    const double halves = problem.halves;
    const auto scale = [halves](Rate& rate) {
        rate.number *= halves;
        rate.energy *= halves;
    };
    Budget& budget = kind.budget;
    scale(budget.injected);
    scale(budget.catastrophic);
    scale(budget.remaining);
    std::for_each(budget.escaped.begin(), budget.escaped.end(), scale);
    for (double& lost : budget.lost) {
        lost *= halves;
    }
    budget.adiabatic *= halves;
    kind.marched = budget.injected.energy;
    for (const SourceTerm& term : species.sources) {
        kind.inside = std::min(kind.inside, term.where.inside);
    }
    return kind;
}

} // namespace aureole::transport
