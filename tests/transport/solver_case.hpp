#pragma once

#include "read_table.hpp"

#include "aureole/base/constants.hpp"
#include "aureole/transport/march.hpp"

#include <algorithm>
#include <cmath>
#include <cstddef>
#include <span>
#include <vector>

/// Shared by the tests of the solver. They count momenta in GeV/c, with energy = momentum times c.
namespace solver_case {

using namespace aureole;
using namespace aureole::transport;

inline constexpr double kpc = constants::kiloparsec;
inline constexpr double light = constants::speed_of_light;

/// 0 .. extent in cells that grow like sinh; stretch 0 is even.
inline std::vector<double> sinh_edges(double extent, std::size_t cells, double stretch) {
    std::vector<double> edges;
    for (std::size_t i = 0; i <= cells; ++i) {
        const double share = static_cast<double>(i) / static_cast<double>(cells);
        edges.push_back(extent * (stretch > 0 ? std::sinh(stretch * share) / std::sinh(stretch) : share));
    }
    return edges;
}

inline std::vector<double> geometric_edges(double first, double last, std::size_t cells) {
    std::vector<double> edges;
    for (std::size_t i = 0; i <= cells; ++i) {
        edges.push_back(first * std::pow(last / first, static_cast<double>(i) / static_cast<double>(cells)));
    }
    return edges;
}

inline std::vector<double> middles(const std::vector<double>& edges) {
    std::vector<double> middle;
    for (std::size_t i = 0; i + 1 < edges.size(); ++i) {
        middle.push_back(0.5 * (edges[i] + edges[i + 1]));
    }
    return middle;
}

/// `per_decade` momenta per decade from `first` down to `last` or just below.
inline std::vector<double> descending(double first, double last, int per_decade) {
    std::vector<double> momenta{first};
    for (int i = 1; momenta.back() > last * (1 + 1e-9); ++i) {
        momenta.push_back(first * std::pow(10.0, -static_cast<double>(i) / per_decade));
    }
    return momenta;
}

/// Value at x of the cubic through the four nearest points; x ascending.
inline double cubic(std::span<const double> xs, std::span<const double> ys, double x) {
    const auto above = std::upper_bound(xs.begin(), xs.end(), x) - xs.begin();
    const auto first = static_cast<std::size_t>(
        std::clamp<std::ptrdiff_t>(above - 2, 0, static_cast<std::ptrdiff_t>(xs.size()) - 4));
    double sum = 0;
    for (std::size_t a = first; a < first + 4; ++a) {
        double term = ys[a];
        for (std::size_t b = first; b < first + 4; ++b) {
            if (b != a) {
                term *= (x - xs[b]) / (xs[a] - xs[b]);
            }
        }
        sum += term;
    }
    return sum;
}

/// The same with logarithms of the values.
inline double cubic_of_log(std::span<const double> xs, std::span<const double> ys, double x) {
    std::vector<double> logs;
    for (const double y : ys) {
        logs.push_back(std::log(y));
    }
    return std::exp(cubic(xs, logs, x));
}

/// A march over a 1-D mesh; callers fill what they need.
struct Column {
    std::vector<double> edges;
    Mesh mesh;
    std::vector<double> middle;
};

inline Column make_column(std::vector<double> edges) {
    Mesh mesh = make_slab(edges, true);
    auto middle = middles(edges);
    return {std::move(edges), std::move(mesh), std::move(middle)};
}

inline MarchSetup setup_of(const Mesh& mesh, Boundary side, std::vector<double> momentum) {
    return {.mesh = mesh,
            .corners = {},
            .sides = std::vector<Boundary>(mesh.sides.size(), side),
            .momentum = std::move(momentum),
            .evaluate = {}};
}

/// No losses, no flow, no sources; diffusion the same everywhere.
inline void set_plain(const Mesh& mesh, double momentum, double diffusion, MomentumData& data) {
    data = MomentumData{};
    data.kinetic_energy = momentum;
    data.space.speed = light;
    data.space.diffusion.assign(mesh.faces.size(), diffusion);
    data.space.boundary_diffusion.assign(mesh.boundary.size(), diffusion);
    data.losses.assign(1, std::vector<double>(mesh.cells(), 0.0));
    data.sources.assign(1, std::vector<double>(mesh.cells(), 0.0));
}

/// Density [cells] at one node of a result.
inline std::span<const double>
at_node(const Mesh& mesh, const MarchResult& result, std::size_t node, std::size_t kind = 0) {
    return std::span(result.density[kind]).subspan(node * mesh.cells(), mesh.cells());
}

/// Density at any momentum of one cell: cubic in ln N, ln p.
inline double at_momentum(
    const Mesh& mesh, const MarchSetup& setup, const MarchResult& result, std::size_t cell, double momentum) {
    std::vector<double> x;
    std::vector<double> y;
    for (std::size_t node = setup.momentum.size(); node-- > 1;) {
        x.push_back(std::log(setup.momentum[node]));
        y.push_back(result.density[0][node * mesh.cells() + cell]);
    }
    return cubic_of_log(x, y, std::log(momentum));
}

/// [cells] at any momentum.
inline std::vector<double>
profile(const Mesh& mesh, const MarchSetup& setup, const MarchResult& result, double momentum) {
    std::vector<double> density;
    for (std::size_t cell = 0; cell < mesh.cells(); ++cell) {
        density.push_back(at_momentum(mesh, setup, result, cell, momentum));
    }
    return density;
}

/// log_factor(before/after).
inline double order(double before, double after, double factor = 2) {
    return std::log(before / after) / std::log(factor);
}

} // namespace solver_case
