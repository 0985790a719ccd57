#include "aureole/maps/render.hpp"

#include "maps/camera.hpp"
#include "maps/flux_budget.hpp"
#include "maps/pixel_parts.hpp"

#include "aureole/base/constants.hpp"
#include "aureole/base/error.hpp"
#include "aureole/base/parallel.hpp"
#include "aureole/sight/accumulate.hpp"
#include "aureole/sight/trace.hpp"

#include <fmt/format.h>

#include <algorithm>
#include <cassert>
#include <cmath>
#include <mutex>

namespace aureole::maps {

namespace {

/// Rays of one tile cross the same cells, which then stay in the cache.
constexpr std::size_t tile_side = 16;
constexpr int extra_rounds = 2;
constexpr double floor_of_signed_planes = 0.01;

struct Scene {
    const emission::Emissivity& emissivity;
    const RenderOptions& options;
    const RunContext& context;
    Camera camera;
    sight::Tracer tracer;
    std::vector<FaceLines> faces;
    Steps steps; // of `faces`
    std::size_t planes, nx, ny;
    std::size_t tiles_x, tiles_y;
};

Scene make_scene(const emission::Emissivity& emissivity,
                 const sight::View& view,
                 const PixelGrid& pixels,
                 const RenderOptions& options,
                 const RunContext& context) {
    Scene scene{emissivity,
                options,
                context,
                make_camera(view, pixels),
                sight::make_tracer(emissivity.cells),
                {},
                {},
                emissivity.planes.size(),
                pixels.nx,
                pixels.ny,
                (pixels.nx + tile_side - 1) / tile_side,
                (pixels.ny + tile_side - 1) / tile_side};
    scene.faces = edge_on_faces(emissivity.cells, scene.camera);
    scene.steps = steps(scene.faces);
    assert(emissivity.value.size() == scene.planes * emissivity.cells.size());
    const double reach = half_diagonal(emissivity.cells);
    if (view.projection == sight::Projection::perspective && !(view.distance > reach)) {
        throw Error(ErrorKind::scenario,
                    fmt::format("view: the outside view in perspective needs an observer beyond the grid: "
                                "found a distance of {:.6g} kpc, "
                                "expected more than the grid's half-diagonal of {:.6g} kpc",
                                view.distance / constants::kiloparsec, reach / constants::kiloparsec));
    }
    return scene;
}

/// The last few lines of sight where the map is made of steps: between two edges all of them are alike.
struct Recent {
    static constexpr std::size_t size = 8;
    std::array<double, 2> place[size]; ///< number of the strip, or the coordinate where there are no steps
    std::vector<double> intensity;     ///< [entry][plane]
    std::size_t used = 0, next = 0;

    const double* find(const std::array<double, 2>& wanted, std::size_t planes) const {
        const auto* end = place + used;
        const auto* found = std::find(place, end, wanted);
        return found == end ? nullptr : intensity.data() + static_cast<std::size_t>(found - place) * planes;
    }
    void keep(const std::array<double, 2>& at, const double* values, std::size_t planes) {
        place[next] = at;
        std::copy(values, values + planes, intensity.data() + next * planes);
        used = std::max(used, next + 1);
        next = (next + 1) % size;
    }
};

/// Buffers of one tile.
struct Buffers {
    Recent recent;
    std::vector<sight::Chord> chords;
    std::vector<Place> places;
    std::vector<double> children;         ///< [level][child][plane]
    std::vector<double> sum, square, ray; ///< [plane]
    std::vector<double> limit, error;     ///< [plane] of a refined pixel
};

Buffers make_buffers(const Scene& scene) {
    const auto levels = static_cast<std::size_t>(scene.options.max_level) + 1;
    Buffers buffers;
    buffers.recent.intensity.resize(Recent::size * scene.planes);
    buffers.chords.resize(scene.tracer.longest);
    buffers.children.resize(levels * 4 * scene.planes);
    buffers.sum.resize(scene.planes);
    buffers.square.resize(scene.planes);
    buffers.ray.resize(scene.planes);
    buffers.limit.resize(scene.planes);
    buffers.error.resize(scene.planes);
    return buffers;
}

/// Intensities [plane] along the line through a place on the map.
void sample(const Scene& scene, std::vector<sight::Chord>& chords, double x, double y, double* intensity) {
    const std::size_t count = sight::trace(scene.tracer, sight_line(scene.camera, x, y), chords.data());
    const float* value = scene.emissivity.value.data();
    if (scene.context.reproducible) {
        sight::accumulate_baseline(chords.data(), count, value, scene.planes, intensity);
    } else {
        sight::accumulate(chords.data(), count, value, scene.planes, intensity);
    }
}

/// The same, from a line traced before where there is one alike; returns the number of lines traced.
std::size_t sample(const Scene& scene, Buffers& buffers, const Place& at, double* intensity) {
    const Steps& steps = scene.steps;
    if (steps.along_x == nullptr && steps.along_y == nullptr) {
        sample(scene, buffers.chords, at.x, at.y, intensity);
        return 1;
    }
    const auto place_along = [&](const FaceLines* lines, double coordinate) {
        return lines == nullptr ? coordinate : static_cast<double>(strip(*lines, at.x, at.y));
    };
    const std::array<double, 2> place{place_along(steps.along_x, at.x), place_along(steps.along_y, at.y)};
    if (const double* known = buffers.recent.find(place, scene.planes)) {
        std::copy(known, known + scene.planes, intensity);
        return 0;
    }
    sample(scene, buffers.chords, at.x, at.y, intensity);
    buffers.recent.keep(place, intensity, scene.planes);
    return 1;
}

/// Mean intensities [plane] over a square from one ray through each of its parts; returns the number of lines
/// traced.
std::size_t sample(const Scene& scene, Buffers& buffers, const Square& square, double* intensity) {
    cut_square(square, scene.faces, buffers.places);
    if (buffers.places.size() == 1) {
        return sample(scene, buffers, buffers.places[0], intensity);
    }
    std::fill(intensity, intensity + scene.planes, 0.0);
    std::size_t traced = 0;
    for (const Place& place : buffers.places) {
        traced += sample(scene, buffers, place, buffers.ray.data());
        for (std::size_t p = 0; p < scene.planes; ++p) {
            intensity[p] += place.share * buffers.ray[p];
        }
    }
    return traced;
}

/// One of the equal squares of `level` that a pixel is cut into, counted by rows.
Square square_of_pixel(std::size_t i, std::size_t j, int level, std::size_t index) {
    const std::size_t across = std::size_t{1} << level;
    const double side = std::ldexp(1.0, -level);
    return {static_cast<double>(i) - 0.5 + side * (static_cast<double>(index % across) + 0.5),
            static_cast<double>(j) - 0.5 + side * (static_cast<double>(index / across) + 0.5), level};
}

std::size_t squares(int level) {
    return std::size_t{1} << (2 * level);
}

/// What a tile hands back, to be added in the order of the tiles.
struct TileResult {
    std::size_t rays = 0;
    int deepest = 0;
    std::vector<double> error; ///< [plane] largest estimate among its bright pixels
};

struct Range {
    std::size_t from, to;
};

Range tile_range(std::size_t tile, std::size_t size) {
    return {tile * tile_side, std::min(size, (tile + 1) * tile_side)};
}

/// Calls visit(i, j) for each pixel of a tile, neighbours along steps one after another.
template <class Visit> void visit_tile(const Scene& scene, std::size_t tile, Visit&& visit) {
    const Range rows = tile_range(tile / scene.tiles_x, scene.ny);
    const Range columns = tile_range(tile % scene.tiles_x, scene.nx);
    if (scene.steps.along_y != nullptr && scene.steps.along_x == nullptr) {
        for (std::size_t i = columns.from; i < columns.to; ++i) {
            for (std::size_t j = rows.from; j < rows.to; ++j) {
                visit(i, j);
            }
        }
        return;
    }
    for (std::size_t j = rows.from; j < rows.to; ++j) {
        for (std::size_t i = columns.from; i < columns.to; ++i) {
            visit(i, j);
        }
    }
}

/// Runs body(tile) over all tiles and reports the share done, which goes from `from` to `to`.
template <class Body> void for_each_tile(const Scene& scene, double from, double to, Body&& body) {
    const std::size_t tiles = scene.tiles_x * scene.tiles_y;
    std::mutex mutex;
    std::size_t done = 0;
    for_each_block(scene.context, tiles, [&](std::size_t tile) {
        body(tile);
        const std::lock_guard lock(mutex);
        ++done;
        if (done * 50 / tiles != (done - 1) * 50 / tiles) {
            scene.context.report("sight lines",
                                 from + (to - from) * static_cast<double>(done) / static_cast<double>(tiles));
        }
    });
}

/// The working state of a rendering.
struct Plan {
    std::vector<std::uint8_t> level;  ///< [pixel] of the even sampling that comes first
    std::vector<std::uint8_t> refine; ///< [pixel] 1 where it does not suffice
    std::vector<double> peak;         ///< [plane] largest |value|
    std::vector<TileResult> tiles;
};

/// Even sampling of every pixel at its level.
void sample_evenly(const Scene& scene, Plan& plan, Rendered& out, double from, double to) {
    const std::size_t pixels = scene.nx * scene.ny;
    for_each_tile(scene, from, to, [&](std::size_t tile) {
        Buffers buffers = make_buffers(scene);
        TileResult& result = plan.tiles[tile];
        visit_tile(scene, tile, [&](std::size_t i, std::size_t j) {
            const std::size_t pixel = i + scene.nx * j;
            const int level = plan.level[pixel];
            std::fill(buffers.sum.begin(), buffers.sum.end(), 0.0);
            for (std::size_t s = 0; s < squares(level); ++s) {
                result.rays += sample(scene, buffers, square_of_pixel(i, j, level, s), buffers.square.data());
                for (std::size_t p = 0; p < scene.planes; ++p) {
                    buffers.sum[p] += buffers.square[p];
                }
            }
            result.deepest = std::max(result.deepest, level);
            for (std::size_t p = 0; p < scene.planes; ++p) {
                out.value[p * pixels + pixel] =
                    static_cast<float>(buffers.sum[p] / static_cast<double>(squares(level)));
            }
        });
    });
}

std::vector<double> peaks(const Scene& scene, const Rendered& out) {
    std::vector<double> peak(scene.planes, 0.0);
    const std::size_t pixels = scene.nx * scene.ny;
    for (std::size_t p = 0; p < scene.planes; ++p) {
        for (std::size_t pixel = 0; pixel < pixels; ++pixel) {
            peak[p] = std::max(peak[p], static_cast<double>(std::abs(out.value[p * pixels + pixel])));
        }
    }
    return peak;
}

double floor_of(const Scene& scene, std::size_t plane) {
    return scene.emissivity.planes[plane].is_signed ? std::max(scene.options.floor, floor_of_signed_planes)
                                                    : scene.options.floor;
}

/// Error a pixel may have.
double allowed(const Scene& scene, const Plan& plan, std::size_t plane, double value) {
    return scene.options.tolerance * std::max(std::abs(value), floor_of(scene, plane) * plan.peak[plane]);
}

/// A pixel row of one plane and its neighbours (at the map's border the row itself).
struct PixelRow {
    const float *below, *middle, *above;
    std::size_t last; ///< index of the last pixel of the map's row
    bool steps_along_x, steps_along_y;
};

/// Error of the midpoint rule for one pixel sampled once, from second differences (at the map's border: first
/// differences). Along steps there is none, because pixels are cut at their edges.
float midpoint_error(const PixelRow& row, std::size_t i, std::size_t left, std::size_t right) {
    const float twice = 2 * row.middle[i];
    const float across = row.steps_along_x ? 0.0F : std::abs(row.middle[left] + row.middle[right] - twice);
    const float along = row.steps_along_y ? 0.0F : std::abs(row.below[i] + row.above[i] - twice);
    return (across + along) / 24;
}

/// What a pixel may be off by, and which pixels count for the estimate of the map.
struct Limits {
    float relative, least, bright;
};

/// Marks the poor pixels from .. to - 1 of a row; returns the largest error of the bright ones that are not.
float mark_row(const PixelRow& row,
               const std::uint8_t* level,
               const Limits& limits,
               std::size_t from,
               std::size_t to,
               std::uint8_t* poor) {
    static constexpr std::array<float, 8> per_square{
        1.0F, 0.25F, 0.0625F, 0.015625F, 0.00390625F, 0.000976562F, 0.00024414062F, 6.1035156e-05F};
    float largest = 0;
    const auto mark = [&](std::size_t i, std::size_t left, std::size_t right) {
        const float value = std::abs(row.middle[i]);
        const float error = midpoint_error(row, i, left, right) * per_square[level[i]];
        const bool is_poor = error > limits.relative * std::max(value, limits.least);
        poor[i] |= static_cast<std::uint8_t>(is_poor);
        largest = !is_poor && value > limits.bright ? std::max(largest, error) : largest;
    };
    for (std::size_t i = from; i < to; ++i) {
        mark(i, i > 0 ? i - 1 : i, i < row.last ? i + 1 : i);
    }
    return largest;
}

/// Marks pixels whose even sampling is not good enough, and their neighbours; keeps the estimates of the
/// others.
void mark_for_refinement(const Scene& scene, Plan& plan, const Rendered& out) {
    const std::size_t pixels = scene.nx * scene.ny;
    std::vector<std::uint8_t> poor(pixels, 0);
    for_each_block(scene.context, plan.tiles.size(), [&](std::size_t tile) {
        TileResult& result = plan.tiles[tile];
        result.error.assign(scene.planes, 0.0);
        const Range rows = tile_range(tile / scene.tiles_x, scene.ny);
        const Range columns = tile_range(tile % scene.tiles_x, scene.nx);
        for (std::size_t p = 0; p < scene.planes; ++p) {
            const float* plane = out.value.data() + p * pixels;
            const Limits limits{static_cast<float>(scene.options.tolerance),
                                static_cast<float>(floor_of(scene, p) * plan.peak[p]),
                                static_cast<float>(0.5 * plan.peak[p])};
            for (std::size_t j = rows.from; j < rows.to; ++j) {
                const float* middle = plane + scene.nx * j;
                const PixelRow row{j > 0 ? middle - scene.nx : middle,
                                   middle,
                                   j + 1 < scene.ny ? middle + scene.nx : middle,
                                   scene.nx - 1,
                                   scene.steps.along_x != nullptr,
                                   scene.steps.along_y != nullptr};
                const float largest = mark_row(row, plan.level.data() + scene.nx * j, limits, columns.from,
                                               columns.to, poor.data() + scene.nx * j);
                result.error[p] = std::max(result.error[p], static_cast<double>(largest));
            }
        }
    });
    plan.refine.assign(pixels, 0);
    for (std::size_t j = 0; j < scene.ny; ++j) {
        for (std::size_t i = 0; i < scene.nx; ++i) {
            if (poor[i + scene.nx * j] == 0) {
                continue;
            }
            for (std::size_t row = j > 0 ? j - 1 : 0; row < std::min(j + 2, scene.ny); ++row) {
                for (std::size_t column = i > 0 ? i - 1 : 0; column < std::min(i + 2, scene.nx); ++column) {
                    plan.refine[column + scene.nx * row] = 1;
                }
            }
        }
    }
}

/// Refinement of one pixel.
struct Refinement {
    const Scene& scene;
    Buffers& buffers;
    TileResult& result;
    const std::vector<double>& allowed; ///< [plane]
    std::vector<double>& error;         ///< [plane] estimate for the whole pixel, added up
};

/// Improves `value`, the intensity of a square from one ray per part, by sampling its quarters. The quarters'
/// mean is off by about half its difference from the middle (an edge through the square; less for smooth
/// maps). Deeper squares may be off by more: along a line there are 2^level of them, each with 4^-level of
/// the area.
void refine(Refinement& pixel, const Square& square, double* value) {
    const Scene& scene = pixel.scene;
    const std::size_t planes = scene.planes;
    if (square.level >= scene.options.max_level) {
        return;
    }
    double* children = pixel.buffers.children.data() + static_cast<std::size_t>(square.level) * 4 * planes;
    const double side = std::ldexp(1.0, -square.level);
    const double quarter = 0.25 * side;
    const Square child[4] = {{square.x - quarter, square.y - quarter, square.level + 1},
                             {square.x + quarter, square.y - quarter, square.level + 1},
                             {square.x - quarter, square.y + quarter, square.level + 1},
                             {square.x + quarter, square.y + quarter, square.level + 1}};
    for (std::size_t c = 0; c < 4; ++c) {
        pixel.result.rays += sample(scene, pixel.buffers, child[c], children + c * planes);
    }
    pixel.result.deepest = std::max(pixel.result.deepest, square.level + 1);
    const auto mean = [&](std::size_t p) {
        return 0.25 *
               ((children[p] + children[planes + p]) + (children[2 * planes + p] + children[3 * planes + p]));
    };
    const double loosened = std::ldexp(1.0, square.level);
    bool go_on = false;
    for (std::size_t p = 0; p < planes; ++p) {
        go_on = go_on || std::abs(mean(p) - value[p]) > loosened * pixel.allowed[p];
    }
    go_on = go_on && square.level + 1 < scene.options.max_level;
    if (go_on) {
        for (std::size_t c = 0; c < 4; ++c) {
            refine(pixel, child[c], children + c * planes);
        }
    } else {
        for (std::size_t p = 0; p < planes; ++p) {
            pixel.error[p] += 0.5 * std::abs(mean(p) - value[p]) * side * side;
        }
    }
    for (std::size_t p = 0; p < planes; ++p) {
        value[p] = mean(p);
    }
}

void refine_pixel(const Scene& scene,
                  const Plan& plan,
                  Buffers& buffers,
                  TileResult& result,
                  std::size_t i,
                  std::size_t j,
                  Rendered& out) {
    const std::size_t pixels = scene.nx * scene.ny;
    const std::size_t pixel = i + scene.nx * j;
    const int level = plan.level[pixel];
    std::vector<double>& limit = buffers.limit;
    std::vector<double>& error = buffers.error;
    std::fill(error.begin(), error.end(), 0.0);
    for (std::size_t p = 0; p < scene.planes; ++p) {
        limit[p] = allowed(scene, plan, p, out.value[p * pixels + pixel]);
    }
    Refinement refinement{scene, buffers, result, limit, error};
    std::fill(buffers.sum.begin(), buffers.sum.end(), 0.0);
    std::vector<double>& value = buffers.square;
    for (std::size_t s = 0; s < squares(level); ++s) {
        const Square square = square_of_pixel(i, j, level, s);
        result.rays += sample(scene, buffers, square, value.data());
        refine(refinement, square, value.data());
        for (std::size_t p = 0; p < scene.planes; ++p) {
            buffers.sum[p] += value[p];
        }
    }
    for (std::size_t p = 0; p < scene.planes; ++p) {
        const double mean = buffers.sum[p] / static_cast<double>(squares(level));
        out.value[p * pixels + pixel] = static_cast<float>(mean);
        if (std::abs(mean) > 0.5 * plan.peak[p]) {
            result.error[p] = std::max(result.error[p], error[p]);
        }
    }
}

void refine_marked(const Scene& scene, Plan& plan, Rendered& out, double from, double to) {
    for_each_tile(scene, from, to, [&](std::size_t tile) {
        Buffers buffers = make_buffers(scene);
        visit_tile(scene, tile, [&](std::size_t i, std::size_t j) {
            if (plan.refine[i + scene.nx * j] != 0) {
                refine_pixel(scene, plan, buffers, plan.tiles[tile], i, j, out);
            }
        });
    });
}

/// Adds up the map; row by row, so that the bits do not depend on threads.
void add_up(const Scene& scene, const Plan& plan, Rendered& out) {
    const std::size_t pixels = scene.nx * scene.ny;
    std::vector<double> solid_angle(pixels);
    for_each_block(scene.context, scene.ny, [&](std::size_t j) {
        for (std::size_t i = 0; i < scene.nx; ++i) {
            solid_angle[i + scene.nx * j] =
                pixel_solid_angle(scene.camera, static_cast<double>(i), static_cast<double>(j));
        }
    });
    out.flux.assign(scene.planes, 0.0);
    for_each_block(scene.context, scene.planes, [&](std::size_t p) {
        const float* value = out.value.data() + p * pixels;
        for (std::size_t j = 0; j < scene.ny; ++j) {
            double row = 0;
            for (std::size_t i = scene.nx * j; i < scene.nx * (j + 1); ++i) {
                row += static_cast<double>(value[i]) * solid_angle[i];
            }
            out.flux[p] += row;
        }
    });
    out.rays = 0;
    out.levels = 0;
    out.sampling_error.assign(scene.planes, 0.0);
    for (const auto& tile : plan.tiles) {
        out.rays += tile.rays;
        out.levels = std::max(out.levels, tile.deepest);
        for (std::size_t p = 0; p < scene.planes; ++p) {
            if (plan.peak[p] > 0) {
                out.sampling_error[p] = std::max(out.sampling_error[p], tile.error[p] / plan.peak[p]);
            }
        }
    }
}

bool misses_flux(const Scene& scene, const FluxBudget& budget, const Rendered& out) {
    for (std::size_t p = 0; p < scene.planes; ++p) {
        const double miss = std::abs(out.flux[p] + budget.outside[p] - budget.expected[p]);
        if (miss > scene.options.tolerance * budget.scale[p]) {
            return true;
        }
    }
    return false;
}

/// One level more for every pixel that the even sampling or a neighbour found light in. Returns false if no
/// level is left.
bool deepen(const Scene& scene, Plan& plan, const Rendered& out) {
    const std::size_t pixels = scene.nx * scene.ny;
    std::vector<std::uint8_t> lit(pixels, 0);
    for (std::size_t p = 0; p < scene.planes; ++p) {
        for (std::size_t pixel = 0; pixel < pixels; ++pixel) {
            lit[pixel] = out.value[p * pixels + pixel] != 0 ? 1 : lit[pixel];
        }
    }
    bool deeper = false;
    for (std::size_t j = 0; j < scene.ny; ++j) {
        for (std::size_t i = 0; i < scene.nx; ++i) {
            std::uint8_t& level = plan.level[i + scene.nx * j];
            bool near_light = false;
            for (std::size_t row = j > 0 ? j - 1 : 0; row < std::min(j + 2, scene.ny); ++row) {
                for (std::size_t column = i > 0 ? i - 1 : 0; column < std::min(i + 2, scene.nx); ++column) {
                    near_light = near_light || lit[column + scene.nx * row] != 0;
                }
            }
            if (near_light && level < scene.options.max_level) {
                ++level;
                deeper = true;
            }
        }
    }
    return deeper;
}

void render_round(const Scene& scene, Plan& plan, Rendered& out, double from, double to) {
    const double middle = from + 0.3 * (to - from);
    sample_evenly(scene, plan, out, from, middle);
    plan.peak = peaks(scene, out);
    mark_for_refinement(scene, plan, out);
    refine_marked(scene, plan, out, middle, to);
    add_up(scene, plan, out);
}

} // namespace

Rendered render(const emission::Emissivity& emissivity,
                const sight::View& view,
                const PixelGrid& pixels,
                const RenderOptions& options,
                const RunContext& context) {
    const Scene scene = make_scene(emissivity, view, pixels, options, context);
    const FluxBudget budget = flux_budget(emissivity, scene.camera, context);
    Rendered out;
    out.pixels = pixels;
    out.planes = scene.planes;
    out.value.assign(scene.planes * scene.nx * scene.ny, 0.0F);
    out.flux_expected = budget.expected;
    out.flux_outside = budget.outside;
    Plan plan;
    plan.level = first_levels(emissivity, scene.camera, budget.brightest, options.max_level, context);
    plan.tiles.resize(scene.tiles_x * scene.tiles_y);
    render_round(scene, plan, out, 0, 0.9);
    for (int round = 0; round < extra_rounds && misses_flux(scene, budget, out) && deepen(scene, plan, out);
         ++round) {
        const double from = 1 - std::ldexp(0.1, -round);
        render_round(scene, plan, out, from, 0.5 * (from + 1));
    }
    context.report("sight lines", 1);
    return out;
}

} // namespace aureole::maps
