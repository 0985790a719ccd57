#include "aureole/transport/march.hpp"

#include "stage_solver.hpp"

#include "aureole/base/parallel.hpp"

#include <fmt/format.h>

#include <algorithm>
#include <cmath>
#include <numbers>

namespace aureole::transport {
namespace {

using Columns = std::vector<std::vector<double>>; ///< [unknowns][cells]

/// TR-BDF2: the step to the middle, the implicit weight of both halves, and what the second half takes over
/// from the first.
constexpr double middle = 2 - std::numbers::sqrt2;
constexpr double implicit_part = middle / 2;
constexpr double carry_over = (1 - middle) * (1 - middle) / (middle * (2 - middle));
/// Densities that a guess is extrapolated from, and how far in their logarithm.
constexpr std::size_t most_known = 3;
constexpr double largest_extrapolation = 1;

/// Integral from `low` to `high` of a function ~ p^-2, per its value at `low`.
double fitted_width(double high, double low) {
    return low * (1 - low / high);
}

MomentumTotals totals_of(const Mesh& mesh, const Stage& stage, std::size_t kind) {
    MomentumTotals totals;
    const auto& density = stage.density[kind];
    totals.momentum = stage.momentum;
    totals.kinetic_energy = stage.data.kinetic_energy;
    totals.escaped.assign(mesh.sides.size(), 0.0);
    for (std::size_t cell = 0; cell < mesh.cells(); ++cell) {
        totals.injected += mesh.volume[cell] * stage.data.sources[kind][cell];
    }
    if (!stage.data.space.rate.empty()) {
        for (std::size_t cell = 0; cell < mesh.cells(); ++cell) {
            totals.catastrophic += mesh.volume[cell] * stage.data.space.rate[cell] * density[cell];
        }
    }
    for (std::size_t f = 0; f < stage.op.outflow.size(); ++f) {
        totals.escaped[mesh.boundary[f].side] += stage.op.outflow[f] * density[mesh.boundary[f].cell];
    }
    const auto carried_by = [&](const std::vector<double>& rate) {
        double sum = 0;
        for (std::size_t cell = 0; cell < rate.size(); ++cell) {
            sum += mesh.volume[cell] * rate[cell] * density[cell];
        }
        return sum;
    };
    for (const auto& process : stage.data.losses) {
        totals.carried.push_back(carried_by(process));
    }
    totals.carried.push_back(stage.momentum / 3 * carried_by(stage.data.divergence));
    return totals;
}

bool has_negative(const Stage& stage) {
    return std::any_of(stage.density.begin(), stage.density.end(), [](const auto& density) {
        const auto [least, most] = std::minmax_element(density.begin(), density.end());
        return *least < -negative_part * *most;
    });
}

class Marcher {
  public:
    Marcher(const MarchSetup& setup, const RunContext& context)
        : setup_(setup), context_(context), mesh_(setup.mesh), solver_(setup, context) {}

    MarchResult run() {
        const std::size_t steps = setup_.momentum.size() - 1;
        result_.density.assign(setup_.kinds,
                               std::vector<double>(setup_.momentum.size() * mesh_.cells(), 0.0));
        if (setup_.ages) {
            result_.age = result_.density;
        }
        totals_.assign(setup_.kinds, std::vector<MomentumTotals>(2 * steps + 1));
        start();
        // Matrices do not depend on the densities: while the steps of one batch are taken, one after another,
        // other threads prepare the next batch.
        const auto batch = static_cast<std::size_t>(std::max(1, context_.threads));
        std::vector<Stage> now(2 * batch);
        std::vector<Stage> next(2 * batch);
        read_batch(0, std::min(batch, steps), now);
        for_each_block(context_, 2 * std::min(batch, steps), [&](std::size_t i) { prepare(0, i, now); });
        for (std::size_t first = 0; first < steps; first += batch) {
            const std::size_t count = std::min(batch, steps - first);
            const std::size_t following = std::min(batch, steps - first - count);
            read_batch(first + count, following, next);
            for_each_block(context_, 1 + 2 * following, [&](std::size_t block) {
                if (block > 0) {
                    prepare(first + count, block - 1, next);
                    return;
                }
                for (std::size_t s = 0; s < count; ++s) {
                    take_step(first + s, now[2 * s], now[2 * s + 1]);
                    std::swap(node_, now[2 * s + 1]);
                }
            });
            std::swap(now, next);
            context_.report("transport", static_cast<double>(first + count) / static_cast<double>(steps));
        }
        finish();
        return std::move(result_);
    }

  private:
    void read(Stage& stage, double momentum) {
        stage.momentum = momentum;
        setup_.evaluate(momentum, stage.data);
        read_losses(mesh_, stage);
    }

    void start() {
        read(node_, setup_.momentum.front());
        node_.density.assign(solver_.unknowns(), std::vector<double>(mesh_.cells(), 0.0));
        node_.leak = node_.density;
        if (*std::max_element(node_.loss.begin(), node_.loss.end()) == 0) {
            solver_.prepare(node_, 1);
            solve(node_, Columns(node_.leak));
        }
        store(0, 0, node_);
        copy_out(0);
    }

    bool first_step(std::size_t step) const { return step == 0; }

    void read_batch(std::size_t first, std::size_t count, std::vector<Stage>& stages) {
        for (std::size_t s = 0; s < count; ++s) {
            const double high = setup_.momentum[first + s];
            const double low = setup_.momentum[first + s + 1];
            read(stages[2 * s], high * std::pow(low / high, middle));
            read(stages[2 * s + 1], low);
        }
    }

    /// Matrix and factor of one stage of a batch.
    void prepare(std::size_t first, std::size_t i, std::vector<Stage>& stages) {
        const double high = setup_.momentum[first + i / 2];
        const double low = setup_.momentum[first + i / 2 + 1];
        const double before = i % 2 == 0 ? high : stages[i - 1].momentum;
        const double at = stages[i].momentum;
        solver_.prepare(stages[i], first_step(first + i / 2) ? fitted_width(before, at)
                                                             : at * implicit_part * std::log(high / low));
    }

    void take_step(std::size_t step, Stage& half, Stage& low) {
        if (first_step(step)) {
            euler_steps(step, half, low);
            return;
        }
        const double width = std::log(node_.momentum / low.momentum);
        solve(half, trapezoid_base(width));
        if (!half.negative) {
            solve(low, second_base(half));
        }
        if (half.negative || has_negative(low)) {
            ++result_.redone_steps;
            known_.resize(std::min<std::size_t>(1, known_.size()));
            solver_.prepare(half, fitted_width(node_.momentum, half.momentum));
            solver_.prepare(low, fitted_width(half.momentum, low.momentum));
            euler_steps(step, half, low);
            return;
        }
        store(step, 1, half);
        store(step, 2, low);
        intervals_.push_back(
            {0, implicit_part * width * node_.momentum, implicit_part * width * half.momentum});
        const double later = carry_over * implicit_part * width;
        intervals_.push_back(
            {later * node_.momentum, later * half.momentum, implicit_part * width * low.momentum});
        copy_out(step + 1, low);
    }

    void euler_steps(std::size_t step, Stage& half, Stage& low) {
        solve(half, currents(node_));
        solve(low, currents(half));
        store(step, 1, half);
        store(step, 2, low);
        intervals_.push_back({0, 0, half.implicit});
        intervals_.push_back({0, 0, low.implicit});
        copy_out(step + 1, low);
    }

    Columns currents(const Stage& stage) const {
        Columns base(solver_.unknowns(), std::vector<double>(mesh_.cells()));
        for (std::size_t unknown = 0; unknown < base.size(); ++unknown) {
            for (std::size_t cell = 0; cell < mesh_.cells(); ++cell) {
                base[unknown][cell] = stage.loss[cell] * stage.density[unknown][cell];
            }
        }
        return base;
    }

    Columns trapezoid_base(double width) const {
        Columns base = currents(node_);
        const double weight = implicit_part * width * node_.momentum;
        for (std::size_t unknown = 0; unknown < base.size(); ++unknown) {
            const auto& source =
                unknown < setup_.kinds ? node_.data.sources[unknown] : node_.density[unknown - setup_.kinds];
            for (std::size_t cell = 0; cell < mesh_.cells(); ++cell) {
                base[unknown][cell] +=
                    weight * (mesh_.volume[cell] * source[cell] - node_.leak[unknown][cell]);
            }
        }
        return base;
    }

    Columns second_base(const Stage& half) const {
        Columns base = currents(half);
        for (std::size_t unknown = 0; unknown < base.size(); ++unknown) {
            for (std::size_t cell = 0; cell < mesh_.cells(); ++cell) {
                const double before = node_.loss[cell] * node_.density[unknown][cell];
                base[unknown][cell] += carry_over * (base[unknown][cell] - before);
            }
        }
        return base;
    }

    /// Density of all kinds, to start limiter and response from: the last ones, extrapolated in the
    /// logarithms by a parabola at most. Empty if there is none yet.
    std::vector<double> guess_for(double momentum) const {
        if (!solver_.nonlinear() || known_.empty()) {
            return {};
        }
        std::vector<double> weight(known_.size(), 1.0);
        for (std::size_t a = 0; a < known_.size(); ++a) {
            for (std::size_t b = 0; b < known_.size(); ++b) {
                if (a != b) {
                    weight[a] *= std::log(momentum / known_[b].momentum) /
                                 std::log(known_[a].momentum / known_[b].momentum);
                }
            }
        }
        const std::vector<double>& last = known_.back().density;
        std::vector<double> guess = last;
        for (std::size_t cell = 0; cell < guess.size() && known_.size() > 1; ++cell) {
            double sum = 0;
            bool positive = true;
            for (std::size_t a = 0; a < known_.size() && positive; ++a) {
                positive = known_[a].density[cell] > 0;
                sum += positive ? weight[a] * std::log(known_[a].density[cell] / last[cell]) : 0;
            }
            if (positive) {
                guess[cell] *= std::exp(std::clamp(sum, -largest_extrapolation, largest_extrapolation));
            }
        }
        return guess;
    }

    void solve(Stage& stage, const Columns& base) {
        solver_.solve(stage, base, guess_for(stage.momentum));
        if (!solver_.nonlinear()) {
            return;
        }
        std::vector<double> sum(mesh_.cells(), 0.0);
        for (std::size_t kind = 0; kind < setup_.kinds; ++kind) {
            for (std::size_t cell = 0; cell < sum.size(); ++cell) {
                sum[cell] += stage.density[kind][cell];
            }
        }
        if (*std::max_element(sum.begin(), sum.end()) > 0) {
            known_.push_back({stage.momentum, std::move(sum)});
            if (known_.size() > most_known) {
                known_.erase(known_.begin());
            }
        }
    }

    void store(std::size_t step, std::size_t part, const Stage& stage) {
        for (std::size_t kind = 0; kind < setup_.kinds; ++kind) {
            totals_[kind][2 * step + part] = totals_of(mesh_, stage, kind);
        }
        result_.held_back += stage.data.held_back;
    }

    void copy_out(std::size_t node) { copy_out(node, node_); }
    void copy_out(std::size_t node, const Stage& stage) {
        const auto at = static_cast<std::ptrdiff_t>(node * mesh_.cells());
        for (std::size_t kind = 0; kind < setup_.kinds; ++kind) {
            const auto& density = stage.density[kind];
            std::copy(density.begin(), density.end(), result_.density[kind].begin() + at);
            if (setup_.ages) {
                const auto& integral = stage.density[setup_.kinds + kind];
                for (std::size_t cell = 0; cell < mesh_.cells(); ++cell) {
                    result_.age[kind][node * mesh_.cells() + cell] =
                        density[cell] > 0 ? integral[cell] / density[cell] : 0.0;
                }
            }
        }
        if (setup_.limiter != Limiter::none) {
            const bool known = !stage.limited.face.empty();
            const auto least =
                known ? smallest_fraction(mesh_, stage.limited) : std::vector<float>(mesh_.cells(), 1.0F);
            result_.limited.insert(result_.limited.end(), least.begin(), least.end());
        }
    }

    void finish() {
        for (const auto& totals : totals_) {
            result_.budget.push_back(add_up(totals, intervals_));
        }
        result_.not_converged = solver_.not_converged;
        result_.largest_change = solver_.largest_change;
        result_.factorizations = solver_.factorizations;
        result_.solves = solver_.solves;
        result_.pivoted = solver_.pivoted;
        result_.most_limiter_iterations = solver_.most_iterations;
        result_.worst_residual = solver_.worst_residual;
    }

    const MarchSetup& setup_;
    const RunContext& context_;
    const Mesh& mesh_;
    StageSolver solver_;
    Stage node_;
    struct Known {
        double momentum;
        std::vector<double> density; ///< of all kinds
    };
    std::vector<Known> known_;                        ///< descending
    std::vector<std::vector<MomentumTotals>> totals_; ///< [kinds][stages]
    std::vector<IntervalWeights> intervals_;
    MarchResult result_;
};

} // namespace

MomentumGain::MomentumGain(std::size_t cell_index, double at_momentum, double rate)
    : Error(ErrorKind::scenario,
            fmt::format("transport: found a momentum loss rate of {:.6g} g cm/s^2 in cell {} at the momentum "
                        "{:.6g} g cm/s, expected >= 0 (compression outweighs the losses there)",
                        rate,
                        cell_index,
                        at_momentum)),
      cell(cell_index), momentum(at_momentum), loss_rate(rate) {}

std::vector<double> march_momenta(std::span<const double> nodes) {
    std::vector<double> momenta;
    for (std::size_t n = 0; n < nodes.size(); ++n) {
        momenta.push_back(nodes[n]);
        if (n + 1 < nodes.size()) {
            momenta.push_back(nodes[n] * std::pow(nodes[n + 1] / nodes[n], middle));
        }
    }
    return momenta;
}

MarchResult march(const MarchSetup& setup, const RunContext& context) {
    if (setup.momentum.size() < 2 ||
        !std::is_sorted(setup.momentum.rbegin(), setup.momentum.rend(), std::less_equal<>()) ||
        setup.momentum.back() <= 0 || setup.sides.size() != setup.mesh.sides.size() || setup.kinds == 0) {
        throw Error(ErrorKind::runtime,
                    "transport: found a march that is set up wrongly, expected descending "
                    "momenta > 0, one boundary per side and at least one kind");
    }
    return Marcher(setup, context).run();
}

std::vector<std::vector<double>> mean_age(MarchSetup setup, const RunContext& context) {
    setup.ages = true;
    return march(setup, context).age;
}

} // namespace aureole::transport
