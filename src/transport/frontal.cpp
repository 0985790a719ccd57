#include "frontal.hpp"

#include "frontal_kernels.hpp"

#include "aureole/base/dispatch.hpp"

#include <algorithm>

namespace aureole::transport {
namespace {

template <std::size_t sides>
[[gnu::always_inline]] inline void
solve_fronts(const Elimination& plan, const Factor& factor, FrontalScratch& scratch) {
    const std::size_t rows = plan.order.size();
    double* vector = scratch.vector.data();
    double* work = scratch.work.data();
    const auto panel_of = [&](const Front& front, const std::vector<double>& panels) {
        return kernels::Panel{panels.data() + front.panel,
                              factor.inverse_pivot.data() + front.first,
                              front.pivots,
                              front.rows,
                              front.pivot_columns,
                              front.width(),
                              plan.widest};
    };
    const auto& lower = factor.symmetric ? factor.upper : factor.lower;
    for (const Front& front : plan.fronts) {
        for (std::size_t s = 0; s < sides; ++s) {
            std::copy_n(vector + s * rows + front.first, front.pivots, work + s * plan.widest);
        }
        kernels::forward<sides>(panel_of(front, lower), factor.symmetric, work, scratch.pivot_values.data());
        const std::uint32_t* places = plan.later.data() + front.later_start;
        for (std::size_t s = 0; s < sides; ++s) {
            const double* one = work + s * plan.widest;
            double* all = vector + s * rows;
            std::copy_n(one, front.pivots, all + front.first);
            for (std::uint32_t i = 0; i < front.later; ++i) {
                all[places[i]] += one[front.pivot_columns + i];
            }
        }
    }
    for (std::size_t f = plan.fronts.size(); f-- > 0;) {
        const Front& front = plan.fronts[f];
        const std::uint32_t* places = plan.later.data() + front.later_start;
        for (std::size_t s = 0; s < sides; ++s) {
            double* one = work + s * plan.widest;
            const double* all = vector + s * rows;
            std::copy_n(all + front.first, front.pivots, one);
            for (std::uint32_t i = 0; i < front.later; ++i) {
                one[front.pivot_columns + i] = all[places[i]];
            }
            std::fill(one + front.pivot_columns + front.later, one + front.width(), 0.0);
        }
        kernels::backward<sides>(panel_of(front, factor.upper), work);
        for (std::size_t s = 0; s < sides; ++s) {
            std::copy_n(work + s * plan.widest, front.pivots, vector + s * rows + front.first);
        }
    }
}
AUREOLE_HOT void solve_one_hot(const Elimination& plan, const Factor& factor, FrontalScratch& scratch) {
    solve_fronts<1>(plan, factor, scratch);
}
AUREOLE_HOT void solve_two_hot(const Elimination& plan, const Factor& factor, FrontalScratch& scratch) {
    solve_fronts<2>(plan, factor, scratch);
}
void solve_one_baseline(const Elimination& plan, const Factor& factor, FrontalScratch& scratch) {
    solve_fronts<1>(plan, factor, scratch);
}
void solve_two_baseline(const Elimination& plan, const Factor& factor, FrontalScratch& scratch) {
    solve_fronts<2>(plan, factor, scratch);
}

/// Adds a child's remainder to its parent's panels and remainder.
[[gnu::always_inline]] inline void add_remainder(const Front& parent,
                                                 const Front& child,
                                                 const double* from,
                                                 bool symmetric,
                                                 double* upper,
                                                 double* lower,
                                                 double* remainder) {
    const std::size_t from_row = child.later_columns;
    const std::size_t width = parent.width();
    for (std::size_t a = 0; a < child.runs.size(); ++a) {
        const Run& rows = child.runs[a];
        const bool pivot_rows = rows.to < parent.pivots;
        for (std::size_t b = symmetric ? a : 0; b < child.runs.size(); ++b) {
            const Run& columns = child.runs[b];
            const bool pivot_columns = columns.to < parent.pivots;
            if (!pivot_rows && pivot_columns) {
                for (std::size_t i = 0; i < rows.length; ++i) {
                    const double* line = from + (rows.from + i) * from_row + columns.from;
                    for (std::size_t j = 0; j < columns.length; ++j) {
                        lower[(columns.to + j) * width + rows.to + i] += line[j];
                    }
                }
                continue;
            }
            double* target = pivot_rows
                                 ? upper + rows.to * width + columns.to
                                 : remainder +
                                       (rows.to - parent.pivot_columns) * std::size_t{parent.later_columns} +
                                       (columns.to - parent.pivot_columns);
            const std::size_t target_row = pivot_rows ? width : parent.later_columns;
            for (std::size_t i = 0; i < rows.length; ++i) {
                const double* line = from + (rows.from + i) * from_row + columns.from;
                double* into = target + i * target_row;
#pragma GCC ivdep
                for (std::size_t j = 0; j < columns.length; ++j) {
                    into[j] += line[j];
                }
            }
        }
    }
}

[[gnu::always_inline]] inline void
add_entries(std::span<const PanelEntry> entries, std::span<const double> values, double* panel) {
    for (const PanelEntry& entry : entries) {
        panel[entry.place] += values[entry.entry];
    }
}

[[gnu::always_inline]] inline bool factor_fronts(const Elimination& plan,
                                                 std::span<const double> values,
                                                 FrontalScratch& scratch,
                                                 Factor& factor) {
    const bool symmetric = factor.symmetric;
    std::size_t top = 0;
    for (std::size_t f = 0; f < plan.fronts.size(); ++f) {
        const Front& front = plan.fronts[f];
        const bool last = f + 1 == plan.fronts.size();
        const std::size_t panel_size = std::size_t{front.rows} * front.width();
        double* upper = factor.upper.data() + front.panel;
        double* lower = symmetric ? scratch.panel.data() : factor.lower.data() + front.panel;
        std::fill_n(upper, panel_size, 0.0);
        if (symmetric) { // all but the square part is written before it is read
            for (std::size_t k = 0; k < front.rows; ++k) {
                std::fill_n(lower + k * front.width(), front.pivot_columns, 0.0);
            }
        } else {
            std::fill_n(lower, panel_size, 0.0);
        }
        const std::size_t remainder_size = std::size_t{front.later_columns} * front.later_columns;
        double* remainder = scratch.stack.data() + top;
        std::fill_n(remainder, remainder_size, 0.0);
        const std::size_t upper_end = last ? plan.upper.size() : plan.fronts[f + 1].upper_start;
        add_entries(std::span(plan.upper).subspan(front.upper_start, upper_end - front.upper_start), values,
                    upper);
        if (!symmetric) {
            const std::size_t lower_end = last ? plan.lower.size() : plan.fronts[f + 1].lower_start;
            add_entries(std::span(plan.lower).subspan(front.lower_start, lower_end - front.lower_start),
                        values, lower);
        }
        std::size_t below = top;
        for (auto child = front.children.rbegin(); child != front.children.rend(); ++child) {
            const Front& part = plan.fronts[*child];
            below -= std::size_t{part.later_columns} * part.later_columns;
            add_remainder(front, part, scratch.stack.data() + below, symmetric, upper, lower, remainder);
        }
        if (!kernels::eliminate(upper, lower, factor.inverse_pivot.data() + front.first, remainder,
                                front.pivots, front.pivot_columns, front.later_columns, symmetric)) {
            return false;
        }
        if (below != top) {
            std::copy_n(remainder, remainder_size, scratch.stack.data() + below);
        }
        top = below + remainder_size;
    }
    return true;
}
AUREOLE_HOT bool factor_fronts_hot(const Elimination& plan,
                                   std::span<const double> values,
                                   FrontalScratch& scratch,
                                   Factor& factor) {
    return factor_fronts(plan, values, scratch, factor);
}
bool factor_fronts_baseline(const Elimination& plan,
                            std::span<const double> values,
                            FrontalScratch& scratch,
                            Factor& factor) {
    return factor_fronts(plan, values, scratch, factor);
}

} // namespace

bool factorize(const Elimination& plan,
               std::span<const double> values,
               bool symmetric,
               bool baseline,
               FrontalScratch& scratch,
               Factor& factor) {
    factor.symmetric = symmetric;
    factor.upper.resize(plan.panel_size);
    factor.lower.resize(symmetric ? 0 : plan.panel_size);
    factor.inverse_pivot.assign(plan.order.size() + 4, 0.0);
    scratch.stack.resize(plan.stack_size);
    scratch.panel.resize(plan.largest_panel);
    return baseline ? factor_fronts_baseline(plan, values, scratch, factor)
                    : factor_fronts_hot(plan, values, scratch, factor);
}

void solve(const Elimination& plan,
           const Factor& factor,
           bool baseline,
           FrontalScratch& scratch,
           std::span<std::vector<double>> x) {
    const std::size_t rows = plan.order.size();
    scratch.vector.resize(2 * rows);
    scratch.work.assign(2 * plan.widest, 0.0);
    scratch.pivot_values.assign(2 * plan.widest, 0.0);
    for (std::size_t first = 0; first < x.size(); first += 2) {
        const std::size_t count = std::min<std::size_t>(2, x.size() - first);
        for (std::size_t s = 0; s < count; ++s) {
            for (std::size_t p = 0; p < rows; ++p) {
                scratch.vector[s * rows + p] = x[first + s][plan.order[p]];
            }
        }
        if (count == 2) {
            baseline ? solve_two_baseline(plan, factor, scratch) : solve_two_hot(plan, factor, scratch);
        } else {
            baseline ? solve_one_baseline(plan, factor, scratch) : solve_one_hot(plan, factor, scratch);
        }
        for (std::size_t s = 0; s < count; ++s) {
            for (std::size_t p = 0; p < rows; ++p) {
                x[first + s][plan.order[p]] = scratch.vector[s * rows + p];
            }
        }
    }
}

} // namespace aureole::transport
