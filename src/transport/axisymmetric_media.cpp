#include "aureole/transport/axisymmetric_media.hpp"

#include "aureole/base/constants.hpp"
#include "aureole/base/error.hpp"
#include "aureole/transport/self_confinement.hpp"

#include <fmt/format.h>

#include <algorithm>
#include <cmath>
#include <map>

namespace aureole::transport {
namespace {

using grid::Geometry;
using grid::Grid;

/// The part of a column of cells (of a stored plane) that lies in one ring, and its mean direction.
struct Piece {
    std::size_t column = 0, ring = 0;
    double area = 0;
    double cosine = 1, sine = 0; ///< of the azimuth; of an RZ grid components are R, phi, z already
};

struct Rings {
    const Grid& from;
    Grid to;
    std::vector<Piece> pieces;
    std::vector<std::size_t> layer; ///< plane of `to` that a plane of `from` lies in
    std::vector<double> volume;     ///< [cells of `to`] covered by pieces, cm3
};

std::size_t cell_of(const std::vector<double>& edges, double at) {
    const auto above = std::upper_bound(edges.begin(), edges.end(), at);
    const auto index = static_cast<std::size_t>(std::max<std::ptrdiff_t>(above - edges.begin() - 1, 0));
    return std::min(index, edges.size() - 2);
}

void cut_column(const Grid& grid, const Grid& rings, std::size_t i, std::size_t j, std::vector<Piece>& out) {
    constexpr int lines = 12;
    const double dx = (grid.x[i + 1] - grid.x[i]) / lines;
    const double dy = (grid.y[j + 1] - grid.y[j]) / lines;
    std::map<std::size_t, Piece> parts;
    for (int b = 0; b < lines; ++b) {
        const double y = grid.y[j] + (b + 0.5) * dy;
        for (int a = 0; a < lines; ++a) {
            const double x = grid.x[i] + (a + 0.5) * dx;
            const double radius = std::hypot(x, y);
            Piece& part = parts.try_emplace(cell_of(rings.x, radius), Piece{0, 0, 0, 0, 0}).first->second;
            part.area += dx * dy;
            if (radius > 0) {
                part.cosine += x / radius;
                part.sine += y / radius;
            }
        }
    }
    for (auto& [ring, part] : parts) {
        part.column = i + grid.nx() * j;
        part.ring = ring;
        const double length = std::hypot(part.cosine, part.sine);
        part.cosine = length > 0 ? part.cosine / length : 1;
        part.sine = length > 0 ? part.sine / length : 0;
        out.push_back(part);
    }
}

Rings make_rings(const Grid& grid) {
    Rings rings{.from = grid, .to = axisymmetric_grid(grid), .pieces = {}, .layer = {}, .volume = {}};
    for (std::size_t j = 0; j < grid.ny(); ++j) {
        for (std::size_t i = 0; i < grid.nx(); ++i) {
            if (grid.geometry == Geometry::rz) {
                const double area = constants::pi * (grid.x[i + 1] - grid.x[i]) * (grid.x[i + 1] + grid.x[i]);
                rings.pieces.push_back({i, i, area, 1, 0});
            } else {
                cut_column(grid, rings.to, i, j, rings.pieces);
            }
        }
    }
    rings.volume.assign(rings.to.stored_cells(), 0.0);
    for (std::size_t k = 0; k < grid.nz(); ++k) {
        rings.layer.push_back(cell_of(rings.to.z, 0.5 * (grid.z[k] + grid.z[k + 1])));
        for (const Piece& piece : rings.pieces) {
            rings.volume[piece.ring + rings.to.nx() * rings.layer[k]] +=
                piece.area * (grid.z[k + 1] - grid.z[k]);
        }
    }
    return rings;
}

/// Averages of value(stored cell, piece) over rings.
template <class Value> std::vector<double> averages(const Rings& rings, Value&& value) {
    std::vector<double> sum(rings.volume.size(), 0.0);
    for (std::size_t k = 0; k < rings.layer.size(); ++k) {
        const double thickness = rings.from.z[k + 1] - rings.from.z[k];
        for (const Piece& piece : rings.pieces) {
            const std::size_t ring = piece.ring + rings.to.nx() * rings.layer[k];
            const std::size_t cell = piece.column + rings.from.plane_cells() * k;
            sum[ring] += piece.area * thickness / rings.volume[ring] * value(cell, piece);
        }
    }
    return sum;
}

std::vector<double>
scalar(const Rings& rings, const std::vector<float>& values, std::size_t stride = 1, std::size_t offset = 0) {
    if (values.empty()) {
        return {};
    }
    return averages(rings, [&](std::size_t cell, const Piece&) {
        return static_cast<double>(values[cell * stride + offset]);
    });
}

using Vectors = std::vector<std::array<float, 3>>;

double radial_part(const Vectors& v, std::size_t cell, const Piece& piece) {
    return static_cast<double>(v[cell][0]) * piece.cosine + static_cast<double>(v[cell][1]) * piece.sine;
}

double square(const Vectors& v, std::size_t cell) {
    double sum = 0;
    for (const float part : v[cell]) {
        sum += static_cast<double>(part) * static_cast<double>(part);
    }
    return sum;
}

template <class Value> Unevenness unevenness(const Rings& rings, Value&& value) {
    if (rings.from.geometry == Geometry::rz) {
        return {};
    }
    const auto mean = averages(rings, [&](std::size_t cell, const Piece&) { return value(cell); });
    const auto mean_square =
        averages(rings, [&](std::size_t cell, const Piece&) { return value(cell) * value(cell); });
    double volume = 0;
    double amount = 0;
    double by_volume = 0;
    double by_amount = 0;
    for (std::size_t ring = 0; ring < mean.size(); ++ring) {
        if (!(mean[ring] > 0)) {
            continue;
        }
        const double relative = std::max(0.0, mean_square[ring] / (mean[ring] * mean[ring]) - 1);
        volume += rings.volume[ring];
        by_volume += rings.volume[ring] * relative;
        amount += rings.volume[ring] * mean[ring];
        by_amount += rings.volume[ring] * mean[ring] * relative;
    }
    return {volume > 0 ? std::sqrt(by_volume / volume) : 0, amount > 0 ? std::sqrt(by_amount / amount) : 0};
}

void average_field(const Rings& rings, const media::Field& field, AxisymmetricMedia& out) {
    const bool has_ordered = !field.ordered.empty();
    const bool has_random = !field.random_rms.empty();
    const auto random = [&](std::size_t cell) {
        const double rms = has_random ? static_cast<double>(field.random_rms[cell]) : 0.0;
        return rms * rms;
    };
    const auto total = [&](std::size_t cell) {
        return random(cell) + (has_ordered ? square(field.ordered, cell) : 0.0);
    };
    const auto rms = [](std::vector<double> squares) {
        for (double& value : squares) {
            value = std::sqrt(value);
        }
        return squares;
    };
    if (has_ordered || has_random) {
        out.field = rms(averages(rings, [&](std::size_t cell, const Piece&) { return total(cell); }));
        out.of_field_energy = unevenness(rings, total);
    }
    if (!has_ordered) {
        return;
    }
    const auto& b = field.ordered;
    out.ordered_field = rms(averages(rings, [&](std::size_t cell, const Piece&) { return square(b, cell); }));
    const auto rr = averages(rings, [&](std::size_t cell, const Piece& piece) {
        return std::pow(radial_part(b, cell, piece), 2);
    });
    const auto rz = averages(rings, [&](std::size_t cell, const Piece& piece) {
        return radial_part(b, cell, piece) * static_cast<double>(b[cell][2]);
    });
    const auto zz = averages(
        rings, [&](std::size_t cell, const Piece&) { return std::pow(static_cast<double>(b[cell][2]), 2); });
    for (std::size_t cell = 0; cell < rr.size(); ++cell) {
        const double whole = out.ordered_field[cell] * out.ordered_field[cell];
        out.alignment.push_back(whole > 0 ? std::array{rr[cell] / whole, rz[cell] / whole, zz[cell] / whole}
                                          : std::array{0.0, 0.0, 0.0});
    }
}

void average_radiation(const Rings& rings, const media::Media& media, AxisymmetricMedia& out) {
    for (const media::Radiation& from : media.radiation) {
        RingRadiation to{.name = from.name,
                         .temperature = from.temperature,
                         .uniform_density = from.uniform_density,
                         .energy_density = scalar(rings, from.energy_density),
                         .photon_energy = from.photon_energy,
                         .photon_density = {}};
        const std::size_t nodes = from.photon_energy.size();
        if (!from.photon_density.empty()) {
            to.photon_density.resize(out.grid.stored_cells() * nodes);
            for (std::size_t node = 0; node < nodes; ++node) {
                const auto mean = scalar(rings, from.photon_density, nodes, node);
                for (std::size_t cell = 0; cell < mean.size(); ++cell) {
                    to.photon_density[cell * nodes + node] = mean[cell];
                }
            }
        }
        out.radiation.push_back(std::move(to));
    }
    out.of_radiation = unevenness(rings, [&](std::size_t cell) {
        double sum = 0;
        for (const media::Radiation& one : media.radiation) {
            sum += one.uniform_density;
            sum += one.energy_density.empty() ? 0.0 : static_cast<double>(one.energy_density[cell]);
            const auto& e = one.photon_energy;
            for (std::size_t i = 1; i < e.size() && !one.photon_density.empty(); ++i) {
                const auto at = [&](std::size_t node) {
                    return e[node] * static_cast<double>(one.photon_density[cell * e.size() + node]);
                };
                sum += 0.5 * (at(i - 1) + at(i)) * (e[i] - e[i - 1]);
            }
        }
        return sum;
    });
}

double value_or_zero(const std::vector<float>& values, std::size_t cell) {
    return values.empty() ? 0.0 : static_cast<double>(values[cell]);
}

/// Where a point lies between the centres of cells: the cell below and the weight of the next.
std::pair<std::size_t, double> between(const std::vector<double>& edges, double at) {
    const auto centre = [&](std::size_t i) { return 0.5 * (edges[i] + edges[i + 1]); };
    const std::size_t cell = cell_of(edges, at);
    const std::size_t cells = edges.size() - 1;
    const std::size_t low = at < centre(cell) && cell > 0 ? cell - 1 : cell;
    if (low + 1 >= cells) {
        return {cells - 1, 0.0};
    }
    return {low, std::clamp((at - centre(low)) / (centre(low + 1) - centre(low)), 0.0, 1.0)};
}

} // namespace

Grid axisymmetric_grid(const Grid& grid, std::size_t most_cells) {
    if (grid.geometry == Geometry::rz) {
        return grid;
    }
    if (!(grid.x.front() < 0 && grid.x.back() > 0 && grid.y.front() < 0 && grid.y.back() > 0)) {
        throw Error(
            ErrorKind::input,
            fmt::format("transport: found a box with x from {:.6g} to {:.6g} kpc and y from {:.6g} to "
                        "{:.6g} kpc, expected one around the z axis",
                        grid.x.front() / constants::kiloparsec, grid.x.back() / constants::kiloparsec,
                        grid.y.front() / constants::kiloparsec, grid.y.back() / constants::kiloparsec));
    }
    const double reach_x = std::max(-grid.x.front(), grid.x.back());
    const double reach_y = std::max(-grid.y.front(), grid.y.back());
    const auto& along = reach_x >= reach_y ? grid.x : grid.y;
    const double sign = along.back() >= -along.front() ? 1.0 : -1.0;
    Grid rings{.geometry = Geometry::rz, .x = {0.0}, .y = {}, .z = grid.z, .mirrored = grid.mirrored};
    std::vector<double> away;
    for (const double edge : along) {
        if (sign * edge > 1e-9 * std::max(reach_x, reach_y)) {
            away.push_back(sign * edge);
        }
    }
    std::sort(away.begin(), away.end());
    rings.x.insert(rings.x.end(), away.begin(), away.end());
    const double width = rings.x.back() - rings.x[rings.x.size() - 2];
    const double corner = std::hypot(reach_x, reach_y);
    while (rings.x.back() < corner * (1 - 1e-9)) {
        rings.x.push_back(rings.x.back() + width);
    }
    while (rings.stored_cells() > most_cells) {
        rings = grid::coarsened(rings);
    }
    return rings;
}

AxisymmetricMedia axisymmetric_media(const media::Media& media, const Grid& grid) {
    const Rings rings = make_rings(grid);
    AxisymmetricMedia out;
    out.grid = rings.to;
    average_field(rings, media.field, out);
    out.hi = scalar(rings, media.gas.hi);
    out.h2 = scalar(rings, media.gas.h2);
    out.hii = scalar(rings, media.gas.hii);
    out.electrons = scalar(rings, media.gas.electrons);
    out.temperature = scalar(rings, media.gas.temperature);
    out.turbulent_speed = scalar(rings, media.turbulent_speed);
    out.turbulent_scale = scalar(rings, media.turbulent_scale);
    if (!media.velocity.empty()) {
        out.velocity_r = averages(rings, [&](std::size_t cell, const Piece& piece) {
            return radial_part(media.velocity, cell, piece);
        });
        out.velocity_z = averages(rings, [&](std::size_t cell, const Piece&) {
            return static_cast<double>(media.velocity[cell][2]);
        });
    }
    average_radiation(rings, media, out);
    out.of_gas = unevenness(rings, [&](std::size_t cell) {
        return value_or_zero(media.gas.hi, cell) + value_or_zero(media.gas.h2, cell) +
               value_or_zero(media.gas.hii, cell);
    });
    return out;
}

std::vector<double> hydrogen(const AxisymmetricMedia& media) {
    std::vector<double> sum(media.grid.stored_cells(), 0.0);
    for (const auto* phase : {&media.hi, &media.h2, &media.hii}) {
        for (std::size_t cell = 0; cell < phase->size(); ++cell) {
            sum[cell] += (*phase)[cell];
        }
    }
    return sum;
}

Surroundings surroundings(const Grid& grid, double radius, double height) {
    const auto [i, right] = between(grid.x, radius);
    const auto [k, up] = between(grid.z, grid.mirrored ? std::abs(height) : height);
    const std::size_t next_i = std::min(i + 1, grid.nx() - 1);
    const std::size_t next_k = std::min(k + 1, grid.nz() - 1);
    const auto index = [&](std::size_t a, std::size_t b) {
        return static_cast<std::uint32_t>(a + grid.nx() * b);
    };
    return {{index(i, k), index(next_i, k), index(i, next_k), index(next_i, next_k)},
            {(1 - right) * (1 - up), right * (1 - up), (1 - right) * up, right * up}};
}

double interpolated(std::span<const double> values,
                    const Surroundings& around,
                    std::size_t stride,
                    std::size_t offset) {
    double sum = 0;
    double logarithms = 0;
    bool positive = true;
    for (std::size_t a = 0; a < 4; ++a) {
        if (around.weight[a] == 0) {
            continue;
        }
        const double value = values[around.cell[a] * stride + offset];
        sum += around.weight[a] * value;
        positive = positive && value > 0;
        logarithms += positive ? around.weight[a] * std::log(value) : 0.0;
    }
    return positive ? std::exp(logarithms) : sum;
}

Place place_at(const AxisymmetricMedia& media, double radius, double height, double helium) {
    const Surroundings around = surroundings(media.grid, radius, height);
    const auto value = [&](const std::vector<double>& values) {
        return values.empty() ? std::optional<double>{} : interpolated(values, around);
    };
    Place place;
    place.radius = radius;
    place.height = height;
    place.field = value(media.field);
    place.ordered_field = value(media.ordered_field);
    place.ion_density = value(media.hii);
    place.temperature = value(media.temperature);
    place.turbulent_speed = value(media.turbulent_speed);
    place.turbulent_scale = value(media.turbulent_scale);
    const auto hi = value(media.hi);
    const auto h2 = value(media.h2);
    if (hi || h2) {
        place.neutral_density = hi.value_or(0) + h2.value_or(0);
    }
    if (place.field && place.ion_density) {
        const double speed = *place.ion_density > 0 ? alfven_speed(*place.field, *place.ion_density, helium)
                                                    : (*place.field > 0 ? constants::speed_of_light : 0.0);
        place.alfven_speed = std::min(speed, constants::speed_of_light);
    }
    return place;
}

} // namespace aureole::transport
