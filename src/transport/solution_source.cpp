#include "aureole/transport/solution_source.hpp"

#include "aureole/base/error.hpp"

#include <fmt/format.h>

#include <algorithm>
#include <cmath>
#include <memory>

namespace aureole::transport {
namespace {

struct Shared {
    std::vector<float> weighted; ///< [cells][nodes]
    std::size_t nodes = 0;
    grid::Grid rings, target;
};

Surroundings around_cell(const Shared& shared, std::size_t cell) {
    const grid::Grid& grid = shared.target;
    const auto middle = [](const std::vector<double>& edges, std::size_t i) {
        return 0.5 * (edges[i] + edges[i + 1]);
    };
    const double x = middle(grid.x, cell % grid.nx());
    const double z = middle(grid.z, cell / grid.plane_cells());
    if (grid.geometry == grid::Geometry::rz) {
        return surroundings(shared.rings, x, z);
    }
    return surroundings(shared.rings, std::hypot(x, middle(grid.y, cell / grid.nx() % grid.ny())), z);
}

void interpolate(const Shared& shared, std::size_t cell, float* out) {
    const Surroundings around = around_cell(shared, cell);
    for (std::size_t node = 0; node < shared.nodes; ++node) {
        double sum = 0;
        double logarithms = 0;
        bool positive = true;
        for (std::size_t a = 0; a < 4; ++a) {
            if (around.weight[a] == 0) {
                continue;
            }
            const auto value = static_cast<double>(shared.weighted[around.cell[a] * shared.nodes + node]);
            sum += around.weight[a] * value;
            positive = positive && value > 0;
            logarithms += positive ? around.weight[a] * std::log(value) : 0.0;
        }
        out[node] = static_cast<float>(positive ? std::exp(logarithms) : sum);
    }
}

} // namespace

spectra::Source solution_source(const Solution& solution, spectra::Species species, const grid::Grid& grid) {
    const bool electrons = species == spectra::Species::electrons;
    const auto& spectra = electrons ? solution.electrons : solution.protons;
    const std::string name = electrons ? "electrons" : "protons";
    if (!spectra) {
        throw Error(ErrorKind::scenario,
                    fmt::format("transport: found no {} in the solution of law '{}', expected transport.{} = "
                                "true",
                                name, solution.law, name));
    }
    const auto shared = std::make_shared<const Shared>(
        Shared{spectra->weighted, spectra->energy.size(), solution.grid, grid});
    spectra::Source source;
    source.species = species;
    source.basis = std::make_shared<const spectra::Basis>(spectra->energy);
    source.cells = grid.stored_cells();
    source.name = name + " of law '" + solution.law + "'";
    const bool same = grid == solution.grid;
    source.open = [shared, same]() -> spectra::Source::Reader {
        return [shared, same](std::size_t first, std::size_t count, float* weighted, std::size_t stride) {
            for (std::size_t c = 0; c < count; ++c) {
                if (same) {
                    std::copy_n(shared->weighted.data() + (first + c) * shared->nodes, shared->nodes,
                                weighted + c * stride);
                } else {
                    interpolate(*shared, first + c, weighted + c * stride);
                }
            }
        };
    };
    return source;
}

} // namespace aureole::transport
