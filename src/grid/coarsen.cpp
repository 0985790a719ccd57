#include "aureole/grid/grid.hpp"

#include <algorithm>

namespace aureole::grid {

namespace {

/// Indices of the edges that stay.
std::vector<std::size_t> kept_edges(const std::vector<double>& edges) {
    const std::size_t last = edges.size() - 1;
    const auto zero = std::find(edges.begin(), edges.end(), 0.0);
    const std::size_t anchor = zero == edges.end() ? 0 : static_cast<std::size_t>(zero - edges.begin());
    std::vector<std::size_t> kept;
    for (std::size_t i = 0; i <= last; ++i) {
        const std::size_t from_anchor = i > anchor ? i - anchor : anchor - i;
        if (i == 0 || i == last || from_anchor % 2 == 0) {
            kept.push_back(i);
        }
    }
    return kept;
}

std::vector<double> coarse_edges(const std::vector<double>& edges) {
    std::vector<double> coarse;
    for (const std::size_t i : kept_edges(edges)) {
        coarse.push_back(edges[i]);
    }
    return coarse;
}

/// Coarse cell of each fine cell along one axis.
std::vector<std::size_t> coarse_index(const std::vector<double>& edges) {
    const auto kept = kept_edges(edges);
    std::vector<std::size_t> index;
    std::size_t coarse = 0;
    for (std::size_t i = 0; i + 1 < edges.size(); ++i) {
        if (i == kept[coarse + 1]) {
            ++coarse;
        }
        index.push_back(coarse);
    }
    return index;
}

} // namespace

Grid coarsened(const Grid& grid) {
    Grid coarse = grid;
    coarse.x = coarse_edges(grid.x);
    if (!grid.y.empty()) {
        coarse.y = coarse_edges(grid.y);
    }
    coarse.z = coarse_edges(grid.z);
    return coarse;
}

std::vector<std::size_t> coarse_cell(const Grid& grid) {
    const Grid coarse = coarsened(grid);
    const auto x = coarse_index(grid.x);
    const auto y = grid.y.empty() ? std::vector<std::size_t>{0} : coarse_index(grid.y);
    const auto z = coarse_index(grid.z);
    std::vector<std::size_t> cell;
    cell.reserve(grid.stored_cells());
    for (const std::size_t k : z) {
        for (const std::size_t j : y) {
            for (const std::size_t i : x) {
                cell.push_back(i + coarse.nx() * (j + coarse.ny() * k));
            }
        }
    }
    return cell;
}

} // namespace aureole::grid
