#include "aureole/base/constants.hpp"
#include "aureole/sight/trace.hpp"

#include <catch2/catch.hpp>

#include <algorithm>
#include <cmath>
#include <random>

using namespace aureole;
using namespace aureole::sight;
using grid::Cells;
using grid::Geometry;
using grid::Grid;

namespace {

using Real = long double;

Cells stretched_box() {
    return grid::whole_galaxy({Geometry::xyz, grid::stretched_edges(12, 13, 0.3, true),
                               grid::stretched_edges(10, 10, 0, true),
                               grid::stretched_edges(5, 9, 0.1, false), true},
                              1);
}

Cells stretched_cylinder(std::size_t sectors) {
    return grid::whole_galaxy({Geometry::rz,
                               grid::stretched_edges(12, 11, 0.3, false),
                               {},
                               grid::stretched_edges(5, 9, 0.1, false),
                               true},
                              sectors);
}

Vec3 unit(Vec3 vector) {
    const double length = std::hypot(vector[0], vector[1], vector[2]);
    for (double& component : vector) {
        component /= length;
    }
    return vector;
}

/// Moves the origin to the point closest to the grid's centre.
Ray through(const Vec3& point, const Vec3& direction) {
    const double along = point[0] * direction[0] + point[1] * direction[1] + point[2] * direction[2];
    Ray ray;
    ray.direction = direction;
    for (std::size_t axis = 0; axis < 3; ++axis) {
        ray.origin[axis] = point[axis] - along * direction[axis];
    }
    return ray;
}

/// Random rays, rays along axes, through edges and corners, through the axis, tangent to cylinders, nearly
/// parallel to faces.
std::vector<Ray> awkward_rays(const Cells& cells, unsigned seed) {
    std::mt19937_64 random(seed);
    std::uniform_real_distribution<double> even(-1, 1);
    const auto& x = cells.stored.x;
    const auto& y = cells.stored.y.empty() ? x : cells.stored.y;
    const auto pick = [&](const std::vector<double>& edges) { return edges[random() % edges.size()]; };
    std::vector<Vec3> directions{{1, 0, 0},
                                 {0, 1, 0},
                                 {0, 0, 1},
                                 {0, 0, -1},
                                 {-1, 0, 0},
                                 {0, -1, 0},
                                 unit({1, 1, 0}),
                                 unit({1, 0, 1}),
                                 unit({1, -1, 1}),
                                 unit({0, 1, 1e-9}),
                                 unit({1e-12, 1, 0}),
                                 unit({1, 1e-17, 1e-17}),
                                 unit({1e-9, 1e-9, 1})};
    for (int i = 0; i < 60; ++i) {
        directions.push_back(unit({even(random), even(random), even(random)}));
    }
    for (int i = 0; i < 8; ++i) { // along sector planes of 7 and 32
        const double azimuth = 2 * constants::pi * i / (i % 2 == 0 ? 32 : 7);
        directions.push_back(unit({std::cos(azimuth), std::sin(azimuth), i < 4 ? 0.0 : 0.3}));
    }
    std::vector<Ray> rays;
    for (const Vec3& d : directions) {
        for (int i = 0; i < 6; ++i) {
            rays.push_back(through({12 * even(random), 12 * even(random), 5 * even(random)}, d));
            rays.push_back(through({pick(x), pick(y), pick(cells.z)}, d));
            rays.push_back(through({pick(x), pick(y), 0.1 * even(random)}, d));
            rays.push_back(through({0, 0, pick(cells.z)}, d));
            const double across = std::hypot(d[0], d[1]);
            if (across > 0) { // tangent
                const double radius = pick(x);
                rays.push_back(
                    through({-radius * d[1] / across, radius * d[0] / across, 0.3 * even(random)}, d));
            }
        }
    }
    return rays;
}

struct Way {
    Real from = -1e30L, to = 1e30L;
    Real length() const { return std::max(to - from, Real{0}); }
};

void clip(Way& way, Real low, Real high, Real origin, Real direction) {
    if (std::abs(direction) < 1e-30L) {
        if (origin < low || origin >= high) {
            way.to = -1e31L;
        }
        return;
    }
    const Real a = (low - origin) / direction;
    const Real b = (high - origin) / direction;
    way.from = std::max(way.from, std::min(a, b));
    way.to = std::min(way.to, std::max(a, b));
}

/// Way through the bounding box or cylinder, in long double; the cylinder's radius times `swell`.
Real bounding_chord(const Cells& cells, const Ray& ray, Real swell) {
    Way way;
    const Real o[3] = {ray.origin[0], ray.origin[1], ray.origin[2]};
    const Real d[3] = {ray.direction[0], ray.direction[1], ray.direction[2]};
    clip(way, cells.z.front(), cells.z.back(), o[2], d[2]);
    const auto& x = cells.stored.x;
    if (cells.stored.geometry == Geometry::xyz) {
        clip(way, x.front(), x.back(), o[0], d[0]);
        clip(way, cells.stored.y.front(), cells.stored.y.back(), o[1], d[1]);
        return way.length();
    }
    const Real a = d[0] * d[0] + d[1] * d[1];
    const Real radius = swell * x.back();
    if (a < 1e-60L) {
        return std::hypot(o[0], o[1]) < radius ? way.length() : 0;
    }
    const Real cross = o[0] * d[1] - o[1] * d[0];
    const Real squared = (radius * radius - cross * cross / a) / a;
    if (squared <= 0) {
        return 0;
    }
    const Real closest = -(o[0] * d[0] + o[1] * d[1]) / a;
    way.from = std::max(way.from, closest - std::sqrt(squared));
    way.to = std::min(way.to, closest + std::sqrt(squared));
    return way.length();
}

/// How far a point lies outside a cell (0 inside), cm; azimuth as arc length.
double distance_outside(const Cells& cells, std::uint32_t index, const Vec3& point) {
    const std::size_t i = index % cells.nx();
    const std::size_t j = index / cells.nx() % cells.n2();
    const std::size_t k = index / (cells.nx() * cells.n2());
    const auto beyond = [](const std::vector<double>& edges, std::size_t cell, double value) {
        return std::max({0.0, edges[cell] - value, value - edges[cell + 1]});
    };
    const double z = beyond(cells.z, k, point[2]);
    if (cells.stored.geometry == Geometry::xyz) {
        return std::max({z, beyond(cells.stored.x, i, point[0]), beyond(cells.stored.y, j, point[1])});
    }
    const double radius = std::hypot(point[0], point[1]);
    const double width = 2 * constants::pi / static_cast<double>(cells.sectors);
    const double off = std::remainder(std::atan2(point[1], point[0]) - width * (static_cast<double>(j) + 0.5),
                                      2 * constants::pi);
    return std::max({z, beyond(cells.stored.x, i, radius), radius * (std::abs(off) - 0.5 * width)});
}

/// How much farther along a ray a crossing lies when a face is moved, where that exceeds 1e-12 in terms of
/// rounding.
double conditioning(const Cells& cells, const Ray& ray) {
    const Vec3& d = ray.direction;
    double smallest = 1;
    const double across[3] = {cells.stored.geometry == Geometry::xyz ? d[0] : std::hypot(d[0], d[1]),
                              cells.stored.geometry == Geometry::xyz ? d[1] : 1, d[2]};
    for (const double component : across) {
        smallest = std::abs(component) > 1e-15 ? std::min(smallest, std::abs(component)) : smallest;
    }
    return std::max(1.0, 1e-3 / smallest);
}

void check_rays(const Cells& cells, unsigned seed) {
    const double diagonal = 2 * std::hypot(12.0, 12.0, 5.0);
    std::vector<Chord> chords;
    std::size_t hits = 0;
    double worst = 0;
    double farthest = 0;
    bool ordered = true;
    bool positive = true;
    for (const Ray& ray : awkward_rays(cells, seed)) {
        trace(cells, ray, chords);
        hits += chords.empty() ? 0 : 1;
        Real sum = 0;
        for (std::size_t c = 0; c < chords.size(); ++c) {
            sum += chords[c].length;
            positive = positive && chords[c].length > 0;
            ordered = ordered && (c == 0 || chords[c].at <= chords[c - 1].at);
            Vec3 middle{};
            for (std::size_t axis = 0; axis < 3; ++axis) {
                middle[axis] = ray.origin[axis] + chords[c].at * ray.direction[axis];
            }
            farthest = std::max(farthest, distance_outside(cells, chords[c].cell, middle));
        }
        // The chord of a tangent ray answers to the root of rounding: it must fit a cylinder 1e-15 wider or
        // narrower.
        const Real excess = sum - bounding_chord(cells, ray, 1 + 1e-15L);
        const Real deficit = bounding_chord(cells, ray, 1 - 1e-15L) - sum;
        const double error = static_cast<double>(std::max({excess, deficit, Real{0}}));
        worst = std::max(worst, error / conditioning(cells, ray));
    }
    CHECK(hits > 1000);
    CHECK(worst < 1e-12 * diagonal);
    CHECK(farthest < 1e-12 * diagonal);
    CHECK(ordered);
    CHECK(positive);
}

} // namespace

TEST_CASE("chords add up to the way through a box, each inside its cell, far end first",
          "[sight][conservation]") {
    check_rays(stretched_box(), 7);
}

TEST_CASE("chords add up to the way through a cylinder, each inside its cell, far end first",
          "[sight][conservation]") {
    for (const std::size_t sectors : {1U, 2U, 3U, 7U, 32U}) {
        INFO("sectors " << sectors);
        check_rays(stretched_cylinder(sectors), 11);
    }
}

TEST_CASE("a ray stays between its ends", "[sight]") {
    std::vector<Chord> whole;
    std::vector<Chord> part;
    for (const Cells& cells : {stretched_box(), stretched_cylinder(7)}) {
        Ray ray = through({0.3, -1.1, 0.2}, unit({0.5, 0.7, 0.3}));
        trace(cells, ray, whole);
        ray.from = -2;
        ray.to = 3.5;
        trace(cells, ray, part);
        double sum = 0;
        for (const Chord& chord : part) {
            sum += chord.length;
            CHECK(chord.at > -2);
            CHECK(chord.at < 3.5);
        }
        CHECK(sum == Approx(5.5).epsilon(1e-14));
        CHECK(part.size() < whole.size());
    }
}

TEST_CASE("a ray along a face belongs to the cells above it, and misses at the last face", "[sight]") {
    const Cells cells = grid::whole_galaxy({Geometry::xyz, {0, 1, 2}, {0, 1, 2}, {0, 1, 2}, false}, 1);
    std::vector<Chord> chords;
    trace(cells, {{1, 1, 1}, {0, 0, 1}}, chords);
    REQUIRE(chords.size() == 2);
    CHECK(chords[0].cell == 1 + 2 * (1 + 2 * 1)); // far end: larger z
    CHECK(chords[1].cell == 1 + 2 * (1 + 2 * 0));
    CHECK(chords[0].length == 1);
    CHECK(chords[0].at == 0.5);
    trace(cells, {{2, 1, 1}, {0, 0, 1}}, chords);
    CHECK(chords.empty());
    trace(cells, {{0, 1, 1}, {0, 0, 1}}, chords);
    CHECK(chords.size() == 2);
}

TEST_CASE("a ray through the axis has the cylinder's chords in two opposite sectors", "[sight]") {
    const Cells cells = stretched_cylinder(8);
    std::vector<Chord> chords;
    const double azimuth = 0.3; // sector 0, behind it sector 4
    trace(cells, {{0, 0, 0.05}, {std::cos(azimuth), std::sin(azimuth), 0}}, chords);
    REQUIRE(chords.size() == 2 * cells.nx());
    for (std::size_t c = 0; c < chords.size(); ++c) {
        const bool far = c < cells.nx();
        const std::size_t ring = far ? cells.nx() - 1 - c : c - cells.nx();
        CHECK(chords[c].cell == ring + cells.nx() * ((far ? 0 : 4) + 8 * 9));
        CHECK(chords[c].length == Approx(cells.stored.x[ring + 1] - cells.stored.x[ring]).epsilon(1e-14));
    }
}

TEST_CASE("rays over the sky reproduce the volume of every cell", "[sight][conservation]") {
    const View view{70 * constants::degree, 0, 0.4, 1, Projection::orthographic};
    for (const std::size_t sectors : {0U, 1U, 5U}) {
        INFO("sectors " << sectors << " (0: box)");
        const Cells cells =
            sectors == 0 ? grid::whole_galaxy(
                               {Geometry::xyz, {-4, -1, 0, 2, 5}, {-3, 1, 4}, {-2, 0, 0.5, 3}, false}, 1)
                         : grid::whole_galaxy({Geometry::rz, {0, 1, 2.5, 6}, {}, {0, 0.5, 3}, true}, sectors);
        const Tracer tracer = make_tracer(cells);
        std::vector<Chord> chords(tracer.longest);
        std::vector<double> volume(cells.size(), 0.0);
        const int rays = 400;
        const double step = 16.0 / rays;
        for (int j = 0; j < rays; ++j) {
            for (int i = 0; i < rays; ++i) {
                const double x = step * (i + 0.5) - 8;
                const double y = step * (j + 0.5) - 8;
                const std::size_t count =
                    trace(tracer, {to_galaxy(view, {x, y, 0}), to_galaxy(view, {0, 0, 1})}, chords.data());
                for (std::size_t c = 0; c < count; ++c) {
                    volume[chords[c].cell] += chords[c].length * step * step;
                }
            }
        }
        const auto expected = grid::cell_volumes(cells);
        for (std::size_t c = 0; c < cells.size(); ++c) {
            INFO("cell " << c);
            // Pixel-centre sampling of a convex body some 25 rays across or more, whose border has random
            // errors.
            CHECK(volume[c] == Approx(expected[c]).epsilon(3e-3));
        }
    }
}
