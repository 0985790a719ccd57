#include "aureole/base/constants.hpp"
#include "aureole/base/error.hpp"
#include "aureole/base/parallel.hpp"
#include "aureole/media/cell_average.hpp"
#include "aureole/media/media.hpp"
#include "aureole/physics/radiation.hpp"
#include "aureole/scenario/formula.hpp"

#include <fmt/format.h>

#include <algorithm>
#include <cmath>

namespace aureole::media {

namespace {

using grid::Geometry;
using grid::Grid;
using grid::GridFile;
using scenario::ProfileKind;
using scenario::Scenario;

struct Loader {
    const Scenario& scenario;
    const Grid& grid;
    const GridFile* file;
    const RunContext& context;

    bool in_file(const std::string& hdu) const { return file != nullptr && file->has(hdu); }

    /// A scalar of the cells: from the file where the scenario says so or says nothing, else from its
    /// profile. Empty where there is none.
    std::vector<float>
    scalar(const std::string& key, const std::string& hdu, const Dimension& dimension) const {
        const auto profile = scenario.profile(key);
        const bool unsaid = !scenario.is_set(key + ".profile");
        if (profile.kind == ProfileKind::file || (unsaid && in_file(hdu))) {
            if (!in_file(hdu)) {
                throw Error(ErrorKind::scenario,
                            fmt::format("{}.profile = \"file\", but {}", key,
                                        file == nullptr ? std::string("the scenario names no input.grid")
                                                        : fmt::format("{} has no HDU {}", file->path, hdu)));
            }
            return read_scalar(*file, hdu, dimension, context);
        }
        if (profile.kind == ProfileKind::none) {
            return {};
        }
        return cell_averages(profile, grid, false, context);
    }
};

/// Unit vector of the ordered field at a point, components as the grid stores them (x, y, z or R, phi, z).
/// Below the plane the vertical part of an X-shaped field turns, so that it points away from the plane on
/// both sides.
std::array<double, 3> direction(const std::string& kind,
                                double pitch,
                                double tilt,
                                double height_scale,
                                double x,
                                double y,
                                double z,
                                Geometry geometry) {
    const double radius = std::hypot(x, y);
    double along_r = 0;
    double along_phi = 0;
    double along_z = 0;
    if (kind == "toroidal") {
        along_phi = 1;
    } else if (kind == "spiral") {
        along_r = std::sin(pitch);
        along_phi = std::cos(pitch);
    } else if (kind == "vertical") {
        along_z = 1;
    } else { // x_shaped: a spiral in the plane that lifts off with height
        const double lift = tilt * (1 - std::exp(-std::abs(z) / height_scale));
        const double side = z < 0 ? -1 : 1;
        along_r = std::sin(pitch) * std::cos(lift) + std::sin(lift) * 0.5;
        along_phi = std::cos(pitch) * std::cos(lift);
        along_z = side * std::sin(lift);
        const double length = std::sqrt(along_r * along_r + along_phi * along_phi + along_z * along_z);
        along_r /= length;
        along_phi /= length;
        along_z /= length;
    }
    if (geometry == Geometry::rz) {
        return {along_r, along_phi, along_z};
    }
    const double c = radius > 0 ? x / radius : 1;
    const double s = radius > 0 ? y / radius : 0;
    return {along_r * c - along_phi * s, along_r * s + along_phi * c, along_z};
}

std::vector<std::array<float, 3>> ordered_field(const Loader& from) {
    const std::string key = "field.ordered";
    const auto profile = from.scenario.profile(key);
    const bool unsaid = !from.scenario.is_set(key + ".profile");
    if (profile.kind == ProfileKind::file || (unsaid && from.in_file("B_VECTOR"))) {
        if (!from.in_file("B_VECTOR")) {
            throw Error(ErrorKind::scenario, key + ".profile = \"file\", but there is no HDU B_VECTOR");
        }
        return read_vector(*from.file, "B_VECTOR", dimension::magnetic_field, from.context);
    }
    if (profile.kind == ProfileKind::none) {
        return {};
    }
    const Grid& grid = from.grid;
    const auto amplitude = cell_averages(profile, grid, true, from.context);
    const std::string kind = from.scenario.text(key + ".direction");
    const double pitch = from.scenario.quantity(key + ".pitch");
    const double tilt = from.scenario.quantity(key + ".tilt");
    const double scale = profile.height > 0 ? profile.height : constants::kiloparsec;
    std::vector<std::array<float, 3>> result(grid.stored_cells());
    for_each_block(from.context, grid.nz(), [&](std::size_t k) {
        std::vector<scenario::Formula> formulas;
        if (kind == "components") {
            for (const char* name : {".formula_x", ".formula_y", ".formula_z"}) {
                formulas.emplace_back(from.scenario.text(key + name),
                                      std::vector<std::string>{"R", "z", "x", "y", "r"});
            }
        }
        const double z = 0.5 * (grid.z[k] + grid.z[k + 1]);
        for (std::size_t j = 0; j < grid.ny(); ++j) {
            for (std::size_t i = 0; i < grid.nx(); ++i) {
                const double x = 0.5 * (grid.x[i] + grid.x[i + 1]);
                const double y = grid.geometry == Geometry::rz ? 0 : 0.5 * (grid.y[j] + grid.y[j + 1]);
                std::array<double, 3> unit{};
                if (formulas.empty()) {
                    unit = direction(kind, pitch, tilt, scale, x, y, z, grid.geometry);
                } else {
                    const double kpc = 1 / constants::kiloparsec;
                    const double radius = std::hypot(x, y);
                    const std::array<double, 5> at{radius * kpc, z * kpc, x * kpc, y * kpc,
                                                   std::hypot(radius, z) * kpc};
                    for (std::size_t c = 0; c < 3; ++c) {
                        unit[c] = formulas[c].eval(at);
                        if (!std::isfinite(unit[c])) {
                            throw Error(ErrorKind::scenario,
                                        fmt::format("{}.formula_{}: found {} at x = {:.4g}, y = {:.4g}, z = "
                                                    "{:.4g} kpc, expected a "
                                                    "finite value",
                                                    key, "xyz"[c], unit[c], at[2], at[3], at[1]));
                        }
                    }
                }
                const std::size_t cell = i + grid.nx() * (j + grid.ny() * k);
                for (std::size_t c = 0; c < 3; ++c) {
                    result[cell][c] = static_cast<float>(unit[c] * static_cast<double>(amplitude[cell]));
                }
            }
        }
    });
    return result;
}

/// A vertical field goes on through the plane, all the other directions mirror.
Parity field_parity(const Loader& from) {
    const bool of_file = from.scenario.profile("field.ordered").kind == ProfileKind::file ||
                         !from.scenario.is_set("field.ordered.profile");
    if (of_file && from.in_file("B_VECTOR")) {
        return from.file->field_parity == "ODD" ? Parity::odd : Parity::even;
    }
    return from.scenario.text("field.ordered.direction") == "vertical" ? Parity::odd : Parity::even;
}

std::vector<Radiation> radiation(const Loader& from) {
    std::vector<Radiation> fields;
    const bool from_file = from.file != nullptr && !from.scenario.is_set("radiation.cmb_temperature");
    const double cmb_temperature =
        from_file ? from.file->cmb_temperature : from.scenario.quantity("radiation.cmb_temperature");
    const bool cmb_in_file =
        from.file != nullptr && from.file->radiation_includes_cmb && from.in_file("RADIATION");
    if (from.scenario.boolean("radiation.cmb") && !cmb_in_file) {
        fields.push_back(
            {"cmb", cmb_temperature, physics::blackbody_energy_density(cmb_temperature), {}, {}, {}});
    }
    for (const std::string& name : from.scenario.names("radiation.component")) {
        const std::string key = "radiation.component." + name;
        Radiation field;
        field.name = name;
        field.temperature = from.scenario.quantity(key + ".temperature");
        const auto profile = from.scenario.profile(key);
        if (profile.kind == ProfileKind::none) {
            continue;
        }
        field.energy_density = cell_averages(profile, from.grid, false, from.context);
        fields.push_back(std::move(field));
    }
    if (from.in_file("RADIATION")) {
        Radiation field;
        field.name = "file";
        field.photon_energy = from.file->axes.at("EPS_PHOTON");
        field.photon_density =
            read_spectra_of_cells(*from.file, "RADIATION", dimension::spectral_density, from.context);
        fields.push_back(std::move(field));
    }
    return fields;
}

} // namespace

Media load_media(const Scenario& scenario,
                 const Grid& grid,
                 const GridFile* file,
                 const RunContext& context) {
    const Loader from{scenario, grid, file, context};
    Media media;
    media.field.ordered = ordered_field(from);
    media.field.random_rms = from.scalar("field.random", "B_TURB", dimension::magnetic_field);
    media.field.parity = field_parity(from);
    media.gas.hi = from.scalar("gas.hi", "GAS_HI", dimension::number_density);
    media.gas.h2 = from.scalar("gas.h2", "GAS_H2", dimension::number_density);
    media.gas.hii = from.scalar("gas.hii", "GAS_HII", dimension::number_density);
    media.gas.electrons = from.scalar("gas.electrons", "N_E", dimension::number_density);
    media.gas.temperature = from.scalar("gas.temperature", "T_E", dimension::temperature);
    media.radiation = radiation(from);
    media.turbulent_speed = from.scalar("turbulence.speed", "V_TURB", dimension::speed);
    media.turbulent_scale = from.scalar("turbulence.scale", "L_TURB", dimension::length);
    if (from.in_file("VELOCITY")) {
        media.velocity = read_vector(*file, "VELOCITY", dimension::speed, context);
    }
    return media;
}

} // namespace aureole::media
