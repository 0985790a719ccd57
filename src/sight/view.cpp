#include "aureole/sight/view.hpp"

#include <cmath>

namespace aureole::sight {

Vec3 to_view(const View& view, const Vec3& galaxy) {
    const double turned_x = galaxy[0] * std::cos(view.azimuth) - galaxy[1] * std::sin(view.azimuth);
    const double turned_y = galaxy[0] * std::sin(view.azimuth) + galaxy[1] * std::cos(view.azimuth);
    const double cosine = std::cos(view.inclination);
    const double sine = std::sin(view.inclination);
    return {turned_x, turned_y * cosine + galaxy[2] * sine, turned_y * sine - galaxy[2] * cosine};
}

Vec3 to_galaxy(const View& view, const Vec3& seen) {
    const double cosine = std::cos(view.inclination);
    const double sine = std::sin(view.inclination);
    const double turned_y = seen[1] * cosine + seen[2] * sine;
    return {seen[0] * std::cos(view.azimuth) + turned_y * std::sin(view.azimuth),
            -seen[0] * std::sin(view.azimuth) + turned_y * std::cos(view.azimuth),
            seen[1] * sine - seen[2] * cosine};
}

std::array<double, 2> to_sky(const View& view, double x, double y) {
    const double cosine = std::cos(view.position_angle);
    const double sine = std::sin(view.position_angle);
    return {x * sine + y * cosine, x * cosine - y * sine};
}

std::array<double, 2> from_sky(const View& view, double east, double north) {
    // The matrix is symmetric and orthogonal: its own inverse.
    return to_sky(view, east, north);
}

} // namespace aureole::sight
