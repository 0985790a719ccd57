#include "aureole/transport/mesh.hpp"

#include "aureole/base/constants.hpp"
#include "aureole/base/error.hpp"

#include <cmath>

namespace aureole::transport {
namespace {

/// x.n/|x|^2 where the outward normal points along `along` and `across` is the other coordinate.
double inverse_radius(double along, double across) {
    const double square = along * along + across * across;
    return square > 0 ? std::abs(along) / square : 0.0;
}

std::uint32_t narrow(std::size_t value) {
    return static_cast<std::uint32_t>(value);
}

double half_width(std::span<const double> edges, std::size_t i) {
    return 0.5 * (edges[i + 1] - edges[i]);
}

} // namespace

Mesh make_mesh(const grid::Grid& grid) {
    if (grid.geometry != grid::Geometry::rz) {
        throw Error(ErrorKind::input, "transport: found an XYZ grid, expected an RZ grid");
    }
    const std::size_t nr = grid.nx();
    const std::size_t nz = grid.nz();
    Mesh mesh;
    mesh.volume = grid::cell_volumes(grid);
    mesh.sides = {"outer radius", "top"};
    if (!grid.mirrored) {
        mesh.sides.emplace_back("bottom");
    }
    mesh.position.reserve(mesh.cells());
    for (std::size_t k = 0; k < nz; ++k) {
        const double dz = grid.z[k + 1] - grid.z[k];
        const double z = 0.5 * (grid.z[k] + grid.z[k + 1]);
        for (std::size_t i = 0; i < nr; ++i) {
            const std::uint32_t cell = narrow(i + nr * k);
            const double inner = grid.x[i];
            const double outer = grid.x[i + 1];
            const double ring = constants::pi * (outer - inner) * (outer + inner);
            const double radial_area = 2 * constants::pi * outer * dz;
            mesh.position.push_back({narrow(i), narrow(k), 0});
            if (i + 1 < nr) {
                mesh.faces.push_back(
                    {cell, cell + 1, radial_area, half_width(grid.x, i), half_width(grid.x, i + 1), 0});
            } else {
                mesh.boundary.push_back(
                    {cell, radial_area, half_width(grid.x, i), inverse_radius(outer, z), 0, 0, 1});
            }
            const double middle = 0.5 * (inner + outer);
            if (k + 1 < nz) {
                mesh.faces.push_back(
                    {cell, cell + narrow(nr), ring, half_width(grid.z, k), half_width(grid.z, k + 1), 1});
            } else {
                mesh.boundary.push_back(
                    {cell, ring, half_width(grid.z, k), inverse_radius(grid.z[k + 1], middle), 1, 1, 1});
            }
            if (k == 0 && !grid.mirrored) {
                mesh.boundary.push_back(
                    {cell, ring, half_width(grid.z, k), inverse_radius(grid.z[0], middle), 2, 1, -1});
            }
        }
    }
    return mesh;
}

Mesh make_slab(std::span<const double> edges, bool mirrored) {
    const std::size_t n = edges.size() - 1;
    Mesh mesh;
    mesh.sides = {"top"};
    for (std::size_t k = 0; k < n; ++k) {
        mesh.volume.push_back(edges[k + 1] - edges[k]);
        mesh.position.push_back({0, narrow(k), 0});
        if (k + 1 < n) {
            mesh.faces.push_back(
                {narrow(k), narrow(k + 1), 1, half_width(edges, k), half_width(edges, k + 1), 1});
        }
    }
    mesh.boundary.push_back(
        {narrow(n - 1), 1, half_width(edges, n - 1), inverse_radius(edges[n], 0), 0, 1, 1});
    if (!mirrored) {
        mesh.sides.emplace_back("bottom");
        mesh.boundary.push_back({0, 1, half_width(edges, 0), inverse_radius(edges[0], 0), 1, 1, -1});
    }
    return mesh;
}

Mesh make_sphere(std::span<const double> edges) {
    const std::size_t n = edges.size() - 1;
    Mesh mesh;
    mesh.sides = {"outer radius"};
    const auto centre = [&](std::size_t i) {
        return edges[i] > 0 ? std::sqrt(edges[i] * edges[i + 1]) : 0.5 * edges[i + 1];
    };
    for (std::size_t i = 0; i < n; ++i) {
        const double outer = edges[i + 1];
        const double area = 4 * constants::pi * outer * outer;
        mesh.volume.push_back(4 * constants::pi / 3 * (std::pow(outer, 3) - std::pow(edges[i], 3)));
        mesh.position.push_back({narrow(i), 0, 0});
        if (i + 1 < n) {
            mesh.faces.push_back(
                {narrow(i), narrow(i + 1), area, outer - centre(i), centre(i + 1) - outer, 0});
        } else {
            mesh.boundary.push_back(
                {narrow(i), area, (outer - centre(i)) * outer / centre(i), 1 / outer, 0, 0, 1});
        }
    }
    return mesh;
}

std::vector<double>
flow_divergence(const Mesh& mesh, std::span<const double> flow, std::span<const double> boundary_flow) {
    std::vector<double> divergence(mesh.cells(), 0.0);
    for (std::size_t f = 0; f < mesh.faces.size(); ++f) {
        const Face& face = mesh.faces[f];
        divergence[face.first] += face.area * flow[f];
        divergence[face.second] -= face.area * flow[f];
    }
    for (std::size_t f = 0; f < mesh.boundary.size(); ++f) {
        divergence[mesh.boundary[f].cell] += mesh.boundary[f].area * boundary_flow[f];
    }
    for (std::size_t cell = 0; cell < mesh.cells(); ++cell) {
        divergence[cell] /= mesh.volume[cell];
    }
    return divergence;
}

} // namespace aureole::transport
