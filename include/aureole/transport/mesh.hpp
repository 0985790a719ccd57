#pragma once

#include "aureole/grid/grid.hpp"

#include <array>
#include <cstddef>
#include <cstdint>
#include <span>
#include <string>
#include <vector>

namespace aureole::transport {

/// A face between two cells. Positive fluxes go from `first` to `second`.
struct Face {
    std::uint32_t first = 0, second = 0;
    double area = 0;                                ///< cm2
    double first_distance = 0, second_distance = 0; ///< cm, from the cell centre to the face
    std::uint32_t axis = 0;                         ///< direction of its normal: 0 R (or r), 1 z
};

/// A face to the outside. Planes and axes of symmetry have none.
struct BoundaryFace {
    std::uint32_t cell = 0;
    double area = 0;           ///< cm2
    double distance = 0;       ///< cm, from the cell centre to the face
    double inverse_radius = 0; ///< x.n/|x|^2 of the outward normal n at the middle x of the face, cm-1
    std::uint32_t side = 0;    ///< index into Mesh::sides
    std::uint32_t axis = 0;
    double orientation = 1; ///< of the outward normal along the axis, +1 or -1
};

/// Cells and their neighbours: all that finite volumes need to know of a geometry.
struct Mesh {
    std::vector<double> volume; ///< [cells] cm3
    std::vector<Face> faces;
    std::vector<BoundaryFace> boundary;
    std::vector<std::string> sides; ///< names of the outer sides
    /// [cells] whole-number position; neighbours differ by at most 1 in each. Gives the order of elimination.
    std::vector<std::array<std::uint32_t, 3>> position;

    std::size_t cells() const { return volume.size(); }
};

/// Mesh of an axisymmetric grid, cell i + nR k, centres halfway between the edges. Sides: "outer radius",
/// "top" and, unless the grid is mirrored, "bottom". On a mirrored grid all is of one side, and no flux
/// passes z = 0. Throws Error(input) for another geometry.
Mesh make_mesh(const grid::Grid& grid);

/// Plane-parallel layer of unit area with faces at ascending `edges` [cm]. Mirrored: no flux through the
/// first face. Sides: "top" and, unless mirrored, "bottom".
Mesh make_slab(std::span<const double> edges, bool mirrored);

/// Shells between ascending radii `edges` [cm], the first of which may be > 0: no flux passes it. Centres at
/// sqrt(r1 r2), for which a 1/r density is exact on geometric edges (at half the radius in a first cell that
/// reaches the origin), the outer side's distance being stretched to that end. Side: "outer radius".
Mesh make_sphere(std::span<const double> edges);

/// Divergence of a flow given by its normal component on all faces [cm s-1] -> [cells] s-1: what the
/// adiabatic term needs so that gas and particles agree.
std::vector<double>
flow_divergence(const Mesh& mesh, std::span<const double> flow, std::span<const double> boundary_flow);

} // namespace aureole::transport
