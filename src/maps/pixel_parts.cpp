#include "maps/pixel_parts.hpp"

#include <algorithm>
#include <cmath>

namespace aureole::maps {

namespace {

struct Corner {
    double x, y;
};
using Polygon = std::vector<Corner>;

/// Part of a convex polygon where sign * (per_x x + per_y y + offset - edge) >= 0.
Polygon clipped(const Polygon& polygon, const FaceLines& lines, double edge, double sign) {
    const auto height = [&](const Corner& corner) {
        return sign * (lines.per_x * corner.x + lines.per_y * corner.y + lines.offset - edge);
    };
    Polygon result;
    for (std::size_t i = 0; i < polygon.size(); ++i) {
        const Corner& from = polygon[i];
        const Corner& to = polygon[i + 1 < polygon.size() ? i + 1 : 0];
        const double start = height(from);
        const double end = height(to);
        if (start >= 0) {
            result.push_back(from);
        }
        if ((start >= 0) != (end >= 0)) {
            const double share = start / (start - end);
            result.push_back({from.x + share * (to.x - from.x), from.y + share * (to.y - from.y)});
        }
    }
    return result;
}

/// Centroid and area, by triangles from the first corner.
Place centroid(const Polygon& polygon) {
    Place sum{0, 0, 0};
    for (std::size_t i = 1; i + 1 < polygon.size(); ++i) {
        const double ax = polygon[i].x - polygon[0].x;
        const double ay = polygon[i].y - polygon[0].y;
        const double bx = polygon[i + 1].x - polygon[0].x;
        const double by = polygon[i + 1].y - polygon[0].y;
        const double area = 0.5 * std::abs(ax * by - ay * bx);
        sum.x += area * (ax + bx) / 3;
        sum.y += area * (ay + by) / 3;
        sum.share += area;
    }
    if (sum.share > 0) {
        sum.x = polygon[0].x + sum.x / sum.share;
        sum.y = polygon[0].y + sum.y / sum.share;
    }
    return sum;
}

/// Cuts along the lines from the `family`-th on.
void cut(const Polygon& polygon,
         const std::vector<FaceLines>& lines,
         std::size_t family,
         std::vector<Place>& places) {
    if (family == lines.size()) {
        const Place place = centroid(polygon);
        if (place.share > 0) {
            places.push_back(place);
        }
        return;
    }
    const FaceLines& faces = lines[family];
    double low = HUGE_VAL;
    double high = -HUGE_VAL;
    for (const Corner& corner : polygon) {
        const double height = faces.per_x * corner.x + faces.per_y * corner.y + faces.offset;
        low = std::min(low, height);
        high = std::max(high, height);
    }
    Polygon rest = polygon;
    auto edge = std::upper_bound(faces.edges.begin(), faces.edges.end(), low);
    for (; edge != faces.edges.end() && *edge < high; ++edge) {
        cut(clipped(rest, faces, *edge, -1), lines, family + 1, places);
        rest = clipped(rest, faces, *edge, 1);
    }
    cut(rest, lines, family + 1, places);
}

/// True if a line of any family crosses the square.
bool is_crossed(const Square& square, const std::vector<FaceLines>& lines, double half) {
    return std::any_of(lines.begin(), lines.end(), [&](const FaceLines& faces) {
        const double middle = faces.per_x * square.x + faces.per_y * square.y + faces.offset;
        const double reach = half * (std::abs(faces.per_x) + std::abs(faces.per_y));
        const auto edge = std::upper_bound(faces.edges.begin(), faces.edges.end(), middle - reach);
        return edge != faces.edges.end() && *edge < middle + reach;
    });
}

} // namespace

std::vector<FaceLines> edge_on_faces(const grid::Cells& cells, const Camera& camera) {
    std::vector<FaceLines> lines;
    if (camera.projection == sight::Projection::perspective) {
        return lines;
    }
    const bool rings = cells.stored.geometry == grid::Geometry::rz;
    const std::vector<double>* edges[3] = {&cells.stored.x, &cells.stored.y, &cells.z};
    for (std::size_t axis = rings ? 2 : 0; axis < 3; ++axis) {
        if (camera.away[axis] == 0) {
            const double per_x = camera.along_x[axis];
            const double per_y = camera.along_y[axis];
            lines.push_back({per_x, per_y, -per_x * camera.pixels.centre_x - per_y * camera.pixels.centre_y,
                             *edges[axis]});
        }
    }
    return lines;
}

Steps steps(const std::vector<FaceLines>& lines) {
    // A line that leaves its column by less than this fraction of a pixel per pixel is straight up.
    constexpr double straight = 1e-12;
    Steps result;
    for (const FaceLines& faces : lines) {
        if (std::abs(faces.per_y) <= straight * std::abs(faces.per_x)) {
            result.along_x = &faces;
        } else if (std::abs(faces.per_x) <= straight * std::abs(faces.per_y)) {
            result.along_y = &faces;
        }
    }
    return result;
}

std::size_t strip(const FaceLines& lines, double x, double y) {
    const double height = lines.per_x * x + lines.per_y * y + lines.offset;
    const auto edge = std::upper_bound(lines.edges.begin(), lines.edges.end(), height);
    return static_cast<std::size_t>(edge - lines.edges.begin());
}

void cut_square(const Square& square, const std::vector<FaceLines>& lines, std::vector<Place>& places) {
    const double half = std::ldexp(0.5, -square.level);
    if (!is_crossed(square, lines, half)) {
        places.assign(1, {square.x, square.y, 1.0});
        return;
    }
    places.clear();
    cut({{square.x - half, square.y - half},
         {square.x + half, square.y - half},
         {square.x + half, square.y + half},
         {square.x - half, square.y + half}},
        lines, 0, places);
    for (Place& place : places) {
        place.share /= 4 * half * half;
    }
}

} // namespace aureole::maps
