// Seconds for a steady cosmic-ray march on 96 x 96 cells, 97 momenta, electrons and positrons, without or
// with a wind, and sums of the result. tests/oracle/scipy_transport.py solves the same problem with SciPy.
// Usage: bench_transport_march [wind 0|1] [threads] [cells per side] [nodes] [limiter 0|1]

#include "aureole/transport/march.hpp"

#include <chrono>
#include <cmath>
#include <cstdio>
#include <cstdlib>

namespace {

using namespace aureole;
using namespace aureole::transport;

constexpr double kpc = 3.0856775814913673e21;

grid::Grid make_grid(std::size_t n) {
    grid::Grid grid;
    grid.geometry = grid::Geometry::rz;
    grid.mirrored = true;
    for (std::size_t i = 0; i <= n; ++i) {
        const double share = static_cast<double>(i) / static_cast<double>(n);
        grid.x.push_back(20 * kpc * share);
        grid.z.push_back(10 * kpc * std::sinh(3 * share) / std::sinh(3.0));
    }
    return grid;
}

/// Diffusion and losses at 1 GeV/c; they grow as the root and as the square of the momentum.
double diffusion(double r, double z) {
    return 3e28 * std::exp(z / (5 * kpc)) * (1 + r / (20 * kpc));
}
double loss(double r, double z) {
    return 1e-16 * (0.5 + std::exp(-z / (3 * kpc) - r / (6 * kpc)));
}

double wind(double z) {
    return 2e7 * z / (z + 3 * kpc);
}

/// Momenta in GeV/c, all else in cm and s: a problem for timing, not a galaxy.
void fill_at_one(const grid::Grid& grid, const Mesh& mesh, bool windy, MomentumData& data) {
    const std::size_t nr = grid.nx();
    const auto middle = [](const std::vector<double>& edges, std::size_t i) {
        return 0.5 * (edges[i] + edges[i + 1]);
    };
    auto& space = data.space;
    space.speed = 2.99792458e10;
    space.diffusion.resize(mesh.faces.size());
    space.boundary_diffusion.resize(mesh.boundary.size());
    if (windy) {
        space.flow.assign(mesh.faces.size(), 0.0);
        space.boundary_flow.assign(mesh.boundary.size(), 0.0);
    }
    for (std::size_t f = 0; f < mesh.faces.size(); ++f) {
        const std::size_t i = mesh.faces[f].first % nr;
        const std::size_t k = mesh.faces[f].first / nr;
        const bool radial = mesh.faces[f].axis == 0;
        const double r = radial ? grid.x[i + 1] : middle(grid.x, i);
        const double z = radial ? middle(grid.z, k) : grid.z[k + 1];
        space.diffusion[f] = diffusion(r, z);
        if (windy && !radial) {
            space.flow[f] = wind(z);
        }
    }
    for (std::size_t f = 0; f < mesh.boundary.size(); ++f) {
        const std::size_t i = mesh.boundary[f].cell % nr;
        const std::size_t k = mesh.boundary[f].cell / nr;
        const bool radial = mesh.boundary[f].axis == 0;
        const double r = radial ? grid.x[nr] : middle(grid.x, i);
        const double z = radial ? middle(grid.z, k) : grid.z.back();
        space.boundary_diffusion[f] = diffusion(r, z);
        if (windy && !radial) {
            space.boundary_flow[f] = wind(z);
        }
    }
    data.losses.resize(1);
    data.losses[0].resize(mesh.cells());
    data.sources.resize(2);
    for (auto& source : data.sources) {
        source.resize(mesh.cells());
    }
    for (std::size_t cell = 0; cell < mesh.cells(); ++cell) {
        const double r = middle(grid.x, cell % nr);
        const double z = middle(grid.z, cell / nr);
        data.losses[0][cell] = loss(r, z);
        const double disc = std::exp(-r / (4 * kpc) - z / (0.2 * kpc));
        data.sources[0][cell] = disc;
        data.sources[1][cell] = 0.1 * disc;
    }
    if (windy) {
        data.divergence = flow_divergence(mesh, space.flow, space.boundary_flow);
    }
}

void scale(const std::vector<double>& from, double factor, std::vector<double>& to) {
    to.resize(from.size());
    for (std::size_t i = 0; i < from.size(); ++i) {
        to[i] = factor * from[i];
    }
}

void fill(const MomentumData& at_one, double momentum, MomentumData& data) {
    data.kinetic_energy = momentum;
    data.space.speed = at_one.space.speed;
    data.space.flow = at_one.space.flow;
    data.space.boundary_flow = at_one.space.boundary_flow;
    data.divergence = at_one.divergence;
    data.losses.resize(1);
    data.sources.resize(2);
    scale(at_one.space.diffusion, std::sqrt(momentum), data.space.diffusion);
    scale(at_one.space.boundary_diffusion, std::sqrt(momentum), data.space.boundary_diffusion);
    scale(at_one.losses[0], momentum * momentum, data.losses[0]);
    scale(at_one.sources[0], std::pow(momentum, -2.3), data.sources[0]);
    scale(at_one.sources[1], std::pow(momentum, -2.6), data.sources[1]);
}

} // namespace

int main(int count, char** arguments) {
    const auto argument = [&](int i, int otherwise) {
        return count > i ? std::atoi(arguments[i]) : otherwise;
    };
    const bool windy = argument(1, 0) != 0;
    const auto n = static_cast<std::size_t>(argument(3, 96));
    const int nodes = argument(4, 97);
    const auto grid = make_grid(n);
    const Mesh mesh = make_mesh(grid);
    MomentumData at_one;
    fill_at_one(grid, mesh, windy, at_one);
    MarchSetup setup{.mesh = mesh,
                     .corners = {},
                     .sides = {{BoundaryKind::free_escape}, {BoundaryKind::free_escape}},
                     .momentum = {},
                     .kinds = 2,
                     .evaluate = {}};
    for (int i = 0; i < nodes; ++i) {
        setup.momentum.push_back(1e4 * std::pow(10.0, -6.0 * i / (nodes - 1)));
    }
    setup.limiter = argument(5, 0) != 0 ? Limiter::square_root : Limiter::none;
    double evaluating = 0;
    setup.evaluate = [&](double momentum, MomentumData& data) {
        const auto begin = std::chrono::steady_clock::now();
        fill(at_one, momentum, data);
        evaluating += std::chrono::duration<double>(std::chrono::steady_clock::now() - begin).count();
    };
    RunContext context;
    context.threads = argument(2, 1);
    const auto begin = std::chrono::steady_clock::now();
    const auto result = march(setup, context);
    const double seconds = std::chrono::duration<double>(std::chrono::steady_clock::now() - begin).count();
    std::printf("seconds %.3f, of which coefficients %.3f; wind %d, threads %d, %zu cells, %d nodes\n",
                seconds, evaluating, windy ? 1 : 0, context.threads, mesh.cells(), nodes);
    std::printf("factors %zu, redone %zu, pivoted %zu, residual %.1e, defects %.1e %.1e\n",
                result.factorizations, result.redone_steps, result.pivoted, result.worst_residual,
                result.budget[0].defect.number, result.budget[0].defect.energy);
    for (std::size_t kind = 0; kind < 2; ++kind) {
        for (const int node : {nodes / 4, nodes / 2, nodes - 1}) {
            double sum = 0;
            for (std::size_t cell = 0; cell < mesh.cells(); ++cell) {
                sum += mesh.volume[cell] *
                       result.density[kind][static_cast<std::size_t>(node) * mesh.cells() + cell];
            }
            std::printf("kind %zu node %d sum %.12e\n", kind, node, sum);
        }
    }
    return 0;
}
