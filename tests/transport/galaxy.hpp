#pragma once

#include "aureole/base/constants.hpp"
#include "aureole/base/error.hpp"
#include "aureole/grid/grid.hpp"
#include "aureole/media/media.hpp"
#include "aureole/physics/gyration.hpp"
#include "aureole/physics/radiation.hpp"
#include "aureole/transport/spec.hpp"

#include <array>
#include <cmath>
#include <string>

/// A galaxy like the Milky Way with all media, for tests of the whole solver.
namespace galaxy {

inline constexpr double kpc = aureole::constants::kiloparsec;
inline constexpr double gev = aureole::constants::gigaelectronvolt;
inline constexpr double gigavolt = aureole::physics::gigavolt;
inline constexpr double electronvolt = aureole::constants::electronvolt;

inline aureole::grid::Grid
rings(std::size_t nr, std::size_t nz, double radius = 20 * kpc, double height = 15 * kpc) {
    aureole::grid::Grid grid;
    grid.geometry = aureole::grid::Geometry::rz;
    grid.x = aureole::grid::stretched_edges(radius, nr, 0, false);
    grid.z = aureole::grid::stretched_edges(height, nz, height / static_cast<double>(4 * nz), false);
    grid.mirrored = true;
    return grid;
}

inline aureole::grid::Grid box(std::size_t n, std::size_t nz, double half, double height) {
    aureole::grid::Grid grid;
    grid.geometry = aureole::grid::Geometry::xyz;
    grid.x = aureole::grid::stretched_edges(half, n, 0, true);
    grid.y = grid.x;
    grid.z = aureole::grid::stretched_edges(height, nz, height / static_cast<double>(4 * nz), false);
    grid.mirrored = true;
    return grid;
}

/// Fills media with values at the centres of cells.
inline aureole::media::Media media_on(const aureole::grid::Grid& grid) {
    using aureole::grid::Geometry;
    aureole::media::Media media;
    aureole::media::Radiation cmb{"cmb", 2.7255, aureole::physics::blackbody_energy_density(2.7255),
                                  {},    {},     {}};
    aureole::media::Radiation stars{"stars", 4000, 0, {}, {}, {}};
    aureole::media::Radiation dust{"dust", 30, 0, {}, {}, {}};
    const auto middle = [](const std::vector<double>& edges, std::size_t i) {
        return 0.5 * (edges[i] + edges[i + 1]);
    };
    const bool rz = grid.geometry == Geometry::rz;
    for (std::size_t cell = 0; cell < grid.stored_cells(); ++cell) {
        const double x = middle(grid.x, cell % grid.nx());
        const double y = rz ? 0 : middle(grid.y, cell / grid.nx() % grid.ny());
        const double z = std::abs(middle(grid.z, cell / grid.plane_cells()));
        const double r = std::hypot(x, y);
        const auto put = [](std::vector<float>& to, double value) {
            to.push_back(static_cast<float>(value));
        };
        const double field = 8e-6 * std::exp(-r / (10 * kpc) - z / (4 * kpc));
        const double cosine = rz ? 1 : x / r;
        const double sine = rz ? 0 : y / r;
        const std::array<double, 3> b{0.3 * field, 0.8 * field, 0.2 * field}; // R, phi, z
        media.field.ordered.push_back({static_cast<float>(cosine * b[0] - sine * b[1]),
                                       static_cast<float>(sine * b[0] + cosine * b[1]),
                                       static_cast<float>(b[2])});
        put(media.field.random_rms, field);
        put(media.gas.hi, std::exp(-r / (6 * kpc) - z / (0.2 * kpc)));
        put(media.gas.h2, std::exp(-r / (4 * kpc) - z / (0.1 * kpc)));
        put(media.gas.hii, 0.03 * std::exp(-r / (10 * kpc) - z / (1 * kpc)) + 1e-4);
        put(media.gas.temperature, 1e4);
        put(media.turbulent_speed, 1e6);
        put(media.turbulent_scale, 0.1 * kpc);
        put(stars.energy_density, 1 * electronvolt * std::exp(-r / (5 * kpc) - z / (4 * kpc)));
        put(dust.energy_density, 0.5 * electronvolt * std::exp(-r / (5 * kpc) - z / (3 * kpc)));
    }
    media.radiation = {cmb, stars, dust};
    return media;
}

inline aureole::transport::TransportSpec spec() {
    using namespace aureole::transport;
    TransportSpec spec;
    SourceSpec source;
    source.shape = {.kind = "green_2015", .radius = 0, .width = 0, .height = 0.1 * kpc};
    source.spectrum.slope = 2.3;
    source.spectrum.least_rigidity = 0.5 * gigavolt;
    source.spectrum.cutoff_rigidity = 1e6 * gigavolt;
    source.power = 6e40;
    spec.proton_sources = {source};
    source.power = 1e39;
    source.spectrum.least_rigidity = 0.05 * gigavolt;
    spec.electron_sources = {source};
    spec.energy_from = 0.01 * gev;
    spec.energy_to = 333 * gev;
    return spec;
}

inline aureole::transport::NamedLaw law(const std::string& name) {
    return {.name = name,
            .law = {.name = name, .numbers = {}, .lists = {}, .texts = {}, .children = {}},
            .anchor = {}};
}

} // namespace galaxy
