#include "maps/camera.hpp"

#include "aureole/base/error.hpp"

#include <fmt/format.h>

#include <cmath>

namespace aureole::maps {

namespace {

using sight::Vec3;

double product(const Vec3& a, const Vec3& b) {
    return a[0] * b[0] + a[1] * b[1] + a[2] * b[2];
}

Vec3 sum(double a, const Vec3& first, double b, const Vec3& second) {
    return {a * first[0] + b * second[0], a * first[1] + b * second[1], a * first[2] + b * second[2]};
}

/// cos(90 deg) is 6e-17 in double; such rests would turn an edge-on view into one that crosses the planes.
Vec3 without_rests(Vec3 direction) {
    for (double& component : direction) {
        component = std::abs(component) < 1e-15 ? 0.0 : component;
    }
    return direction;
}

bool is_perspective(const Camera& camera) {
    return camera.projection == sight::Projection::perspective;
}

} // namespace

Camera make_camera(const sight::View& view, const PixelGrid& pixels) {
    if (!(view.distance > 0) || !std::isfinite(view.distance)) {
        throw Error(ErrorKind::scenario,
                    fmt::format("view: found a distance of {} cm, expected one > 0", view.distance));
    }
    if (!(pixels.pixel_area() > 0) || !std::isfinite(pixels.pixel_area())) {
        throw Error(ErrorKind::scenario,
                    fmt::format("map: found pixels of {} by {} rad, expected steps other than 0",
                                pixels.step_x, pixels.step_y));
    }
    Camera camera{pixels, view.projection, view.distance, {}, {}, {}, {}, {}};
    camera.away = without_rests(to_galaxy(view, {0, 0, 1}));
    const auto galaxy = [&](double east, double north) {
        const auto seen = from_sky(view, east, north);
        return without_rests(to_galaxy(view, {seen[0], seen[1], 0}));
    };
    const Vec3 east = galaxy(1, 0);
    const Vec3 north = galaxy(0, 1);
    // Greisen & Calabretta 2002, eq. 1: the matrix turns pixel offsets, then each axis has its step.
    const double cosine = std::cos(pixels.rotation);
    const double sine = std::sin(pixels.rotation);
    const double step_east = pixels.step_x * view.distance;
    const double step_north = pixels.step_y * view.distance;
    camera.along_x = sum(cosine * step_east, east, sine * step_north, north);
    camera.along_y = sum(-sine * step_east, east, cosine * step_north, north);
    camera.to_x = sum(cosine / step_east, east, sine / step_north, north);
    camera.to_y = sum(-sine / step_east, east, cosine / step_north, north);
    return camera;
}

sight::Ray sight_line(const Camera& camera, double x, double y) {
    const Vec3 offset =
        sum(x - camera.pixels.centre_x, camera.along_x, y - camera.pixels.centre_y, camera.along_y);
    sight::Ray ray;
    if (!is_perspective(camera)) {
        ray.origin = offset;
        ray.direction = camera.away;
        return ray;
    }
    const double slope_squared = product(offset, offset) / (camera.distance * camera.distance);
    const double squared = 1 + slope_squared;
    ray.direction =
        sum(1 / std::sqrt(squared), camera.away, 1 / (camera.distance * std::sqrt(squared)), offset);
    ray.origin = sum(1 / squared, offset, -camera.distance * slope_squared / squared, camera.away);
    return ray;
}

std::array<double, 2> project(const Camera& camera, const Vec3& point) {
    double nearer = 1;
    if (is_perspective(camera)) {
        nearer = camera.distance / (camera.distance + product(point, camera.away));
    }
    return {camera.pixels.centre_x + nearer * product(point, camera.to_x),
            camera.pixels.centre_y + nearer * product(point, camera.to_y)};
}

double squared_distance(const Camera& camera, const Vec3& point) {
    const double far = camera.distance * camera.distance;
    return is_perspective(camera)
               ? far + 2 * camera.distance * product(point, camera.away) + product(point, point)
               : far;
}

double pixel_solid_angle(const Camera& camera, double x, double y) {
    if (!is_perspective(camera)) {
        return camera.pixels.pixel_area();
    }
    const Vec3 offset =
        sum(x - camera.pixels.centre_x, camera.along_x, y - camera.pixels.centre_y, camera.along_y);
    const double squared = 1 + product(offset, offset) / (camera.distance * camera.distance);
    return camera.pixels.pixel_area() / (squared * std::sqrt(squared));
}

} // namespace aureole::maps
