#pragma once

#include "aureole/base/constants.hpp"
#include "aureole/maps/render.hpp"

#include <array>
#include <cmath>
#include <cstddef>
#include <vector>

/// Emissivities and maps for the tests of rendering; lengths in arbitrary units.
namespace cases {

using aureole::sight::Vec3;

/// Points along one edge of a cell (fractions; along R of the area) that stand for equal shares of it.
inline std::vector<double> points(int count) {
    if (count == 2) {
        return {0.21132486540518712, 0.78867513459481288}; // Gauss
    }
    std::vector<double> fraction;
    for (int i = 0; i < count; ++i) {
        fraction.push_back((i + 0.5) / count);
    }
    return fraction;
}

/// Cell averages of f(point); `count` points per edge. One azimuth per sector.
template <class Function>
aureole::emission::Emissivity
fill(const aureole::grid::Grid& grid, std::size_t sectors, int count, Function&& f) {
    using aureole::grid::Geometry;
    aureole::emission::Emissivity result{
        aureole::grid::whole_galaxy(grid, sectors), std::vector<aureole::emission::Plane>(1), {}};
    const auto& cells = result.cells;
    const auto fractions = points(count);
    const auto between = [](const std::vector<double>& edges, std::size_t i, double share) {
        return edges[i] + share * (edges[i + 1] - edges[i]);
    };
    for (std::size_t k = 0; k < cells.nz(); ++k) {
        for (std::size_t j = 0; j < cells.n2(); ++j) {
            for (std::size_t i = 0; i < cells.nx(); ++i) {
                double sum = 0;
                int number = 0;
                for (const double fz : fractions) {
                    const double z = between(cells.z, k, fz);
                    for (const double fx : fractions) {
                        if (grid.geometry == Geometry::rz) {
                            const double inner = grid.x[i] * grid.x[i];
                            const double radius =
                                std::sqrt(inner + fx * (grid.x[i + 1] * grid.x[i + 1] - inner));
                            const double azimuth = 2 * aureole::constants::pi *
                                                   (static_cast<double>(j) + 0.5) /
                                                   static_cast<double>(cells.sectors);
                            sum += f(Vec3{radius * std::cos(azimuth), radius * std::sin(azimuth), z});
                            ++number;
                            continue;
                        }
                        for (const double fy : fractions) {
                            sum += f(Vec3{between(grid.x, i, fx), between(grid.y, j, fy), z});
                            ++number;
                        }
                    }
                }
                result.value.push_back(static_cast<float>(sum / number));
            }
        }
    }
    return result;
}

inline aureole::grid::Grid
box(double half_width, std::size_t cells, double half_height, std::size_t cells_z) {
    const auto x = aureole::grid::stretched_edges(half_width, cells, 0, true);
    return {aureole::grid::Geometry::xyz, x, x, aureole::grid::stretched_edges(half_height, cells_z, 0, true),
            false};
}

inline aureole::grid::Grid rings(double radius, std::size_t cells, double half_height, std::size_t cells_z) {
    return {aureole::grid::Geometry::rz,
            aureole::grid::stretched_edges(radius, cells, 0, false),
            {},
            aureole::grid::stretched_edges(half_height, cells_z, 0, true),
            false};
}

inline constexpr double distance = 1e4;

/// At position angle 90 deg, X is East and Y is -North; azimuth and inclination in deg.
inline aureole::sight::View view(double inclination, double azimuth = 0, double position_angle = 90) {
    using aureole::constants::degree;
    return {inclination * degree, position_angle * degree, azimuth * degree, distance,
            aureole::sight::Projection::orthographic};
}

/// Square pixels of `size` (length at `distance`), centred; pixel i grows with X at position angle 90 deg, j
/// with Y.
inline aureole::maps::PixelGrid square_map(std::size_t pixels, double size) {
    aureole::maps::PixelGrid grid;
    grid.nx = grid.ny = pixels;
    grid.step_x = size / distance;
    grid.step_y = -size / distance;
    grid.centre_x = grid.centre_y = 0.5 * (static_cast<double>(pixels) - 1);
    return grid;
}

/// One pixel with its centre at (X, Y).
inline aureole::maps::PixelGrid single_pixel(double x, double y, double size) {
    auto grid = square_map(1, size);
    grid.centre_x = -x / size;
    grid.centre_y = -y / size;
    return grid;
}

inline aureole::maps::Rendered render(const aureole::emission::Emissivity& emissivity,
                                      const aureole::sight::View& view,
                                      const aureole::maps::PixelGrid& pixels) {
    aureole::RunContext context;
    context.threads = 2;
    return aureole::maps::render(emissivity, view, pixels, {}, context);
}

/// Relative difference of map + outside and the sum over cells.
inline double flux_miss(const aureole::maps::Rendered& map, std::size_t plane = 0) {
    return std::abs(map.flux[plane] + map.flux_outside[plane] - map.flux_expected[plane]) /
           std::abs(map.flux_expected[plane]);
}

} // namespace cases
