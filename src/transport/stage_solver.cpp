#include "stage_solver.hpp"

#include "mixing.hpp"
#include "pivoted_solve.hpp"

#include <fmt/format.h>

#include <algorithm>
#include <cmath>

namespace aureole::transport {
namespace {

/// Relative residual (sums of absolute values) asked of a linear system.
constexpr double largest_residual = 1e-12;
/// Where fluxes between cells are much larger than sources, round-off of the fluxes bounds the residual: this
/// part of the diagonal counts like the right-hand side.
constexpr double rounding = 0.01;
constexpr int most_refinements = 3;
/// Densities below this part of the largest do not count for the limiter's convergence.
constexpr double negligible = 1e-25;
/// Fixed-point iterations before acceleration starts, and the largest step in ln psi.
constexpr int plain_iterations = 2;
constexpr double largest_step = 2;

std::vector<double> logarithms(std::span<const double> density) {
    const double floor = 1e-30 * *std::max_element(density.begin(), density.end());
    std::vector<double> result(density.size());
    for (std::size_t i = 0; i < density.size(); ++i) {
        result[i] = std::log(std::max(density[i], floor));
    }
    return result;
}

SpatialCoefficients times(const SpatialCoefficients& unlimited, const LimitedFaces& fractions) {
    SpatialCoefficients limited = unlimited;
    for (std::size_t f = 0; f < limited.diffusion.size(); ++f) {
        limited.diffusion[f] *= fractions.face[f];
    }
    for (std::size_t f = 0; f < limited.boundary_diffusion.size(); ++f) {
        limited.boundary_diffusion[f] *= fractions.boundary[f];
    }
    for (std::size_t c = 0; c < limited.aligned.size(); ++c) {
        for (double& element : limited.aligned[c]) {
            element *= fractions.corner[c];
        }
    }
    return limited;
}

} // namespace

StageSolver::StageSolver(const MarchSetup& march_setup, const RunContext& run_context)
    : setup(march_setup), context(run_context), pattern(make_pattern(setup.mesh, setup.corners)),
      plan(plan_elimination(pattern, setup.mesh.position)) {}

void StageSolver::make_matrix(Stage& stage, const SpatialCoefficients& coefficients) {
    assemble(setup.mesh, pattern, setup.corners, setup.sides, coefficients, stage.op);
    stage.matrix.resize(stage.op.values.size());
    for (std::size_t e = 0; e < stage.matrix.size(); ++e) {
        stage.matrix[e] = stage.implicit * stage.op.values[e];
    }
    for (std::size_t cell = 0; cell < setup.mesh.cells(); ++cell) {
        stage.matrix[pattern.diagonal[cell]] += stage.loss[cell];
    }
    spare_.with([&](FrontalScratch& scratch) {
        stage.factored =
            factorize(plan, stage.matrix, stage.op.symmetric, context.reproducible, scratch, stage.factor);
    });
    ++factorizations;
}

void StageSolver::prepare(Stage& stage, double implicit) {
    stage.implicit = implicit;
    if (setup.limiter == Limiter::none) {
        make_matrix(stage, stage.data.space);
    }
}

double StageSolver::residual(const Stage& stage,
                             std::span<const double> rhs,
                             std::span<const double> x,
                             std::span<double> leak,
                             std::span<double> rest) const {
    apply(pattern, stage.op, x, leak);
    double norm = 0;
    double whole = 0;
    for (std::size_t i = 0; i < rhs.size(); ++i) {
        rest[i] = rhs[i] - stage.loss[i] * x[i] - stage.implicit * leak[i];
        norm += std::abs(rest[i]);
        whole += std::abs(rhs[i]) + rounding * std::abs(stage.matrix[pattern.diagonal[i]] * x[i]);
    }
    return whole > 0 ? norm / whole : 0.0;
}

void StageSolver::solve_systems(Stage& stage,
                                std::span<const std::vector<double>> rhs,
                                std::span<std::vector<double>> x,
                                std::span<std::vector<double>> leak) {
    std::vector<std::vector<double>> rest(rhs.begin(), rhs.end());
    double size = 1;
    for (int round = 0; stage.factored && round <= most_refinements && size > largest_residual; ++round) {
        spare_.with([&](FrontalScratch& scratch) {
            transport::solve(plan, stage.factor, context.reproducible, scratch, rest);
        });
        size = 0;
        for (std::size_t s = 0; s < x.size(); ++s) {
            if (round == 0) {
                x[s] = rest[s];
            } else {
                for (std::size_t i = 0; i < rest[s].size(); ++i) {
                    x[s][i] += rest[s][i];
                }
            }
            size = std::max(size, residual(stage, rhs[s], x[s], leak[s], rest[s]));
        }
    }
    if (!(size <= largest_residual)) {
        ++pivoted;
        size = 0;
        for (std::size_t s = 0; s < x.size(); ++s) {
            x[s].resize(rhs[s].size());
            if (!pivoted_solve(pattern, stage.matrix, rhs[s], x[s])) {
                throw Error(ErrorKind::runtime,
                            fmt::format("transport: found a singular system at the momentum {:.6g} g cm/s, "
                                        "expected that particles are lost or escape from every cell",
                                        stage.momentum));
            }
            size = std::max(size, residual(stage, rhs[s], x[s], leak[s], rest[s]));
        }
    }
    worst_residual = std::max(worst_residual, size);
}

void StageSolver::solve_unknowns(Stage& stage, std::span<const std::vector<double>> base, std::size_t from) {
    const auto subset = base.subspan(from, setup.kinds);
    std::vector<std::vector<double>> rhs(subset.begin(), subset.end());
    for (std::size_t kind = 0; kind < setup.kinds; ++kind) {
        const auto& source = from == 0 ? stage.data.sources[kind] : stage.density[kind];
        for (std::size_t cell = 0; cell < rhs[kind].size(); ++cell) {
            rhs[kind][cell] += stage.implicit * setup.mesh.volume[cell] * source[cell];
        }
        stage.leak[from + kind].resize(rhs[kind].size());
    }
    solve_systems(stage, rhs, std::span(stage.density).subspan(from, setup.kinds),
                  std::span(stage.leak).subspan(from, setup.kinds));
}

void StageSolver::find_limit(Stage& stage, std::span<const double> base, std::span<const double> shape) {
    const std::size_t cells = setup.mesh.cells();
    std::vector<std::vector<double>> rhs(1, std::vector<double>(base.begin(), base.end()));
    for (const auto& source : stage.data.sources) {
        for (std::size_t cell = 0; cell < cells; ++cell) {
            rhs[0][cell] += stage.implicit * setup.mesh.volume[cell] * source[cell];
        }
    }
    std::vector<double> density(shape.begin(), shape.end());
    std::vector<std::vector<double>> found(1);
    std::vector<std::vector<double>> leak(1, std::vector<double>(cells));
    if (density.empty()) {
        make_matrix(stage, stage.data.space);
        solve_systems(stage, rhs, found, leak);
        density = found[0];
    }
    auto before = logarithms(density);
    Mixing mixing;
    NotConverged last;
    last.momentum = stage.momentum;
    for (int round = 1; round <= setup.limiter_iterations; ++round) {
        for (std::size_t cell = 0; cell < cells; ++cell) {
            density[cell] = std::exp(before[cell]);
        }
        limit(setup.mesh, setup.corners, setup.sides, setup.limiter, stage.data.space, density,
              stage.limited);
        make_matrix(stage, times(stage.data.space, stage.limited));
        solve_systems(stage, rhs, found, leak);
        const auto& solution = found[0];
        const auto after = logarithms(solution);
        const double least = negligible * *std::max_element(solution.begin(), solution.end());
        last.change = 0;
        for (std::size_t cell = 0; cell < cells; ++cell) {
            const double change = std::abs(after[cell] - before[cell]);
            if (solution[cell] > least && !(change <= last.change)) {
                last.change = change;
                last.cell = cell;
            }
        }
        most_iterations = std::max(most_iterations, round);
        if (last.change <= setup.limiter_tolerance) {
            return;
        }
        before = round <= plain_iterations ? after : mixing.next(before, after, largest_step);
    }
    not_converged.push_back(last);
}

void StageSolver::solve(Stage& stage,
                        std::span<const std::vector<double>> base,
                        std::span<const double> shape) {
    stage.density.resize(unknowns());
    stage.leak.resize(unknowns());
    if (setup.limiter != Limiter::none) {
        std::vector<double> sum(setup.mesh.cells(), 0.0);
        for (std::size_t kind = 0; kind < setup.kinds; ++kind) {
            for (std::size_t cell = 0; cell < sum.size(); ++cell) {
                sum[cell] += base[kind][cell];
            }
        }
        find_limit(stage, sum, shape);
    }
    for (std::size_t from = 0; from < unknowns(); from += setup.kinds) {
        solve_unknowns(stage, base, from);
    }
}

} // namespace aureole::transport
