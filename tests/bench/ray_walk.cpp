// Seconds for sight lines through a grid of 128^3 cells: 512 x 512 rays at inclination 85 deg, 24 planes; and
// for whole renderings.

#include "aureole/base/parallel.hpp"
#include "aureole/maps/render.hpp"
#include "aureole/sight/accumulate.hpp"

#include <chrono>
#include <cmath>
#include <cstdio>

namespace {

using namespace aureole;

constexpr std::size_t planes = 24;
constexpr double half_width = 20;

emission::Emissivity make_disc(const grid::Grid& grid) {
    emission::Emissivity disc{grid::whole_galaxy(grid, 1), std::vector<emission::Plane>(planes), {}};
    const auto& cells = disc.cells;
    disc.value.reserve(planes * cells.size());
    const bool rings = grid.geometry == grid::Geometry::rz;
    for (std::size_t k = 0; k < cells.nz(); ++k) {
        for (std::size_t j = 0; j < cells.n2(); ++j) {
            for (std::size_t i = 0; i < cells.nx(); ++i) {
                const double x = 0.5 * (grid.x[i] + grid.x[i + 1]);
                const double y = rings ? 0.0 : 0.5 * (grid.y[j] + grid.y[j + 1]);
                const double z = 0.5 * (cells.z[k] + cells.z[k + 1]);
                for (std::size_t p = 0; p < planes; ++p) {
                    const double height = 1 + 0.1 * static_cast<double>(p);
                    disc.value.push_back(
                        static_cast<float>(std::exp(-std::hypot(x, y) / 4 - std::abs(z) / height)));
                }
            }
        }
    }
    return disc;
}

double seconds_since(std::chrono::steady_clock::time_point start) {
    return std::chrono::duration<double>(std::chrono::steady_clock::now() - start).count();
}

void walk(const emission::Emissivity& disc, double azimuth, int threads) {
    constexpr std::size_t size = 512;
    constexpr std::size_t tile = 16;
    const sight::View view{85 * std::acos(-1.0) / 180, 0, azimuth, 1};
    const auto tracer = sight::make_tracer(disc.cells);
    const auto away = to_galaxy(view, {0, 0, 1});
    const double pixel = 2 * half_width / size;
    RunContext context;
    context.threads = threads;
    std::vector<float> map(size * size * planes);
    std::vector<std::size_t> chords_of_tile(size * size / (tile * tile), 0);
    const auto start = std::chrono::steady_clock::now();
    for_each_block(context, chords_of_tile.size(), [&](std::size_t block) {
        std::vector<sight::Chord> chords(tracer.longest);
        std::vector<double> sums(planes);
        for (std::size_t ray = 0; ray < tile * tile; ++ray) {
            const std::size_t i = tile * (block % (size / tile)) + ray % tile;
            const std::size_t j = tile * (block / (size / tile)) + ray / tile;
            const double x = pixel * (static_cast<double>(i) + 0.5) - half_width;
            const double y = pixel * (static_cast<double>(j) + 0.5) - half_width;
            const std::size_t count = trace(tracer, {to_galaxy(view, {x, y, 0}), away}, chords.data());
            accumulate(chords.data(), count, disc.value.data(), planes, sums.data());
            chords_of_tile[block] += count;
            for (std::size_t p = 0; p < planes; ++p) {
                map[p * size * size + i + size * j] = static_cast<float>(sums[p]);
            }
        }
    });
    const double seconds = seconds_since(start);
    std::size_t chords = 0;
    for (const std::size_t count : chords_of_tile) {
        chords += count;
    }
    std::printf("walk and sums, azimuth %4.2f rad, %d threads: %6.3f s, %zu million chords\n", azimuth,
                threads, seconds, chords / 1000000);
}

void render_all(const char* name, const emission::Emissivity& disc, double azimuth, int threads) {
    const double distance = 10000;
    maps::PixelGrid pixels;
    pixels.nx = pixels.ny = 512;
    pixels.step_y = 2.1 * half_width / 512 / distance;
    pixels.step_x = -pixels.step_y;
    pixels.centre_x = pixels.centre_y = 255.5;
    RunContext context;
    context.threads = threads;
    const auto start = std::chrono::steady_clock::now();
    const auto out = maps::render(disc, {85 * std::acos(-1.0) / 180, 0.3, azimuth, distance}, pixels,
                                  maps::RenderOptions{}, context);
    std::printf("render %s, azimuth %4.2f rad, %d threads: %6.3f s, %.2f rays per pixel, level %d, flux off "
                "by %.1e\n",
                name, azimuth, threads, seconds_since(start), static_cast<double>(out.rays) / (512 * 512),
                out.levels, (out.flux[0] + out.flux_outside[0]) / out.flux_expected[0] - 1);
}

} // namespace

int main() {
    const auto even = grid::stretched_edges(half_width, 128, 0, true);
    const auto box = make_disc({grid::Geometry::xyz, even, even, even, false});
    const auto rings =
        make_disc({grid::Geometry::rz, grid::stretched_edges(half_width, 100, 0, false), {}, even, false});
    for (const int threads : {1, 2}) {
        walk(box, 0, threads);
        walk(box, 0.5, threads);
        render_all("box", box, 0, threads);
        render_all("box", box, 0.5, threads);
        render_all("rings", rings, 0, threads);
    }
    return 0;
}
