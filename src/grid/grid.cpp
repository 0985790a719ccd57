#include "aureole/grid/grid.hpp"

#include "aureole/base/constants.hpp"
#include "aureole/base/error.hpp"

#include <fmt/format.h>

#include <cmath>
#include <string>

namespace aureole::grid {

namespace {

void check_edges(const std::string& name, const std::vector<double>& edges, std::string& problems) {
    if (edges.size() < 2) {
        problems += fmt::format("; {}: found {} edges, expected at least 2", name, edges.size());
        return;
    }
    for (std::size_t i = 0; i < edges.size(); ++i) {
        if (!std::isfinite(edges[i])) {
            problems += fmt::format("; {}: edge {} is {}, expected a finite length", name, i, edges[i]);
            return;
        }
    }
    for (std::size_t i = 1; i < edges.size(); ++i) {
        if (!(edges[i] > edges[i - 1])) {
            problems +=
                fmt::format("; {}: edge {} ({} cm) is not above edge {} ({} cm), expected increasing edges",
                            name, i, edges[i], i - 1, edges[i - 1]);
            return;
        }
    }
}

/// First width times this is the sum of `cells` widths growing by `ratio`; the first counts `first` of
/// itself.
double growth_sum(double first, std::size_t cells, double ratio) {
    double sum = first;
    double width = 1;
    for (std::size_t i = 1; i < cells; ++i) {
        width *= ratio;
        sum += width;
    }
    return sum;
}

/// Ratio > 1 at which growth_sum is `target`, by bisection to the last bit.
double growth_ratio(double first, std::size_t cells, double target) {
    double low = 1;
    double high = 2;
    while (growth_sum(first, cells, high) < target) {
        high *= 2;
    }
    for (double middle = 0.5 * (low + high); middle > low && middle < high; middle = 0.5 * (low + high)) {
        (growth_sum(first, cells, middle) < target ? low : high) = middle;
    }
    return high;
}

/// Positive edges of one side; the first cell counts `first` (1, or 1/2 where z = 0 is its middle).
std::vector<double> one_side(double extent, std::size_t cells, double smallest, double first) {
    const double even = extent / (static_cast<double>(cells) - 1 + first);
    const bool stretched = smallest > 0 && smallest < even && cells > 1;
    const double ratio = stretched ? growth_ratio(first, cells, extent / smallest) : 1.0;
    std::vector<double> edges;
    double width = stretched ? smallest : even;
    double sum = 0;
    for (std::size_t i = 0; i + 1 < cells; ++i) {
        sum = stretched ? sum + (i == 0 ? first : 1.0) * width : even * (static_cast<double>(i) + first);
        width *= ratio;
        edges.push_back(sum);
    }
    edges.push_back(extent);
    return edges;
}

} // namespace

std::vector<double> cell_volumes(const Grid& grid) {
    std::vector<double> volume;
    volume.reserve(grid.stored_cells());
    for (std::size_t k = 0; k < grid.nz(); ++k) {
        const double height = grid.z[k + 1] - grid.z[k];
        for (std::size_t j = 0; j < grid.ny(); ++j) {
            for (std::size_t i = 0; i < grid.nx(); ++i) {
                const double width = grid.x[i + 1] - grid.x[i];
                const double area = grid.geometry == Geometry::xyz
                                        ? width * (grid.y[j + 1] - grid.y[j])
                                        : constants::pi * width * (grid.x[i + 1] + grid.x[i]);
                volume.push_back(area * height);
            }
        }
    }
    return volume;
}

void validate(const Grid& grid) {
    const bool rings = grid.geometry == Geometry::rz;
    std::string problems;
    check_edges(rings ? "R edges" : "X edges", grid.x, problems);
    if (!rings) {
        check_edges("Y edges", grid.y, problems);
    } else if (!grid.y.empty()) {
        problems += fmt::format("; Y edges: found {}, expected none on an axisymmetric grid", grid.y.size());
    }
    check_edges("Z edges", grid.z, problems);
    if (rings && !grid.x.empty() && grid.x.front() != 0) {
        problems += fmt::format("; R edges: found a first edge of {} cm, expected 0", grid.x.front());
    }
    if (grid.mirrored && !grid.z.empty() && grid.z.front() != 0) {
        problems += fmt::format("; Z edges: found a first edge of {} cm, expected 0 on a mirrored grid",
                                grid.z.front());
    }
    if (!problems.empty()) {
        throw Error(ErrorKind::input, "grid: " + problems.substr(2));
    }
}

std::vector<double> stretched_edges(double extent, std::size_t cells, double smallest, bool two_sided) {
    if (!(extent > 0) || !std::isfinite(extent) || cells == 0 || !(smallest >= 0)) {
        throw Error(ErrorKind::scenario, fmt::format("grid: found an extent of {} cm, {} cells and a "
                                                     "smallest cell of {} cm, expected an extent > 0, "
                                                     "at least 1 cell and a smallest cell >= 0",
                                                     extent, cells, smallest));
    }
    if (!two_sided) {
        auto edges = one_side(extent, cells, smallest, 1.0);
        edges.insert(edges.begin(), 0.0);
        return edges;
    }
    const bool odd = cells % 2 == 1;
    const auto upper = one_side(extent, (cells + 1) / 2, smallest, odd ? 0.5 : 1.0);
    std::vector<double> edges;
    for (auto edge = upper.rbegin(); edge != upper.rend(); ++edge) {
        edges.push_back(-*edge);
    }
    if (!odd) {
        edges.push_back(0.0);
    }
    edges.insert(edges.end(), upper.begin(), upper.end());
    return edges;
}

} // namespace aureole::grid
