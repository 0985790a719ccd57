#include "stage_solver.hpp"

#include "mixing.hpp"
#include "pivoted_solve.hpp"

#include <fmt/format.h>

#include <algorithm>
#include <cmath>
#include <limits>

namespace aureole::transport {
namespace {

/// Relative residual (sums of absolute values) asked of a linear system.
constexpr double largest_residual = 1e-12;
/// Where fluxes between cells are much larger than sources, round-off of the fluxes bounds the residual: this
/// part of the diagonal counts like the right-hand side.
constexpr double rounding = 0.01;
constexpr int most_refinements = 3;
/// Iterations in a row that may give densities below 0.
constexpr int most_below = 3;
/// Densities below this part of the largest do not count for the convergence of limiter and response.
constexpr double negligible = 1e-25;
/// Densities are taken to be at least this part of the largest.
constexpr double least_part = 1e-30;
/// Fixed-point iterations before acceleration starts, before the first trial of Newton's method without a
/// good guess, and between trials.
constexpr int plain_iterations = 2;
constexpr int first_iterations = 5;
/// With a good guess they go on while each shortens the change to this part.
constexpr int quick_iterations = 6;
constexpr double quick_contraction = 0.1;
constexpr int next_iterations = 30;
/// Newton's method: iterations, smallest damping, largest step in ln psi, step of the differences.
constexpr int most_newton = 30;
constexpr double least_damping = 1.0 / 16;
constexpr double first_blend = 0.02;
constexpr double largest_blend = 0.1;
constexpr int most_held = 3;
constexpr double largest_step = 2;
constexpr double difference_step = 1e-7;
/// A matrix is kept while it shortens steps to this part.
constexpr double good_contraction = 0.2;

double largest_of(std::span<const double> values) {
    return *std::max_element(values.begin(), values.end());
}

/// Of a density whose largest value is > 0.
std::vector<double> logarithms(std::span<const double> density) {
    const double floor = least_part * largest_of(density);
    std::vector<double> result(density.size());
    for (std::size_t i = 0; i < density.size(); ++i) {
        result[i] = std::log(std::max(density[i], floor));
    }
    return result;
}

void raise(std::vector<double>& density) {
    const double floor = least_part * largest_of(density);
    for (double& value : density) {
        value = std::max(value, floor);
    }
}

/// Largest and rms step in ln psi of the cells that count.
struct StepSize {
    double largest = 0, rms = 0;
    std::size_t cell = 0;
};

StepSize size_of(std::span<const double> step, std::span<const double> density) {
    const double least = negligible * largest_of(density);
    StepSize size;
    std::size_t counted = 0;
    for (std::size_t cell = 0; cell < step.size(); ++cell) {
        if (density[cell] <= least) {
            continue;
        }
        ++counted;
        size.rms += step[cell] * step[cell];
        if (!(std::abs(step[cell]) <= size.largest)) {
            size.largest = std::abs(step[cell]);
            size.cell = cell;
        }
    }
    size.rms = std::sqrt(size.rms / static_cast<double>(std::max<std::size_t>(1, counted)));
    return size;
}

void take(std::span<const double> step,
          double damping,
          std::span<const double> density,
          std::vector<double>& out) {
    out.resize(density.size());
    for (std::size_t cell = 0; cell < out.size(); ++cell) {
        out[cell] = density[cell] * std::exp(std::clamp(damping * step[cell], -largest_step, largest_step));
    }
    raise(out);
}

void multiply(const LimitedFaces& fractions, SpatialCoefficients& space) {
    for (std::size_t f = 0; f < space.diffusion.size(); ++f) {
        space.diffusion[f] *= fractions.face[f];
    }
    for (std::size_t f = 0; f < space.boundary_diffusion.size(); ++f) {
        space.boundary_diffusion[f] *= fractions.boundary[f];
    }
    for (std::size_t c = 0; c < space.aligned.size(); ++c) {
        for (double& element : space.aligned[c]) {
            element *= fractions.corner[c];
        }
    }
}

/// Places of the entries of one pattern in another that has them all.
std::vector<std::uint32_t> entries_in(const Pattern& from, const Pattern& to) {
    std::vector<std::uint32_t> entries;
    for (std::size_t row = 0; row < from.rows(); ++row) {
        const auto begin = to.column.begin() + to.row_start[row];
        const auto end = to.column.begin() + to.row_start[row + 1];
        for (std::uint32_t e = from.row_start[row]; e < from.row_start[row + 1]; ++e) {
            const auto at = std::lower_bound(begin, end, from.column[e]) - to.column.begin();
            entries.push_back(static_cast<std::uint32_t>(at));
        }
    }
    return entries;
}

} // namespace

void read_losses(const Mesh& mesh, Stage& stage) {
    stage.loss.assign(mesh.cells(), 0.0);
    for (const auto& process : stage.data.losses) {
        for (std::size_t cell = 0; cell < mesh.cells(); ++cell) {
            stage.loss[cell] += process[cell];
        }
    }
    const auto& divergence = stage.data.divergence;
    for (std::size_t cell = 0; cell < mesh.cells(); ++cell) {
        const double rate =
            stage.loss[cell] + (divergence.empty() ? 0.0 : stage.momentum / 3 * divergence[cell]);
        if (!(rate >= 0)) {
            throw MomentumGain(cell, stage.momentum, rate);
        }
        stage.loss[cell] = mesh.volume[cell] * rate;
    }
}

StageSolver::StageSolver(const MarchSetup& march_setup, const RunContext& run_context)
    : setup(march_setup), context(run_context), pattern(make_pattern(setup.mesh, setup.corners)),
      plan(plan_elimination(pattern, setup.mesh.position)) {
    if (nonlinear()) {
        jacobian_ = make_coloured_matrix(setup.mesh);
        linear_entry_ = entries_in(pattern, jacobian_->pattern);
    }
}

void StageSolver::make_matrix(Stage& stage) {
    assemble(setup.mesh, pattern, setup.corners, setup.sides, nonlinear() ? stage.space : stage.data.space,
             stage.op);
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
    if (!nonlinear()) {
        make_matrix(stage);
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
    ++solves;
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

void StageSolver::set_coefficients(Stage& stage, std::span<const double> density) {
    if (setup.respond) {
        setup.respond(stage.momentum, density, stage.data);
        read_losses(setup.mesh, stage);
    }
    stage.space = stage.data.space;
    if (setup.limiter != Limiter::none) {
        limit(setup.mesh, setup.corners, setup.sides, setup.limiter, stage.data.space, density,
              stage.limited);
        multiply(stage.limited, stage.space);
    }
}

void StageSolver::find_rest(Stage& stage,
                            const Iteration& iteration,
                            std::span<const double> density,
                            std::vector<double>& rest) {
    set_coefficients(stage, density);
    assemble(setup.mesh, pattern, setup.corners, setup.sides, stage.space, stage.op);
    leak_.resize(density.size());
    rest.resize(density.size());
    apply(pattern, stage.op, density, leak_);
    for (std::size_t i = 0; i < rest.size(); ++i) {
        rest[i] = iteration.rhs[i] - stage.loss[i] * density[i] - stage.implicit * leak_[i];
    }
}

/// After find_rest() of the iteration's density.
void StageSolver::find_derivatives(Stage& stage, const Iteration& iteration, std::span<const double> rest) {
    ColouredMatrix& matrix = *jacobian_;
    const std::size_t cells = rest.size();
    linear_.resize(stage.op.values.size());
    for (std::size_t e = 0; e < linear_.size(); ++e) {
        linear_[e] = stage.implicit * stage.op.values[e];
    }
    for (std::size_t cell = 0; cell < cells; ++cell) {
        linear_[pattern.diagonal[cell]] += stage.loss[cell];
    }
    for (std::size_t colour = 0; colour < matrix.colours; ++colour) {
        perturbed_ = iteration.density;
        for (std::size_t cell = 0; cell < cells; ++cell) {
            if (matrix.colour[cell] == colour) {
                perturbed_[cell] *= 1 + difference_step;
            }
        }
        find_rest(stage, iteration, perturbed_, perturbed_rest_);
        for (std::size_t row = 0; row < cells; ++row) {
            const std::uint32_t e = matrix.position[colour * cells + row];
            if (e != ColouredMatrix::none) {
                const std::uint32_t column = matrix.pattern.column[e];
                matrix.values[e] =
                    (rest[row] - perturbed_rest_[row]) / (perturbed_[column] - iteration.density[column]);
            }
        }
    }
}

bool StageSolver::factorize_jacobian(double blend) {
    blended_ = jacobian_->values;
    if (blend > 0) {
        for (double& value : blended_) {
            value *= 1 - blend;
        }
        for (std::size_t e = 0; e < linear_.size(); ++e) {
            blended_[linear_entry_[e]] += blend * linear_[e];
        }
    }
    bool factored = false;
    spare_.with([&](FrontalScratch& scratch) {
        factored =
            factorize(jacobian_->plan, blended_, false, context.reproducible, scratch, jacobian_factor_);
    });
    ++factorizations;
    return factored;
}

bool StageSolver::correction(std::span<const double> rest,
                             std::span<const double> density,
                             std::vector<double>& step) {
    step_.resize(1);
    step_[0].assign(rest.begin(), rest.end());
    ++solves;
    spare_.with([&](FrontalScratch& scratch) {
        transport::solve(jacobian_->plan, jacobian_factor_, context.reproducible, scratch, step_);
    });
    step.resize(rest.size());
    for (std::size_t cell = 0; cell < step.size(); ++cell) {
        step[cell] = step_[0][cell] / density[cell];
        if (!std::isfinite(step[cell])) {
            return false;
        }
    }
    return true;
}

bool StageSolver::newton(Stage& stage, Iteration& iteration) {
    std::vector<double> rest;
    std::vector<double> step;
    std::vector<double> trial;
    std::vector<double> next;
    std::vector<double> next_rest;
    find_rest(stage, iteration, iteration.density, rest);
    bool fresh = false;
    double blend = 0;
    std::vector<double> best = iteration.density;
    double least_change = std::numeric_limits<double>::infinity();
    int held = 0;
    const auto give_up = [&] {
        std::swap(iteration.density, best);
        return false;
    };
    for (int round = 0; round < most_newton && iteration.round < setup.limiter_iterations; ++round) {
        if (!fresh) {
            find_derivatives(stage, iteration, rest);
        }
        ++iteration.round;
        double damping = 0;
        StepSize size;
        StepSize then;
        for (bool accepted = false; !accepted;) {
            const bool ready =
                fresh || (factorize_jacobian(blend) && correction(rest, iteration.density, step));
            if (ready) {
                size = size_of(step, iteration.density);
                damping = std::min(1.0, largest_step / std::max(size.largest, 1e-300));
                const double least = damping * least_damping;
                for (; damping >= least && !accepted; damping /= accepted ? 1 : 2) {
                    take(step, damping, iteration.density, trial);
                    find_rest(stage, iteration, trial, next_rest);
                    if (correction(next_rest, trial, next)) {
                        then = size_of(next, trial);
                        const double wanted = blend > 0 ? 1 - damping / 32 : 1 - damping / 4;
                        accepted = then.rms <= wanted * size.rms || then.largest <= setup.limiter_tolerance;
                    }
                }
            }
            if (!accepted) {
                blend = blend > 0 ? 4 * blend : first_blend;
                if (blend > largest_blend) {
                    return give_up();
                }
                if (fresh) {
                    fresh = false;
                    find_rest(stage, iteration, iteration.density, rest);
                    find_derivatives(stage, iteration, rest);
                }
            }
        }
        std::swap(iteration.density, trial);
        std::swap(rest, next_rest);
        std::swap(step, next);
        iteration.last.change = then.largest;
        iteration.last.cell = then.cell;
        if (then.largest <= setup.limiter_tolerance) {
            take(step, 1, iteration.density, trial);
            std::swap(iteration.density, trial);
            return true;
        }
        if (then.largest < least_change) {
            least_change = then.largest;
            best = iteration.density;
        }
        held += damping < 0.5 ? 1 : 0;
        if (held > most_held) {
            return give_up();
        }
        fresh = damping == 1 && then.rms < good_contraction * size.rms;
        if (damping > 0.25 && !fresh) {
            blend = blend > first_blend / 4 ? blend / 4 : 0;
        }
    }
    return give_up();
}

bool StageSolver::fixed_points(Stage& stage, Iteration& iteration, int rounds, double contraction) {
    Mixing mixing;
    double change = std::numeric_limits<double>::infinity();
    int below = 0;
    std::vector<std::vector<double>> found(1);
    std::vector<std::vector<double>> leak(1, std::vector<double>(iteration.rhs.size()));
    const std::vector<std::vector<double>> rhs(1, iteration.rhs);
    for (int round = 1; round <= rounds && iteration.round < setup.limiter_iterations; ++round) {
        ++iteration.round;
        set_coefficients(stage, iteration.density);
        make_matrix(stage);
        solve_systems(stage, rhs, found, leak);
        const auto [least, most] = std::minmax_element(found[0].begin(), found[0].end());
        below = *least < -negative_part * *most ? below + 1 : 0;
        stage.negative = below > most_below;
        if (stage.negative || !(*most > 0)) {
            // Nothing to be limited or to respond to: what was found for the density before stands.
            return true;
        }
        const auto before = logarithms(iteration.density);
        const auto after = logarithms(found[0]);
        std::vector<double> step(before.size());
        for (std::size_t cell = 0; cell < step.size(); ++cell) {
            step[cell] = after[cell] - before[cell];
        }
        const StepSize size = size_of(step, found[0]);
        iteration.last.change = size.largest;
        iteration.last.cell = size.cell;
        if (iteration.best.empty() || size.largest < iteration.of_best.change) {
            iteration.best = iteration.density;
            iteration.of_best = iteration.last;
        }
        const bool quick = size.largest <= contraction * change;
        change = size.largest;
        const auto next = round <= plain_iterations ? after : mixing.next(before, after, largest_step);
        for (std::size_t cell = 0; cell < next.size(); ++cell) {
            iteration.density[cell] = std::exp(next[cell]);
        }
        if (size.largest <= setup.limiter_tolerance) {
            return true;
        }
        if (!quick) {
            return false;
        }
    }
    return false;
}

void StageSolver::find_density(Stage& stage,
                               std::span<const std::vector<double>> base,
                               std::span<const double> guess) {
    const std::size_t cells = setup.mesh.cells();
    Iteration iteration;
    iteration.rhs.assign(cells, 0.0);
    for (std::size_t kind = 0; kind < setup.kinds; ++kind) {
        for (std::size_t cell = 0; cell < cells; ++cell) {
            iteration.rhs[cell] +=
                base[kind][cell] + stage.implicit * setup.mesh.volume[cell] * stage.data.sources[kind][cell];
        }
    }
    iteration.last.momentum = stage.momentum;
    stage.negative = false;
    iteration.density.assign(guess.begin(), guess.end());
    if (guess.empty()) {
        std::vector<std::vector<double>> found(1);
        std::vector<std::vector<double>> leak(1, std::vector<double>(cells));
        stage.space = stage.data.space;
        make_matrix(stage);
        solve_systems(stage, std::vector<std::vector<double>>(1, iteration.rhs), found, leak);
        iteration.density = found[0];
    }
    if (!(largest_of(iteration.density) > 0)) {
        stage.space = stage.data.space;
        make_matrix(stage);
        return;
    }
    raise(iteration.density);
    constexpr double any = std::numeric_limits<double>::infinity();
    bool done = guess.empty() ? fixed_points(stage, iteration, first_iterations, any)
                              : fixed_points(stage, iteration, quick_iterations, quick_contraction);
    // A fixed point leaves the factor of its density behind, Newton's method none.
    bool factored = done;
    while (!done && iteration.round < setup.limiter_iterations) {
        done = newton(stage, iteration);
        if (!done) {
            done = factored = fixed_points(stage, iteration, next_iterations, any);
        }
    }
    most_iterations = std::max(most_iterations, iteration.round);
    if (!done) {
        factored = false;
        iteration.density = iteration.best;
        not_converged.push_back(iteration.of_best);
        largest_change = std::max(largest_change, iteration.of_best.change);
    } else {
        largest_change = std::max(largest_change, iteration.last.change);
    }
    if (!factored) {
        set_coefficients(stage, iteration.density);
        make_matrix(stage);
    }
}

void StageSolver::solve(Stage& stage,
                        std::span<const std::vector<double>> base,
                        std::span<const double> guess) {
    stage.density.resize(unknowns());
    stage.leak.resize(unknowns());
    if (nonlinear()) {
        find_density(stage, base, guess);
    }
    for (std::size_t from = 0; from < unknowns(); from += setup.kinds) {
        solve_unknowns(stage, base, from);
    }
}

} // namespace aureole::transport
