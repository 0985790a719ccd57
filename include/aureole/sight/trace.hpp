#pragma once

#include "aureole/grid/cells.hpp"
#include "aureole/sight/view.hpp"

#include <array>
#include <cstddef>
#include <cstdint>
#include <limits>
#include <vector>

namespace aureole::sight {

/// A sight line in the galaxy frame: the points origin + t direction, from <= t <= to [cm]. `direction` is a
/// unit vector that points from the observer into the sky, so that t grows away from the observer. For
/// precision `origin` should be the point closest to the grid's centre, not the observer.
struct Ray {
    Vec3 origin{}, direction{};
    double from = -std::numeric_limits<double>::infinity();
    double to = std::numeric_limits<double>::infinity();
};

/// The part of a ray inside one cell. `at` is the t of its middle, from which position and azimuth follow.
struct Chord {
    std::uint32_t cell = 0; ///< index as in grid::Cells
    double length = 0;      ///< cm, > 0
    double at = 0;          ///< cm
};

/// What all rays through one grid share.
struct Tracer {
    grid::Geometry geometry = grid::Geometry::xyz;
    std::vector<double> x, y, z; ///< edges, cm; x holds R and y is empty for RZ
    std::size_t sectors = 1;
    std::vector<std::array<double, 2>> sector_edge; ///< (cos, sin) of 2 pi j / sectors
    std::size_t longest = 0;                        ///< no ray has more chords
};

/// Throws Error(runtime) if the cells are too many for the index of a Chord.
Tracer make_tracer(const grid::Cells& cells);

/// Writes the chords of a ray, far end first, and returns their number. `chords` has room for tracer.longest.
/// Crossings are taken from the edge arrays, each by itself, so the lengths add up to the way through the
/// grid within 1e-12 of its diagonal (a ray tangent to the outer cylinder: to the way through a cylinder
/// 1e-15 wider or narrower; at less than 1e-3 rad to a face: 1e-15 / angle). Sector planes of an RZ grid are
/// crossings too. A ray inside a face belongs to the cells above the face (half-open cells), inside a sector
/// plane to either side; inside the last face of an axis it misses the grid. Chords of length 0 are left out.
/// Does not throw. Source  Amanatides & Woo 1987, Eurographics '87, p. 3, with the crossings computed anew
/// instead of added up.
std::size_t trace(const Tracer& tracer, const Ray& ray, Chord* chords);

/// The same for a single ray; `chords` is replaced.
void trace(const grid::Cells& cells, const Ray& ray, std::vector<Chord>& chords);

} // namespace aureole::sight
