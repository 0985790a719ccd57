#include "aureole/transport/corner_tensor.hpp"

#include "aureole/base/constants.hpp"
#include "aureole/base/error.hpp"

namespace aureole::transport {
namespace {

/// One axis of a corner: the cells on both sides (the same cell twice at an edge of the grid), the distance
/// of their centres (0: no derivative) and the shares of the dual cell that lie on either side.
struct Neighbours {
    std::size_t low = 0, high = 0;
    double low_centre = 0, high_centre = 0;
};

Neighbours neighbours(const std::vector<double>& edges, std::size_t corner) {
    const std::size_t n = edges.size() - 1;
    const auto centre = [&](std::size_t i) { return 0.5 * (edges[i] + edges[i + 1]); };
    Neighbours two;
    two.low = corner == 0 ? 0 : corner - 1;
    two.high = corner == n ? n - 1 : corner;
    two.low_centre = corner == 0 ? edges[0] : centre(two.low);
    two.high_centre = corner == n ? edges[n] : centre(two.high);
    return two;
}

} // namespace

std::vector<Corner> make_corners(const grid::Grid& grid) {
    if (grid.geometry != grid::Geometry::rz) {
        throw Error(ErrorKind::input, "transport: found an XYZ grid, expected an RZ grid");
    }
    const std::size_t nr = grid.nx();
    const std::size_t nz = grid.nz();
    std::vector<Corner> corners;
    corners.reserve((nr + 1) * (nz + 1));
    for (std::size_t k = 0; k <= nz; ++k) {
        const Neighbours z = neighbours(grid.z, k);
        const double below = (grid.z[k] - z.low_centre) / (z.high_centre - z.low_centre);
        for (std::size_t i = 0; i <= nr; ++i) {
            const Neighbours r = neighbours(grid.x, i);
            const double edge = grid.x[i];
            const double whole = r.high_centre * r.high_centre - r.low_centre * r.low_centre;
            const double inside = (edge * edge - r.low_centre * r.low_centre) / whole;
            Corner corner;
            corner.volume = constants::pi * whole * (z.high_centre - z.low_centre);
            corner.radius = edge;
            corner.height = grid.z[k];
            const std::array<std::size_t, 2> columns{r.low, r.high};
            const std::array<std::size_t, 2> rows{z.low, z.high};
            const std::array<double, 2> column_share{inside, 1 - inside};
            const std::array<double, 2> row_share{below, 1 - below};
            for (std::size_t a = 0; a < 2; ++a) {
                for (std::size_t b = 0; b < 2; ++b) {
                    const std::size_t place = b + 2 * a;
                    corner.cell[place] = static_cast<std::uint32_t>(columns[b] + nr * rows[a]);
                    if (r.low != r.high) {
                        corner.radial[place] =
                            (b == 0 ? -1.0 : 1.0) * row_share[a] / (r.high_centre - r.low_centre);
                    }
                    if (z.low != z.high) {
                        corner.vertical[place] =
                            (a == 0 ? -1.0 : 1.0) * column_share[b] / (z.high_centre - z.low_centre);
                    }
                }
            }
            corners.push_back(corner);
        }
    }
    return corners;
}

} // namespace aureole::transport
