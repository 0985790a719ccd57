#pragma once

#include <array>
#include <cstddef>
#include <vector>

namespace aureole::grid {

enum class Geometry {
    xyz, ///< Cartesian
    rz,  ///< axisymmetric about z
};

/// A stretched rectilinear grid. All edges in cm, strictly increasing. The cells *stored* in files and media
/// are those of the edge arrays; a mirrored grid stores z >= 0 only (z.front() == 0) and stands for both
/// sides. Stored cell index:  XYZ  i + nx (j + ny k);   RZ  i + nR k  (i counts R, k counts z).
struct Grid {
    Geometry geometry = Geometry::xyz;
    std::vector<double> x; ///< X edges, or R edges (x.front() == 0) for RZ
    std::vector<double> y; ///< Y edges; empty for RZ
    std::vector<double> z;
    bool mirrored = false;

    std::size_t nx() const { return x.size() - 1; }
    std::size_t ny() const { return y.empty() ? 1 : y.size() - 1; }
    std::size_t nz() const { return z.size() - 1; }
    std::size_t stored_cells() const { return nx() * ny() * nz(); }
    std::size_t plane_cells() const { return nx() * ny(); }
    friend bool operator==(const Grid&, const Grid&) = default;
};

/// Volume of each stored cell [cm3] (one side only on a mirrored grid). Box: dx dy dz; ring: pi (R2^2 - R1^2)
/// dz.
std::vector<double> cell_volumes(const Grid& grid);

/// Throws Error(input) with every problem: fewer than 2 edges, not finite, not increasing, R not starting at
/// 0, mirrored with z.front() != 0.
void validate(const Grid& grid);

/// Every second edge: neighbouring cells joined in pairs along each axis, an odd last cell alone. On a grid
/// of both sides the pairs are counted from the middle outwards where an edge lies at z = 0, so that the
/// plane stays an edge.
Grid coarsened(const Grid& grid);

/// For each stored cell of `grid`, the cell of coarsened(grid) that holds it.
std::vector<std::size_t> coarse_cell(const Grid& grid);

/// Edges 0..extent (or -extent..extent if two_sided), `cells` in all, whose widths grow geometrically from
/// `smallest` at 0. smallest = 0, or not below the width of even cells, gives even cells. Two-sided edges are
/// symmetric to the bit; an odd number of cells has one centred on 0. Throws Error(scenario) unless extent >
/// 0, cells >= 1 and smallest >= 0.
std::vector<double> stretched_edges(double extent, std::size_t cells, double smallest, bool two_sided);

} // namespace aureole::grid
