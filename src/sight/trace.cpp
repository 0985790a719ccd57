#include "aureole/sight/trace.hpp"

#include "aureole/base/constants.hpp"
#include "aureole/base/error.hpp"

#include <fmt/format.h>

#include <algorithm>
#include <cmath>

namespace aureole::sight {

namespace {

constexpr double infinity = std::numeric_limits<double>::infinity();

/// A ray this flat moves less than rounding along the axis, on any grid.
constexpr double flat = 1e-30;

/// Part of a ray, from > to where empty.
struct Span {
    double from, to;
};

/// Walks the parallel planes of one axis from far to near. `next` is the t of the next crossing.
struct PlaneWalk {
    const double* edge = nullptr; ///< of the next crossing
    double origin = 0, inverse = 0;
    std::ptrdiff_t step = 0;
    std::ptrdiff_t index = 0; ///< cell along this axis
    double next = -infinity;

    double crossing(double at) const { return (at - origin) * inverse; }
    void advance() {
        edge += step;
        index += step;
        next = crossing(*edge);
    }
};

/// Narrows `span` to the slab between the outermost planes.
Span within(Span span, const std::vector<double>& edges, double origin, double direction) {
    if (std::abs(direction) < flat) {
        const bool inside = origin >= edges.front() && origin < edges.back();
        return inside ? span : Span{infinity, -infinity};
    }
    const double inverse = 1 / direction;
    const double first = (edges.front() - origin) * inverse;
    const double last = (edges.back() - origin) * inverse;
    return {std::max(span.from, std::min(first, last)), std::min(span.to, std::max(first, last))};
}

/// Cell that holds `value`, the nearest one outside the edges.
std::ptrdiff_t cell_of(const std::vector<double>& edges, double value) {
    const auto above = std::upper_bound(edges.begin() + 1, edges.end() - 1, value);
    return above - edges.begin() - 1;
}

/// The walk along one axis from t = far on.
PlaneWalk start_planes(const std::vector<double>& edges, double origin, double direction, double far) {
    PlaneWalk walk;
    walk.origin = origin;
    if (std::abs(direction) < flat) {
        walk.index = cell_of(edges, origin);
        return walk;
    }
    const auto last = static_cast<std::ptrdiff_t>(edges.size()) - 2;
    const double* edge = edges.data();
    walk.inverse = 1 / direction;
    walk.index = cell_of(edges, origin + far * direction);
    // The position is rounded, the crossings decide: the near face lies before `far`, the far face not.
    if (direction > 0) {
        walk.step = -1;
        while (walk.index > 0 && walk.crossing(edge[walk.index]) >= far) {
            --walk.index;
        }
        while (walk.index < last && walk.crossing(edge[walk.index + 1]) < far) {
            ++walk.index;
        }
        walk.edge = edge + walk.index;
    } else {
        walk.step = 1;
        while (walk.index < last && walk.crossing(edge[walk.index + 1]) >= far) {
            ++walk.index;
        }
        while (walk.index > 0 && walk.crossing(edge[walk.index]) < far) {
            --walk.index;
        }
        walk.edge = edge + walk.index + 1;
    }
    walk.next = walk.crossing(*walk.edge);
    return walk;
}

std::size_t trace_box(const Tracer& tracer, const Ray& ray, Chord* chords) {
    const Vec3& o = ray.origin;
    const Vec3& d = ray.direction;
    const Span span = within(within(within({ray.from, ray.to}, tracer.x, o[0], d[0]), tracer.y, o[1], d[1]),
                             tracer.z, o[2], d[2]);
    if (!(span.from < span.to)) {
        return 0;
    }
    PlaneWalk x = start_planes(tracer.x, o[0], d[0], span.to);
    PlaneWalk y = start_planes(tracer.y, o[1], d[1], span.to);
    PlaneWalk z = start_planes(tracer.z, o[2], d[2], span.to);
    const auto nx = static_cast<std::ptrdiff_t>(tracer.x.size()) - 1;
    const auto ny = static_cast<std::ptrdiff_t>(tracer.y.size()) - 1;
    const std::ptrdiff_t y_stride = y.step * nx;
    const std::ptrdiff_t z_stride = z.step * nx * ny;
    std::ptrdiff_t cell = x.index + nx * (y.index + ny * z.index);
    double far = span.to;
    std::size_t count = 0;
    while (true) {
        const double next = std::max(std::max(x.next, y.next), z.next);
        const double near = std::max(next, span.from);
        chords[count] = {static_cast<std::uint32_t>(cell), far - near, 0.5 * (far + near)};
        count += far > near ? 1 : 0;
        if (!(next > span.from)) {
            return count;
        }
        far = next;
        if (x.next == next) {
            x.advance();
            cell += x.step;
        } else if (y.next == next) {
            y.advance();
            cell += y_stride;
        } else {
            z.advance();
            cell += z_stride;
        }
    }
}

/// Walks the cylinders from far to near: inwards to the closest approach to the axis, then outwards.
struct CylinderWalk {
    const std::vector<double>* edges = nullptr;
    double closest = 0; ///< t of the closest approach to the axis
    double impact = 0;  ///< distance from the axis there
    double inverse = 0; ///< 1 / sine of the angle between ray and axis
    std::size_t index = 0;
    bool inwards = true;
    double next = -infinity;

    /// Half the chord of the ray inside the cylinder through an edge; keeps its digits where the ray is
    /// tangent.
    double half_chord(std::size_t edge) const {
        const double radius = (*edges)[edge];
        return radius > impact ? inverse * std::sqrt((radius - impact) * (radius + impact)) : 0.0;
    }
    void find_next() {
        inwards = inwards && (*edges)[index] > impact;
        next = inwards ? closest + half_chord(index) : closest - half_chord(index + 1);
    }
    void advance() {
        index = inwards ? index - 1 : index + 1;
        find_next();
    }
};

CylinderWalk start_cylinders(const CylinderWalk& line, double far) {
    CylinderWalk walk = line;
    const auto& edges = *walk.edges;
    const double along = walk.inverse > 0 ? (far - walk.closest) / walk.inverse : 0.0;
    walk.index = static_cast<std::size_t>(cell_of(edges, std::hypot(walk.impact, along)));
    walk.inwards = far > walk.closest;
    if (walk.inverse == 0) {
        walk.next = -infinity;
    } else {
        walk.find_next();
    }
    return walk;
}

/// Walks the half-planes between azimuth sectors. With L = x dy - y dx and a = dx^2 + dy^2 a ray is at
/// azimuth phi where t - t_closest = (L / a) cot(azimuth of direction - phi); seen from t = infinity on it
/// turns from the azimuth of its direction by 180 deg, downwards for L >= 0. At L = 0 all these planes are
/// crossed on the axis.
struct SectorWalk {
    const std::vector<std::array<double, 2>>* edges = nullptr;
    double dx = 0, dy = 0, closest = 0, scale = 0;
    bool upwards = false;
    std::size_t index = 0;
    double next = -infinity;

    double sine(std::size_t edge) const { return (*edges)[edge][0] * dy - (*edges)[edge][1] * dx; }
    double cosine(std::size_t edge) const { return (*edges)[edge][0] * dx + (*edges)[edge][1] * dy; }
    std::size_t above(std::size_t edge) const { return edge + 1 == edges->size() ? 0 : edge + 1; }
    std::size_t below(std::size_t edge) const { return edge == 0 ? edges->size() - 1 : edge - 1; }
    void find_next() {
        const std::size_t edge = upwards ? above(index) : index;
        const double side = sine(edge);
        next = (upwards ? side < 0 : side > 0) ? closest + scale * (cosine(edge) / side) : -infinity;
    }
    void advance() {
        index = upwards ? above(index) : below(index);
        find_next();
    }
};

/// Sector at azimuth atan2(y, x).
std::size_t sector_of(std::size_t sectors, double x, double y) {
    const double turn = std::atan2(y, x) / (2 * constants::pi);
    const auto count = static_cast<double>(sectors);
    const double sector = std::floor((turn < 0 ? turn + 1 : turn) * count);
    return static_cast<std::size_t>(std::min(sector, count - 1));
}

/// The walk from t = infinity on, as far as `far`.
SectorWalk start_sectors(const Tracer& tracer, const Ray& ray, double closest, double across, double far) {
    SectorWalk walk;
    walk.edges = &tracer.sector_edge;
    const Vec3& o = ray.origin;
    if (tracer.sectors == 1) {
        return walk;
    }
    if (across <= flat * flat) {
        walk.index = sector_of(tracer.sectors, o[0], o[1]);
        return walk;
    }
    walk.dx = ray.direction[0];
    walk.dy = ray.direction[1];
    walk.closest = closest;
    walk.scale = (o[0] * walk.dy - o[1] * walk.dx) / across;
    walk.upwards = walk.scale < 0;
    walk.index = sector_of(tracer.sectors, walk.dx, walk.dy);
    // atan2 is rounded; the half-planes themselves say on which side of them the direction lies.
    const bool front = walk.cosine(walk.index) > 0;
    const bool next_front = walk.cosine(walk.above(walk.index)) > 0;
    const double low = walk.sine(walk.index);
    const double high = walk.sine(walk.above(walk.index));
    if (walk.upwards) {
        if (next_front && high >= 0) {
            walk.index = walk.above(walk.index);
        } else if (front && low < 0) {
            walk.index = walk.below(walk.index);
        }
    } else if (front && low <= 0) {
        walk.index = walk.below(walk.index);
    } else if (next_front && high > 0) {
        walk.index = walk.above(walk.index);
    }
    walk.find_next();
    while (walk.next >= far) {
        walk.advance();
    }
    return walk;
}

std::size_t trace_rings(const Tracer& tracer, const Ray& ray, Chord* chords) {
    const Vec3& o = ray.origin;
    const Vec3& d = ray.direction;
    const double across = d[0] * d[0] + d[1] * d[1];
    CylinderWalk line;
    line.edges = &tracer.x;
    if (across > flat * flat) {
        line.inverse = 1 / std::sqrt(across);
        line.closest = -(o[0] * d[0] + o[1] * d[1]) / across;
        line.impact = std::abs(o[0] * d[1] - o[1] * d[0]) * line.inverse;
    } else {
        line.impact = std::hypot(o[0], o[1]);
    }
    if (!(line.impact < tracer.x.back())) {
        return 0;
    }
    Span span = within({ray.from, ray.to}, tracer.z, o[2], d[2]);
    if (across > flat * flat) {
        const double half = line.half_chord(tracer.x.size() - 1);
        span = {std::max(span.from, line.closest - half), std::min(span.to, line.closest + half)};
    }
    if (!(span.from < span.to)) {
        return 0;
    }
    CylinderWalk rings = start_cylinders(line, span.to);
    SectorWalk sectors = start_sectors(tracer, ray, line.closest, across, span.to);
    PlaneWalk planes = start_planes(tracer.z, o[2], d[2], span.to);
    const std::size_t nx = tracer.x.size() - 1;
    double far = span.to;
    std::size_t count = 0;
    while (true) {
        const double next = std::max(std::max(rings.next, planes.next), sectors.next);
        // Rounding may place a crossing behind the last one: then the cell between has no length.
        const double near = std::min(far, std::max(next, span.from));
        const std::size_t cell =
            rings.index + nx * (sectors.index + tracer.sectors * static_cast<std::size_t>(planes.index));
        chords[count] = {static_cast<std::uint32_t>(cell), far - near, 0.5 * (far + near)};
        count += far > near ? 1 : 0;
        if (!(next > span.from)) {
            return count;
        }
        far = near;
        if (rings.next == next) {
            rings.advance();
        } else if (planes.next == next) {
            planes.advance();
        } else {
            sectors.advance();
        }
    }
}

} // namespace

Tracer make_tracer(const grid::Cells& cells) {
    if (cells.size() > std::numeric_limits<std::uint32_t>::max()) {
        throw Error(ErrorKind::runtime, fmt::format("sight lines: found {} cells, expected at most {}",
                                                    cells.size(), std::numeric_limits<std::uint32_t>::max()));
    }
    Tracer tracer{cells.stored.geometry, cells.stored.x, cells.stored.y, cells.z, 1, {}, 0};
    if (tracer.geometry == grid::Geometry::xyz) {
        tracer.longest = tracer.x.size() + tracer.y.size() + tracer.z.size();
        return tracer;
    }
    tracer.sectors = cells.sectors;
    for (std::size_t j = 0; j < cells.sectors; ++j) {
        const double azimuth =
            2 * constants::pi * static_cast<double>(j) / static_cast<double>(cells.sectors);
        const auto exact = [](double value) { return std::abs(value) < 1e-15 ? 0.0 : value; };
        tracer.sector_edge.push_back({exact(std::cos(azimuth)), exact(std::sin(azimuth))});
    }
    tracer.longest = 2 * tracer.x.size() + tracer.z.size() + tracer.sectors + 2;
    return tracer;
}

std::size_t trace(const Tracer& tracer, const Ray& ray, Chord* chords) {
    return tracer.geometry == grid::Geometry::xyz ? trace_box(tracer, ray, chords)
                                                  : trace_rings(tracer, ray, chords);
}

void trace(const grid::Cells& cells, const Ray& ray, std::vector<Chord>& chords) {
    const Tracer tracer = make_tracer(cells);
    chords.resize(tracer.longest);
    chords.resize(trace(tracer, ray, chords.data()));
}

} // namespace aureole::sight
