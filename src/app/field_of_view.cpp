#include "aureole/app/field_of_view.hpp"

#include "aureole/base/constants.hpp"
#include "aureole/base/error.hpp"
#include "aureole/base/units.hpp"

#include <fmt/format.h>

#include <algorithm>
#include <array>
#include <cmath>

namespace aureole::app {

namespace {

std::optional<maps::Beam> beam_of(double major, double minor, double angle) {
    if (!(major > 0)) {
        return std::nullopt;
    }
    return maps::Beam{major, minor > 0 ? minor : major, angle};
}

/// Half the extent of the grid's projection to the East and to the North, cm.
std::array<double, 2> half_extent(const grid::Grid& grid, const sight::View& view) {
    const double top = std::max(std::abs(grid.z.front()), std::abs(grid.z.back()));
    std::array<double, 2> extent{0, 0};
    const auto add = [&](double x, double y, double z) {
        const auto seen = sight::to_view(view, {x, y, z});
        const auto sky = sight::to_sky(view, seen[0], seen[1]);
        const double nearer = view.projection == sight::Projection::perspective
                                  ? view.distance / std::max(view.distance + seen[2], 1e-3 * view.distance)
                                  : 1;
        for (std::size_t a = 0; a < 2; ++a) {
            extent[a] = std::max(extent[a], std::abs(sky[a]) * nearer);
        }
    };
    for (const double z : {-top, top}) {
        if (grid.geometry == grid::Geometry::rz) {
            constexpr int around = 360;
            for (int a = 0; a < around; ++a) {
                const double azimuth = 2 * constants::pi * a / around;
                add(grid.x.back() * std::cos(azimuth), grid.x.back() * std::sin(azimuth), z);
            }
        } else {
            for (const double x : {grid.x.front(), grid.x.back()}) {
                for (const double y : {grid.y.front(), grid.y.back()}) {
                    add(x, y, z);
                }
            }
        }
    }
    return extent;
}

} // namespace

sight::View scenario_view(const scenario::Scenario& scenario) {
    sight::View view;
    view.inclination = scenario.quantity("view.inclination");
    view.position_angle = scenario.quantity("view.position_angle");
    view.azimuth = scenario.quantity("view.azimuth");
    view.distance = scenario.quantity("view.distance");
    view.projection = scenario.text("view.projection") == "perspective" ? sight::Projection::perspective
                                                                        : sight::Projection::orthographic;
    return view;
}

std::optional<maps::Beam> radio_beam(const scenario::Scenario& scenario) {
    return beam_of(scenario.quantity("radio.beam_major"), scenario.quantity("radio.beam_minor"),
                   scenario.quantity("radio.beam_angle"));
}

std::optional<maps::Beam> gamma_beam(const scenario::Scenario& scenario) {
    return beam_of(scenario.quantity("gamma.beam_major"), 0, 0);
}

maps::PixelGrid
scenario_pixels(const scenario::Scenario& scenario, const grid::Grid& grid, const sight::View& view) {
    if (view.projection == sight::Projection::perspective) {
        const double corner = grid.geometry == grid::Geometry::rz
                                  ? grid.x.back()
                                  : std::hypot(std::max(-grid.x.front(), grid.x.back()),
                                               std::max(-grid.y.front(), grid.y.back()));
        const double half_diagonal = std::hypot(corner, std::max(-grid.z.front(), grid.z.back()));
        if (!(view.distance > half_diagonal)) {
            throw Error(ErrorKind::scenario,
                        fmt::format("view.distance: found {}, inside the grid; expected an observer beyond "
                                    "the grid, farther than {:.4g} kpc",
                                    format_quantity(view.distance, dimension::length),
                                    half_diagonal / constants::kiloparsec));
        }
    }
    const auto extent = half_extent(grid, view);
    const auto radio = radio_beam(scenario);
    const auto gamma = gamma_beam(scenario);
    const double margin = 1.5 * std::max(radio ? radio->major : 0.0, gamma ? gamma->major : 0.0);
    double width = scenario.quantity("map.width");
    double height = scenario.quantity("map.height");
    if (width == 0) {
        width = 2 * (extent[0] / view.distance + margin);
    }
    if (height == 0) {
        height = 2 * (extent[1] / view.distance + margin);
    }
    double pixel = scenario.quantity("map.pixel");
    if (pixel == 0) {
        pixel = radio ? 0.25 * std::min(radio->major, radio->minor) : std::max(width, height) / 256;
    }
    maps::PixelGrid pixels;
    const auto count = [&](double length, const char* key) {
        const double n = std::ceil(length / pixel - 1e-9);
        if (n > 32768) {
            throw Error(ErrorKind::scenario, fmt::format("map.pixel: found {:.4g} arcsec, which makes {:.0f} "
                                                         "pixels along {}, expected at most 32768",
                                                         pixel / constants::arcsecond, n, key));
        }
        return static_cast<std::size_t>(std::max(1.0, n));
    };
    pixels.nx = count(width, "map.width");
    pixels.ny = count(height, "map.height");
    pixels.step_x = -pixel;
    pixels.step_y = pixel;
    pixels.centre_x = 0.5 * (static_cast<double>(pixels.nx) - 1);
    pixels.centre_y = 0.5 * (static_cast<double>(pixels.ny) - 1);
    pixels.lon = scenario.quantity("view.ra");
    pixels.lat = scenario.quantity("view.dec");
    return pixels;
}

} // namespace aureole::app
