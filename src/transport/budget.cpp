#include "aureole/transport/budget.hpp"

#include <cmath>
#include <numeric>

namespace aureole::transport {
namespace {

double current(const MomentumTotals& at) {
    return std::accumulate(at.carried.begin(), at.carried.end(), 0.0);
}

/// Integral of a power law through two points; a straight line where one value is not positive.
double power_law_integral(double p1, double f1, double p2, double f2) {
    if (!(f1 > 0) || !(f2 > 0)) {
        return 0.5 * (f1 + f2) * (p2 - p1);
    }
    const double step = std::log(p2 / p1);
    const double x = std::log(f2 * p2 / (f1 * p1));
    return f1 * p1 * step * (std::abs(x) < 1e-8 ? 1 + 0.5 * x : std::expm1(x) / x);
}

struct Sums {
    Rate injected, catastrophic;
    std::vector<Rate> escaped;
};

void add_interval(std::span<const MomentumTotals> totals,
                  std::size_t m,
                  const IntervalWeights& weights,
                  Sums& sums) {
    const double energy = 0.5 * (totals[m].kinetic_energy + totals[m + 1].kinetic_energy);
    for (std::size_t j = 0; j < 3; ++j) {
        if (weights[j] == 0) {
            continue;
        }
        const MomentumTotals& at = totals[m + j - 1];
        const auto add = [&](Rate& rate, double value) {
            rate.number += weights[j] * value;
            rate.energy += weights[j] * value * energy;
        };
        add(sums.injected, at.injected);
        add(sums.catastrophic, at.catastrophic);
        for (std::size_t side = 0; side < sums.escaped.size(); ++side) {
            add(sums.escaped[side], at.escaped[side]);
        }
    }
}

Rate injected_finely(std::span<const MomentumTotals> totals) {
    Rate fine;
    for (std::size_t m = 0; m + 1 < totals.size(); ++m) {
        const MomentumTotals& high = totals[m];
        const MomentumTotals& low = totals[m + 1];
        fine.number += power_law_integral(low.momentum, low.injected, high.momentum, high.injected);
        fine.energy += power_law_integral(low.momentum, low.injected * low.kinetic_energy, high.momentum,
                                          high.injected * high.kinetic_energy);
    }
    return fine;
}

} // namespace

Budget add_up(std::span<const MomentumTotals> totals, std::span<const IntervalWeights> intervals) {
    Budget budget;
    Sums sums;
    sums.escaped.resize(totals.front().escaped.size());
    std::vector<double> lost(totals.front().carried.size(), 0.0);
    const std::size_t last = intervals.size();
    for (std::size_t m = 0; m < last; ++m) {
        add_interval(totals, m, intervals[m], sums);
        const double before = totals[m].kinetic_energy;
        const double here = totals[m + 1].kinetic_energy;
        const double drop =
            m + 1 < last ? 0.5 * (before - totals[m + 2].kinetic_energy) : 0.5 * (before - here);
        for (std::size_t process = 0; process < lost.size(); ++process) {
            lost[process] += totals[m + 1].carried[process] * drop;
        }
    }
    budget.injected = sums.injected;
    budget.catastrophic = sums.catastrophic;
    budget.escaped = std::move(sums.escaped);
    budget.remaining.number = current(totals[last]);
    budget.remaining.energy = current(totals[last]) * totals[last].kinetic_energy;
    budget.adiabatic = lost.back();
    budget.lost.assign(lost.begin(), lost.end() - 1);
    double number = budget.catastrophic.number + budget.remaining.number;
    double energy =
        std::accumulate(lost.begin(), lost.end(), budget.catastrophic.energy + budget.remaining.energy);
    for (const Rate& side : budget.escaped) {
        number += side.number;
        energy += side.energy;
    }
    if (budget.injected.number > 0) {
        budget.defect = {number / budget.injected.number - 1, energy / budget.injected.energy - 1};
        const Rate fine = injected_finely(totals);
        budget.quadrature = {budget.injected.number / fine.number - 1,
                             budget.injected.energy / fine.energy - 1};
    }
    return budget;
}

} // namespace aureole::transport
