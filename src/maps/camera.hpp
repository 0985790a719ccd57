#pragma once

#include "aureole/maps/image.hpp"
#include "aureole/sight/trace.hpp"
#include "aureole/sight/view.hpp"

#include <array>

namespace aureole::maps {

/// Pixels and sight lines of a view. Positions on the map are pixel coordinates, whole numbers at pixel
/// centres.
struct Camera {
    PixelGrid pixels;
    sight::Projection projection = sight::Projection::orthographic;
    double distance = 0;
    sight::Vec3 away{};               ///< unit vector from the observer to the galaxy's centre
    sight::Vec3 along_x{}, along_y{}; ///< cm at the galaxy's centre per pixel
    sight::Vec3 to_x{}, to_y{};       ///< pixels per cm at the galaxy's centre
};

/// Throws Error(scenario) for a distance that is not positive.
Camera make_camera(const sight::View& view, const PixelGrid& pixels);

/// The sight line through a place on the map, from its point closest to the galaxy's centre. Orthographic
/// lines are parallel; perspective ones come from the observer along (xi, eta, 1), xi and eta being the
/// tangent-plane offsets.
sight::Ray sight_line(const Camera& camera, double x, double y);

/// Where a point of the galaxy, cm, is seen on the map.
std::array<double, 2> project(const Camera& camera, const sight::Vec3& point);

/// Squared distance from the observer, cm2; orthographic: of the galaxy's centre.
double squared_distance(const Camera& camera, const sight::Vec3& point);

/// Solid angle of a pixel, sr.
double pixel_solid_angle(const Camera& camera, double x, double y);

} // namespace aureole::maps
