#include "maps/flux_budget.hpp"

#include "aureole/base/constants.hpp"
#include "aureole/base/parallel.hpp"
#include "aureole/base/pool.hpp"

#include <algorithm>
#include <cmath>
#include <span>

namespace aureole::maps {

namespace {

using grid::Cells;
using sight::Vec3;

/// Places along one edge of a cell, as fractions of it (of the area, along R).
constexpr std::array<double, 2> gauss{0.21132486540518712, 0.78867513459481288};
constexpr std::array<double, 8> eighths{0.0625, 0.1875, 0.3125, 0.4375, 0.5625, 0.6875, 0.8125, 0.9375};

struct CellIndex {
    std::size_t i, j, k;
};

double between(const std::vector<double>& edges, std::size_t cell, double fraction) {
    return edges[cell] + fraction * (edges[cell + 1] - edges[cell]);
}

/// A ring or the sector of one: azimuths of `count` equal pieces.
struct Azimuths {
    double from, step;
    std::size_t count;
    double middle(std::size_t piece) const { return from + step * (static_cast<double>(piece) + 0.5); }
};

Azimuths azimuths(const Cells& cells, std::size_t sector, std::size_t pieces_of_circle) {
    const double width = 2 * constants::pi / static_cast<double>(cells.sectors);
    const std::size_t count = std::max<std::size_t>(4, pieces_of_circle / cells.sectors);
    return {width * static_cast<double>(sector), width / static_cast<double>(count), count};
}

/// Calls visit(point) for places that stand for equal volumes of a cell.
template <class Visit>
void visit_points(const Cells& cells,
                  CellIndex cell,
                  std::span<const double> fractions,
                  std::size_t pieces_of_circle,
                  Visit&& visit) {
    const auto& x = cells.stored.x;
    if (cells.stored.geometry == grid::Geometry::xyz) {
        for (const double fz : fractions) {
            for (const double fy : fractions) {
                for (const double fx : fractions) {
                    visit(Vec3{between(x, cell.i, fx), between(cells.stored.y, cell.j, fy),
                               between(cells.z, cell.k, fz)});
                }
            }
        }
        return;
    }
    const Azimuths around = azimuths(cells, cell.j, pieces_of_circle);
    const double inner = x[cell.i] * x[cell.i];
    const double area = x[cell.i + 1] * x[cell.i + 1] - inner;
    for (std::size_t piece = 0; piece < around.count; ++piece) {
        const double cosine = std::cos(around.middle(piece));
        const double sine = std::sin(around.middle(piece));
        for (const double fx : fractions) {
            const double radius = std::sqrt(inner + fx * area);
            for (const double fz : fractions) {
                visit(Vec3{radius * cosine, radius * sine, between(cells.z, cell.k, fz)});
            }
        }
    }
}

/// Edges of an upright box.
struct Box {
    double x[2], y[2], z[2];
};

Box box_around(const Cells& cells) {
    const auto& x = cells.stored.x;
    if (cells.stored.geometry == grid::Geometry::rz) {
        return {{-x.back(), x.back()}, {-x.back(), x.back()}, {cells.z.front(), cells.z.back()}};
    }
    const auto& y = cells.stored.y;
    return {{x.front(), x.back()}, {y.front(), y.back()}, {cells.z.front(), cells.z.back()}};
}

Box box_around(const Cells& cells, CellIndex cell) {
    const auto& x = cells.stored.x;
    const auto& z = cells.z;
    if (cells.stored.geometry == grid::Geometry::rz) {
        const double radius = x[cell.i + 1];
        return {{-radius, radius}, {-radius, radius}, {z[cell.k], z[cell.k + 1]}};
    }
    const auto& y = cells.stored.y;
    return {{x[cell.i], x[cell.i + 1]}, {y[cell.j], y[cell.j + 1]}, {z[cell.k], z[cell.k + 1]}};
}

bool on_map(const Camera& camera, const std::array<double, 2>& place) {
    return place[0] >= -0.5 && place[1] >= -0.5 && place[0] < static_cast<double>(camera.pixels.nx) - 0.5 &&
           place[1] < static_cast<double>(camera.pixels.ny) - 0.5;
}

enum class Seen { inside, outside, cut };

/// Where a box is seen; `cut` also where its corners do not tell. Projections keep convex bodies convex.
Seen seen(const Camera& camera, const Box& box) {
    double low[2] = {HUGE_VAL, HUGE_VAL};
    double high[2] = {-HUGE_VAL, -HUGE_VAL};
    for (const double x : box.x) {
        for (const double y : box.y) {
            for (const double z : box.z) {
                const auto place = project(camera, {x, y, z});
                for (std::size_t axis = 0; axis < 2; ++axis) {
                    low[axis] = std::min(low[axis], place[axis]);
                    high[axis] = std::max(high[axis], place[axis]);
                }
            }
        }
    }
    const double end[2] = {static_cast<double>(camera.pixels.nx) - 0.5,
                           static_cast<double>(camera.pixels.ny) - 0.5};
    bool inside = true;
    for (std::size_t axis = 0; axis < 2; ++axis) {
        if (high[axis] < -0.5 || low[axis] >= end[axis]) {
            return Seen::outside;
        }
        inside = inside && low[axis] >= -0.5 && high[axis] < end[axis];
    }
    return inside ? Seen::inside : Seen::cut;
}

double share_outside(const Camera& camera, const Cells& cells, CellIndex cell) {
    const Seen where = seen(camera, box_around(cells, cell));
    if (where != Seen::cut) {
        return where == Seen::outside ? 1.0 : 0.0;
    }
    std::size_t points = 0;
    std::size_t outside = 0;
    const auto count = [&](const Vec3& point) {
        ++points;
        outside += on_map(camera, project(camera, point)) ? 0 : 1;
    };
    if (cells.stored.geometry == grid::Geometry::xyz) {
        visit_points(cells, cell, eighths, 0, count);
    } else {
        visit_points(cells, cell, gauss, 128, count);
    }
    return static_cast<double>(outside) / static_cast<double>(points);
}

/// Mean over a cell of 1 / distance^2.
double mean_dilution(const Camera& camera, const Cells& cells, CellIndex cell) {
    if (camera.projection == sight::Projection::orthographic) {
        return 1 / (camera.distance * camera.distance);
    }
    double sum = 0;
    std::size_t points = 0;
    visit_points(cells, cell, gauss, 32, [&](const Vec3& point) {
        sum += 1 / squared_distance(camera, point);
        ++points;
    });
    return sum / static_cast<double>(points);
}

FluxBudget empty_budget(std::size_t planes) {
    const std::vector<double> zeros(planes, 0.0);
    return {zeros, zeros, zeros, std::vector<float>(planes, 0.0F)};
}

void add_cell(FluxBudget& budget, const float* value, double weight, double outside) {
    for (std::size_t p = 0; p < budget.expected.size(); ++p) {
        const double flux = weight * static_cast<double>(value[p]);
        budget.expected[p] += flux;
        budget.outside[p] += outside * flux;
        budget.scale[p] += std::abs(flux);
        budget.brightest[p] = std::max(budget.brightest[p], std::abs(value[p]));
    }
}

/// Smallest width of the parallelogram-edged figure that three edges of a box project to, which is reached at
/// right angles to one of them.
double smallest_width(const std::array<std::array<double, 2>, 3>& edge) {
    double smallest = HUGE_VAL;
    for (const auto& base : edge) {
        const double length = std::hypot(base[0], base[1]);
        if (!(length > 0)) {
            continue;
        }
        double width = 0;
        for (const auto& other : edge) {
            width += std::abs(base[0] * other[1] - base[1] * other[0]) / length;
        }
        smallest = std::min(smallest, width);
    }
    return smallest;
}

/// Raises the levels of the pixels that a box sees itself in.
void raise_levels(std::vector<std::uint8_t>& levels,
                  const Camera& camera,
                  const Vec3& middle,
                  const std::array<Vec3, 3>& edges,
                  int max_level) {
    const auto place = project(camera, middle);
    std::array<std::array<double, 2>, 3> edge{};
    double reach[2] = {0.5, 0.5};
    for (std::size_t e = 0; e < 3; ++e) {
        const auto end =
            project(camera, {middle[0] + edges[e][0], middle[1] + edges[e][1], middle[2] + edges[e][2]});
        for (std::size_t axis = 0; axis < 2; ++axis) {
            edge[e][axis] = end[axis] - place[axis];
            reach[axis] += 0.5 * std::abs(edge[e][axis]);
        }
    }
    const double width = smallest_width(edge);
    if (!(width < 1)) {
        return;
    }
    const double wanted = width > 0 ? std::ceil(-std::log2(width)) : max_level;
    const auto level = static_cast<std::uint8_t>(std::min<double>(wanted, max_level));
    const auto first = [&](std::size_t axis, std::size_t size) {
        return static_cast<std::size_t>(
            std::clamp(std::ceil(place[axis] - reach[axis]), 0.0, static_cast<double>(size)));
    };
    const auto last = [&](std::size_t axis, std::size_t size) {
        return static_cast<std::size_t>(
            std::clamp(std::floor(place[axis] + reach[axis]) + 1, 0.0, static_cast<double>(size)));
    };
    const std::size_t nx = camera.pixels.nx;
    for (std::size_t j = first(1, camera.pixels.ny); j < last(1, camera.pixels.ny); ++j) {
        for (std::size_t i = first(0, nx); i < last(0, nx); ++i) {
            levels[i + nx * j] = std::max(levels[i + nx * j], level);
        }
    }
}

void raise_levels(std::vector<std::uint8_t>& levels,
                  const Camera& camera,
                  const Cells& cells,
                  CellIndex cell,
                  int max_level) {
    const auto& x = cells.stored.x;
    const double width = x[cell.i + 1] - x[cell.i];
    const double height = cells.z[cell.k + 1] - cells.z[cell.k];
    const double middle_x = 0.5 * (x[cell.i + 1] + x[cell.i]);
    const double middle_z = 0.5 * (cells.z[cell.k + 1] + cells.z[cell.k]);
    const Vec3 up{0, 0, height};
    if (cells.stored.geometry == grid::Geometry::xyz) {
        const auto& y = cells.stored.y;
        const Vec3 middle{middle_x, 0.5 * (y[cell.j + 1] + y[cell.j]), middle_z};
        raise_levels(levels, camera, middle, {Vec3{width, 0, 0}, Vec3{0, y[cell.j + 1] - y[cell.j], 0}, up},
                     max_level);
        return;
    }
    const Azimuths around = azimuths(cells, cell.j, 64);
    for (std::size_t piece = 0; piece < around.count; ++piece) {
        const double cosine = std::cos(around.middle(piece));
        const double sine = std::sin(around.middle(piece));
        const double arc = middle_x * around.step;
        raise_levels(levels, camera, {middle_x * cosine, middle_x * sine, middle_z},
                     {Vec3{width * cosine, width * sine, 0}, Vec3{-arc * sine, arc * cosine, 0}, up},
                     max_level);
    }
}

double smallest_step(const std::vector<double>& edges) {
    double smallest = HUGE_VAL;
    for (std::size_t i = 1; i < edges.size(); ++i) {
        smallest = std::min(smallest, edges[i] - edges[i - 1]);
    }
    return smallest;
}

/// False where even the smallest cell is wider than a pixel in every direction.
bool has_narrow_cells(const Cells& cells, const Camera& camera) {
    double smallest = std::min(smallest_step(cells.stored.x), smallest_step(cells.z));
    if (cells.stored.geometry == grid::Geometry::xyz) {
        smallest = std::min(smallest, smallest_step(cells.stored.y));
    }
    const double steps = std::max(std::abs(camera.pixels.step_x), std::abs(camera.pixels.step_y));
    const bool near = camera.projection == sight::Projection::perspective;
    return smallest < steps * (camera.distance + (near ? half_diagonal(cells) : 0.0));
}

/// Smallest width on the map of any cell of a row along x (of a box grid, orthographic: no other depends on
/// the place).
double narrowest_of_row(const Cells& cells, const Camera& camera, std::size_t j, std::size_t k) {
    const double sides[3] = {smallest_step(cells.stored.x), cells.stored.y[j + 1] - cells.stored.y[j],
                             cells.z[k + 1] - cells.z[k]};
    std::array<std::array<double, 2>, 3> edge{};
    for (std::size_t axis = 0; axis < 3; ++axis) {
        edge[axis] = {sides[axis] * camera.to_x[axis], sides[axis] * camera.to_y[axis]};
    }
    return smallest_width(edge);
}

void raise_levels_of_layer(std::vector<std::uint8_t>& levels,
                           const emission::Emissivity& emissivity,
                           const Camera& camera,
                           const std::vector<float>& brightest,
                           std::size_t k,
                           int max_level) {
    constexpr float bright = 0.01F;
    const Cells& cells = emissivity.cells;
    const std::size_t planes = emissivity.planes.size();
    const bool even =
        cells.stored.geometry == grid::Geometry::xyz && camera.projection == sight::Projection::orthographic;
    for (std::size_t j = 0; j < cells.n2(); ++j) {
        if (even && narrowest_of_row(cells, camera, j, k) >= 1) {
            continue;
        }
        const float* value = emissivity.value.data() + planes * cells.nx() * (j + cells.n2() * k);
        for (std::size_t i = 0; i < cells.nx(); ++i, value += planes) {
            bool is_bright = false;
            for (std::size_t p = 0; p < planes; ++p) {
                is_bright |= std::abs(value[p]) > bright * brightest[p];
            }
            if (is_bright) {
                raise_levels(levels, camera, cells, {i, j, k}, max_level);
            }
        }
    }
}

} // namespace

double half_diagonal(const Cells& cells) {
    const Box box = box_around(cells);
    const bool rings = cells.stored.geometry == grid::Geometry::rz;
    const double x = std::max(std::abs(box.x[0]), std::abs(box.x[1]));
    const double y = rings ? 0.0 : std::max(std::abs(box.y[0]), std::abs(box.y[1]));
    return std::hypot(x, y, std::max(std::abs(box.z[0]), std::abs(box.z[1])));
}

FluxBudget
flux_budget(const emission::Emissivity& emissivity, const Camera& camera, const RunContext& context) {
    const Cells& cells = emissivity.cells;
    const std::size_t planes = emissivity.planes.size();
    const bool covered = seen(camera, box_around(cells)) == Seen::inside;
    std::vector<FluxBudget> layers(cells.nz(), empty_budget(planes));
    for_each_block(context, cells.nz(), [&](std::size_t k) {
        for (std::size_t j = 0; j < cells.n2(); ++j) {
            for (std::size_t i = 0; i < cells.nx(); ++i) {
                const CellIndex cell{i, j, k};
                const double volume = grid::cell_volume(cells, i, j, k);
                const double outside = covered ? 0.0 : share_outside(camera, cells, cell);
                const std::size_t index = i + cells.nx() * (j + cells.n2() * k);
                add_cell(layers[k], emissivity.value.data() + planes * index,
                         volume * mean_dilution(camera, cells, cell), outside);
            }
        }
    });
    FluxBudget total = empty_budget(planes);
    for (const auto& layer : layers) {
        for (std::size_t p = 0; p < planes; ++p) {
            total.expected[p] += layer.expected[p];
            total.outside[p] += layer.outside[p];
            total.scale[p] += layer.scale[p];
            total.brightest[p] = std::max(total.brightest[p], layer.brightest[p]);
        }
    }
    return total;
}

std::vector<std::uint8_t> first_levels(const emission::Emissivity& emissivity,
                                       const Camera& camera,
                                       const std::vector<float>& brightest,
                                       int max_level,
                                       const RunContext& context) {
    const Cells& cells = emissivity.cells;
    const std::size_t pixels = camera.pixels.nx * camera.pixels.ny;
    std::vector<std::uint8_t> levels(pixels, 0);
    if (max_level == 0 || !has_narrow_cells(cells, camera)) {
        return levels;
    }
    Pool<std::vector<std::uint8_t>> pool([&] { return std::vector<std::uint8_t>(pixels, 0); });
    for_each_block(context, cells.nz(), [&](std::size_t k) {
        pool.with([&](std::vector<std::uint8_t>& own) {
            raise_levels_of_layer(own, emissivity, camera, brightest, k, max_level);
        });
    });
    pool.for_each([&](const std::vector<std::uint8_t>& own) {
        std::transform(own.begin(), own.end(), levels.begin(), levels.begin(),
                       [](std::uint8_t a, std::uint8_t b) { return std::max(a, b); });
    });
    return levels;
}

} // namespace aureole::maps
