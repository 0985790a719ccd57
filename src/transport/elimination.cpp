#include "elimination.hpp"

#include "aureole/base/error.hpp"

#include <algorithm>
#include <limits>

namespace aureole::transport {
namespace {

using Position = std::array<std::uint32_t, 3>;

/// Below this many cells a region is eliminated as one dense front.
constexpr std::size_t smallest_region = 8;

std::uint32_t round_up(std::uint32_t value, std::uint32_t step) {
    return (value + step - 1) / step * step;
}

std::size_t longest_axis(std::span<const std::uint32_t> cells, std::span<const Position> position) {
    std::size_t longest = 0;
    std::uint32_t extent = 0;
    for (std::size_t axis = 0; axis < 3; ++axis) {
        std::uint32_t low = std::numeric_limits<std::uint32_t>::max();
        std::uint32_t high = 0;
        for (const std::uint32_t cell : cells) {
            low = std::min(low, position[cell][axis]);
            high = std::max(high, position[cell][axis]);
        }
        if (high - low + 1 > extent) {
            extent = high - low + 1;
            longest = axis;
        }
    }
    return longest;
}

void add_front(std::span<const std::uint32_t> cells, Elimination& plan, std::vector<std::uint32_t>& parts) {
    Front front;
    front.first = static_cast<std::uint32_t>(plan.order.size());
    front.pivots = static_cast<std::uint32_t>(cells.size());
    front.children = std::move(parts);
    plan.order.insert(plan.order.end(), cells.begin(), cells.end());
    parts.assign(1, static_cast<std::uint32_t>(plan.fronts.size()));
    plan.fronts.push_back(std::move(front));
}

/// Orders `cells`; gives the fronts that a later front must take up.
std::vector<std::uint32_t>
dissect(std::vector<std::uint32_t> cells, std::span<const Position> position, Elimination& plan) {
    std::vector<std::uint32_t> parts;
    if (cells.empty()) {
        return parts;
    }
    const std::size_t axis = longest_axis(cells, position);
    const auto along = [&](std::uint32_t cell) { return position[cell][axis]; };
    auto middle = cells.begin() + static_cast<std::ptrdiff_t>(cells.size() / 2);
    std::nth_element(cells.begin(), middle, cells.end(),
                     [&](std::uint32_t a, std::uint32_t b) { return along(a) < along(b); });
    const std::uint32_t cut = along(*middle);
    std::vector<std::uint32_t> low;
    std::vector<std::uint32_t> high;
    std::vector<std::uint32_t> between;
    for (const std::uint32_t cell : cells) {
        (along(cell) < cut ? low : along(cell) > cut ? high : between).push_back(cell);
    }
    if (cells.size() <= smallest_region || (low.empty() && high.empty())) {
        std::sort(cells.begin(), cells.end());
        add_front(cells, plan, parts);
        return parts;
    }
    parts = dissect(std::move(low), position, plan);
    const auto others = dissect(std::move(high), position, plan);
    parts.insert(parts.end(), others.begin(), others.end());
    std::sort(between.begin(), between.end());
    add_front(between, plan, parts);
    return parts;
}

void find_later(const Pattern& pattern, Elimination& plan, Front& front) {
    std::vector<std::uint32_t> later;
    const std::uint32_t end = front.first + front.pivots;
    for (std::uint32_t p = front.first; p < end; ++p) {
        const std::uint32_t row = plan.order[p];
        for (std::uint32_t e = pattern.row_start[row]; e < pattern.row_start[row + 1]; ++e) {
            const std::uint32_t other = plan.place[pattern.column[e]];
            if (other >= end) {
                later.push_back(other);
            }
        }
    }
    for (const std::uint32_t child : front.children) {
        const Front& below = plan.fronts[child];
        for (std::uint32_t i = 0; i < below.later; ++i) {
            const std::uint32_t other = plan.later[below.later_start + i];
            if (other < front.first) {
                throw Error(ErrorKind::runtime, "transport: found cells that are no neighbours by position, "
                                                "expected neighbours at most 1 apart");
            }
            if (other >= end) {
                later.push_back(other);
            }
        }
    }
    std::sort(later.begin(), later.end());
    later.erase(std::unique(later.begin(), later.end()), later.end());
    front.later_start = plan.later.size();
    front.later = static_cast<std::uint32_t>(later.size());
    front.rows = round_up(front.pivots, 4);
    front.pivot_columns = round_up(front.pivots, 8);
    front.later_columns = round_up(front.later, 8);
    plan.later.insert(plan.later.end(), later.begin(), later.end());
}

/// Column of the front at which the unknown of a place stands.
std::uint32_t column_of(const Elimination& plan, const Front& front, std::uint32_t place) {
    if (place < front.first + front.pivots) {
        return place - front.first;
    }
    const auto begin = plan.later.begin() + static_cast<std::ptrdiff_t>(front.later_start);
    const auto found = std::lower_bound(begin, begin + front.later, place);
    return front.pivot_columns + static_cast<std::uint32_t>(found - begin);
}

void find_runs(Elimination& plan, const Front& parent, Front& child) {
    for (std::uint32_t i = 0; i < child.later; ++i) {
        const std::uint32_t to = column_of(plan, parent, plan.later[child.later_start + i]);
        const bool longer = !child.runs.empty() && child.runs.back().to + child.runs.back().length == to &&
                            to != parent.pivot_columns;
        if (longer) {
            ++child.runs.back().length;
        } else {
            child.runs.push_back({i, to, 1});
        }
    }
}

void find_entries(const Pattern& pattern, Elimination& plan, Front& front) {
    front.upper_start = plan.upper.size();
    front.lower_start = plan.lower.size();
    const std::uint32_t end = front.first + front.pivots;
    for (std::uint32_t p = front.first; p < end; ++p) {
        const std::uint32_t row = plan.order[p];
        const std::uint32_t line = (p - front.first) * front.width();
        for (std::uint32_t e = pattern.row_start[row]; e < pattern.row_start[row + 1]; ++e) {
            const std::uint32_t other_row = pattern.column[e];
            const std::uint32_t other = plan.place[other_row];
            if (other < front.first) {
                continue;
            }
            const std::uint32_t column = column_of(plan, front, other);
            plan.upper.push_back({e, line + column});
            if (other >= end) {
                const auto begin = pattern.column.begin() + pattern.row_start[other_row];
                const auto stop = pattern.column.begin() + pattern.row_start[other_row + 1];
                const auto mirror = std::lower_bound(begin, stop, row) - pattern.column.begin();
                plan.lower.push_back({static_cast<std::uint32_t>(mirror), line + column});
            }
        }
    }
}

void add_sizes(Elimination& plan, Front& front, std::size_t& alive) {
    const std::size_t panel = std::size_t{front.rows} * front.width();
    const std::size_t remainder = std::size_t{front.later_columns} * front.later_columns;
    front.panel = plan.panel_size;
    plan.panel_size += panel;
    plan.largest_panel = std::max(plan.largest_panel, panel);
    plan.widest = std::max(plan.widest, std::size_t{front.width()});
    plan.stack_size = std::max(plan.stack_size, alive + remainder);
    for (const std::uint32_t child : front.children) {
        alive -= std::size_t{plan.fronts[child].later_columns} * plan.fronts[child].later_columns;
    }
    alive += remainder;
    const double pivots = front.pivots;
    const double later = front.later;
    plan.operations += pivots * (pivots * pivots / 3 + pivots * later + later * later);
}

} // namespace

Elimination plan_elimination(const Pattern& pattern, std::span<const Position> position) {
    Elimination plan;
    std::vector<std::uint32_t> cells(pattern.rows());
    for (std::uint32_t cell = 0; cell < cells.size(); ++cell) {
        cells[cell] = cell;
    }
    plan.order.reserve(cells.size());
    dissect(std::move(cells), position, plan);
    plan.place.resize(plan.order.size());
    for (std::uint32_t p = 0; p < plan.order.size(); ++p) {
        plan.place[plan.order[p]] = p;
    }
    std::size_t alive = 0;
    for (Front& front : plan.fronts) {
        find_later(pattern, plan, front);
        find_entries(pattern, plan, front);
        for (const std::uint32_t child : front.children) {
            find_runs(plan, front, plan.fronts[child]);
        }
        add_sizes(plan, front, alive);
    }
    return plan;
}

} // namespace aureole::transport
