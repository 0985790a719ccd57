#include "aureole/profiles/geometry.hpp"

#include "aureole/base/error.hpp"

#include <fmt/format.h>

#include <algorithm>
#include <cmath>
#include <numbers>
#include <string>

namespace aureole::profiles {

namespace {

using Point = std::array<double, 2>;

/// Linear map from pixel position to (X, Y) in cm.
struct Frame {
    Point origin{}, along_i{}, along_j{};
};

Point turn(double east, double north, const ProfileSpec& spec) {
    const double sine = std::sin(spec.position_angle);
    const double cosine = std::cos(spec.position_angle);
    return {spec.distance * (east * sine + north * cosine), spec.distance * (east * cosine - north * sine)};
}

Frame frame_of(const maps::PixelGrid& pixels, const ProfileSpec& spec) {
    const double cosine = std::cos(pixels.rotation);
    const double sine = std::sin(pixels.rotation);
    Frame frame;
    frame.along_i = turn(pixels.step_x * cosine, pixels.step_y * sine, spec);
    frame.along_j = turn(-pixels.step_x * sine, pixels.step_y * cosine, spec);
    frame.origin = turn(-spec.centre.east, -spec.centre.north, spec);
    for (std::size_t axis = 0; axis < 2; ++axis) {
        frame.origin[axis] -= pixels.centre_x * frame.along_i[axis] + pixels.centre_y * frame.along_j[axis];
    }
    return frame;
}

/// A convex polygon of few corners; a parallelogram cut by four lines has at most eight.
struct Polygon {
    std::array<Point, 12> corner;
    std::size_t size = 0;
    void add(const Point& point) { corner[size++] = point; }
};

/// The part of the polygon with sign * coordinate <= sign * limit (Sutherland & Hodgman 1974, CACM 17, 32).
Polygon cut(const Polygon& polygon, std::size_t axis, double sign, double limit) {
    Polygon kept;
    for (std::size_t k = 0; k < polygon.size; ++k) {
        const Point& from = polygon.corner[k];
        const Point& to = polygon.corner[(k + 1) % polygon.size];
        const double before = sign * (limit - from[axis]);
        const double after = sign * (limit - to[axis]);
        if (before >= 0) {
            kept.add(from);
        }
        if ((before > 0 && after < 0) || (before < 0 && after > 0)) {
            const double part = before / (before - after);
            kept.add({from[0] + part * (to[0] - from[0]), from[1] + part * (to[1] - from[1])});
        }
    }
    return kept;
}

double area(const Polygon& polygon) {
    double twice = 0;
    for (std::size_t k = 2; k < polygon.size; ++k) {
        const Point& a = polygon.corner[0];
        const Point& b = polygon.corner[k - 1];
        const Point& c = polygon.corner[k];
        twice += (b[0] - a[0]) * (c[1] - a[1]) - (b[1] - a[1]) * (c[0] - a[0]);
    }
    return std::abs(0.5 * twice);
}

double overlap(const Polygon& pixel, const Box& box) {
    Polygon part = cut(pixel, 0, 1, box.x_high);
    part = cut(part, 0, -1, box.x_low);
    part = cut(part, 1, 1, box.y_high);
    return area(cut(part, 1, -1, box.y_low));
}

/// First and last index of the equal cells [low + k step, low + (k+1) step) that [from, to] touches.
std::array<std::ptrdiff_t, 2> touched(double from, double to, double low, double step, std::size_t count) {
    const auto last = static_cast<std::ptrdiff_t>(count) - 1;
    const double first = std::clamp(std::floor((from - low) / step), 0.0, static_cast<double>(count));
    const double final = std::clamp(std::floor((to - low) / step), -1.0, static_cast<double>(last));
    return {static_cast<std::ptrdiff_t>(first), static_cast<std::ptrdiff_t>(final)};
}

struct Layout {
    std::size_t strips = 0, bins = 0;
    double x_low = 0, x_step = 0, y_low = 0, y_step = 0;
};

Layout layout_of(const ProfileSpec& spec, bool whole_only) {
    Layout layout;
    const double width = static_cast<double>(spec.strips) * spec.strip_width;
    layout.strips = whole_only ? 1 : spec.strips;
    layout.x_step = whole_only ? width : spec.strip_width;
    layout.x_low = -0.5 * width;
    const double per_side = std::max(1.0, std::floor(spec.half_range / spec.bin_height * (1 + 1e-9)));
    layout.bins = 2 * static_cast<std::size_t>(per_side);
    layout.y_step = spec.bin_height;
    layout.y_low = -per_side * spec.bin_height;
    return layout;
}

std::vector<Strip> empty_strips(const Layout& layout) {
    std::vector<Strip> strips(layout.strips);
    for (std::size_t s = 0; s < layout.strips; ++s) {
        Strip& strip = strips[s];
        strip.x_low = layout.x_low + static_cast<double>(s) * layout.x_step;
        strip.x_high = layout.x_low + static_cast<double>(s + 1) * layout.x_step;
        for (std::size_t b = 0; b < layout.bins; ++b) {
            const double low = layout.y_low + static_cast<double>(b) * layout.y_step;
            const double high = layout.y_low + static_cast<double>(b + 1) * layout.y_step;
            strip.box.push_back({strip.x_low, strip.x_high, low, high, {}, {}});
        }
    }
    return strips;
}

void refuse_unless(bool good, std::string& problems, const std::string& problem) {
    if (!good) {
        problems += (problems.empty() ? "" : "; ") + problem;
    }
}

} // namespace

SkyOffset offset_of(const maps::PixelGrid& pixels, double lon, double lat) {
    if (pixels.projection != "TAN" && pixels.projection != "SIN") {
        throw Error(
            ErrorKind::input,
            fmt::format("found projection '{}', expected TAN or SIN for a centre given by sky position",
                        pixels.projection));
    }
    const double turn_lon = lon - pixels.lon;
    const double along =
        std::sin(lat) * std::sin(pixels.lat) + std::cos(lat) * std::cos(pixels.lat) * std::cos(turn_lon);
    if (!(along > 0)) {
        throw Error(ErrorKind::input, "the centre lies 90 deg or more from the reference point of the map");
    }
    const double scale = pixels.projection == "TAN" ? 1 / along : 1;
    return {scale * std::cos(lat) * std::sin(turn_lon),
            scale * (std::sin(lat) * std::cos(pixels.lat) -
                     std::cos(lat) * std::sin(pixels.lat) * std::cos(turn_lon))};
}

void check(const ProfileSpec& spec) {
    const auto positive = [](double value) { return std::isfinite(value) && value > 0; };
    const auto at_least_zero = [](double value) { return std::isfinite(value) && value >= 0; };
    std::string problems;
    refuse_unless(positive(spec.distance), problems, fmt::format("distance {} cm is not > 0", spec.distance));
    refuse_unless(at_least_zero(spec.distance_error), problems, "distance error is negative or not finite");
    refuse_unless(spec.strips >= 1, problems, "no strips");
    refuse_unless(positive(spec.strip_width), problems,
                  fmt::format("strip width {} cm is not > 0", spec.strip_width));
    refuse_unless(positive(spec.bin_height), problems,
                  fmt::format("bin height {} cm is not > 0", spec.bin_height));
    refuse_unless(
        std::isfinite(spec.half_range) && spec.half_range >= spec.bin_height * (1 - 1e-9), problems,
        fmt::format("range of heights {} cm holds no bin of {} cm", spec.half_range, spec.bin_height));
    refuse_unless(!(spec.half_range > 1e5 * spec.bin_height), problems, "more than 1e5 bins to a side");
    refuse_unless(spec.least_coverage > 0 && spec.least_coverage <= 1, problems,
                  fmt::format("least coverage {} is not in (0, 1]", spec.least_coverage));
    refuse_unless(!spec.rms || at_least_zero(*spec.rms), problems, "rms is negative or not finite");
    refuse_unless(at_least_zero(spec.calibration_error), problems,
                  "calibration error is negative or not finite");
    refuse_unless(at_least_zero(spec.source_free_height), problems, "source-free height is negative");
    refuse_unless(std::isfinite(spec.background_level), problems, "background level is not finite");
    refuse_unless(std::isfinite(spec.position_angle) && std::isfinite(spec.centre.east) &&
                      std::isfinite(spec.centre.north),
                  problems, "centre or position angle is not finite");
    refuse_unless(spec.inclination >= 0 && spec.inclination <= std::numbers::pi, problems,
                  fmt::format("inclination {} rad is not in [0, pi]", spec.inclination));
    if (!problems.empty()) {
        throw Error(ErrorKind::scenario, "profiles: " + problems);
    }
}

std::array<double, 2>
strip_position(const maps::PixelGrid& pixels, const ProfileSpec& spec, double i, double j) {
    const Frame frame = frame_of(pixels, spec);
    return {frame.origin[0] + i * frame.along_i[0] + j * frame.along_j[0],
            frame.origin[1] + i * frame.along_i[1] + j * frame.along_j[1]};
}

std::vector<Strip> lay_strips(const maps::PixelGrid& pixels, const ProfileSpec& spec, bool whole_only) {
    check(spec);
    if (!spec.mask.empty() && spec.mask.size() != pixels.nx * pixels.ny) {
        throw Error(ErrorKind::input, fmt::format("found a mask of {} pixels, expected {} x {}",
                                                  spec.mask.size(), pixels.nx, pixels.ny));
    }
    const Layout layout = layout_of(spec, whole_only);
    std::vector<Strip> strips = empty_strips(layout);
    const Frame frame = frame_of(pixels, spec);
    const double half_x = 0.5 * (std::abs(frame.along_i[0]) + std::abs(frame.along_j[0]));
    const double half_y = 0.5 * (std::abs(frame.along_i[1]) + std::abs(frame.along_j[1]));
    // Slivers of rounding along shared edges would tie a pixel to a neighbour's box for nothing.
    const double sliver =
        1e-9 * std::abs(frame.along_i[0] * frame.along_j[1] - frame.along_i[1] * frame.along_j[0]);
    for (std::size_t j = 0; j < pixels.ny; ++j) {
        for (std::size_t i = 0; i < pixels.nx; ++i) {
            const std::size_t index = i + pixels.nx * j;
            if (!spec.mask.empty() && spec.mask[index] != 0) {
                continue;
            }
            const double x = frame.origin[0] + static_cast<double>(i) * frame.along_i[0] +
                             static_cast<double>(j) * frame.along_j[0];
            const double y = frame.origin[1] + static_cast<double>(i) * frame.along_i[1] +
                             static_cast<double>(j) * frame.along_j[1];
            const auto across = touched(x - half_x, x + half_x, layout.x_low, layout.x_step, layout.strips);
            const auto up = touched(y - half_y, y + half_y, layout.y_low, layout.y_step, layout.bins);
            if (across[0] > across[1] || up[0] > up[1]) {
                continue;
            }
            Polygon pixel;
            for (const auto& [a, b] :
                 {Point{-0.5, -0.5}, Point{0.5, -0.5}, Point{0.5, 0.5}, Point{-0.5, 0.5}}) {
                pixel.add({x + a * frame.along_i[0] + b * frame.along_j[0],
                           y + a * frame.along_i[1] + b * frame.along_j[1]});
            }
            for (auto s = across[0]; s <= across[1]; ++s) {
                for (auto b = up[0]; b <= up[1]; ++b) {
                    Box& box = strips[static_cast<std::size_t>(s)].box[static_cast<std::size_t>(b)];
                    const double shared = overlap(pixel, box);
                    if (shared > sliver) {
                        box.pixel.push_back(index);
                        box.area.push_back(shared);
                    }
                }
            }
        }
    }
    return strips;
}

BeamCovariance beam_in_strips(const maps::Beam& beam, const ProfileSpec& spec) {
    const double to_sigma = 1 / std::sqrt(8 * std::numbers::ln2);
    const double long_axis = std::pow(beam.major * to_sigma * spec.distance, 2);
    const double short_axis = std::pow(beam.minor * to_sigma * spec.distance, 2);
    // Both angles run from North through East, and Y lies 90 deg past X, so the major axis has (cos, sin) of
    // their difference.
    const double cosine = std::cos(beam.position_angle - spec.position_angle);
    const double sine = std::sin(beam.position_angle - spec.position_angle);
    return {long_axis * cosine * cosine + short_axis * sine * sine, (long_axis - short_axis) * sine * cosine,
            long_axis * sine * sine + short_axis * cosine * cosine};
}

} // namespace aureole::profiles
