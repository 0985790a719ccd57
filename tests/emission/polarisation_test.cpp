#include "sample_galaxy.hpp"

#include <catch2/catch.hpp>

using namespace aureole;
using emission::Band;

namespace {

constexpr double rest = constants::electron_rest_energy;
constexpr double kpc = constants::kiloparsec;
const RunContext one_thread;

spectra::Source electrons(std::size_t cells) {
    return sample::source(spectra::Species::electrons, sample::log_nodes(9 * rest, 1e6 * rest, 10), cells,
                          [](double t, std::size_t cell) {
                              return 1e-6 * (1 + static_cast<double>(cell)) * std::pow(1 + t / rest, -3.0) /
                                     rest;
                          });
}

emission::Processes polarised() {
    emission::Processes processes;
    processes.polarisation = true;
    processes.sectors = 16;
    return processes;
}

/// I, Q, U of one channel in a cell.
std::array<double, 3> stokes(const emission::Emitted& emitted, std::size_t cell) {
    return {sample::value(emitted, cell, 0), sample::value(emitted, cell, 1),
            sample::value(emitted, cell, 2)};
}

/// The observer of an edge-on galaxy in the direction -y, whose +x axis has the position angle given.
emission::Orientation edge_on(double position_angle) {
    emission::Orientation orientation;
    orientation.cos_double_angle = std::cos(2 * position_angle);
    orientation.sin_double_angle = std::sin(2 * position_angle);
    return orientation;
}

grid::Grid ring() {
    return {grid::Geometry::rz, {0, kpc, 2 * kpc}, {}, {0, kpc}, false};
}

} // namespace

TEST_CASE("a toroidal field seen edge-on is polarised along the rotation axis", "[emission][polarisation]") {
    // In front of the centre the field runs along the major axis, so the E-vector is along the minor axis, at
    // PA + 90 deg: Q = -p cos 2 PA, U = -p sin 2 PA (IAU: North through East). At the tangent points the
    // field runs along the sight line and nothing is seen.
    media::Media media;
    media.field.ordered.assign(2, {0.0F, 5e-6F, 0.0F}); // R, phi, z
    const std::vector<emission::Channel> channels{{Band::radio, 1.4e9, 1.4e9}};
    for (const double angle : {0.0, 30.0, 45.0, 90.0, 135.0, 270.0}) {
        const double pa = angle * constants::degree;
        const auto emitted =
            emission::emit(ring(), media, {electrons(2)}, channels, polarised(), edge_on(pa), one_thread);
        double brightest = 0;
        for (std::size_t sector = 0; sector < 16; ++sector) {
            const auto [i, q, u] = stokes(emitted, 1 + 2 * sector);
            INFO("position angle " << angle << " deg, sector " << sector);
            brightest = std::max(brightest, i);
            // A power law of index 3 is polarised to (s + 1)/(s + 7/3) = 3/4.
            CHECK(q == Approx(-0.75 * i * std::cos(2 * pa)).epsilon(0).margin(2e-3 * i));
            CHECK(u == Approx(-0.75 * i * std::sin(2 * pa)).epsilon(0).margin(2e-3 * i));
        }
        // Sector 12 begins at azimuth 270 deg, in front of the centre; sector 0 at 0 deg, a tangent point.
        CHECK(stokes(emitted, 1 + 2 * 12)[0] == brightest);
        CHECK(stokes(emitted, 1)[0] < 0.05 * brightest);
    }
}

TEST_CASE("a field tilted towards East of North turns U negative", "[emission][polarisation]") {
    // +x at position angle 0 is North, +z is East. B halfway between: its position angle is 45 deg, the
    // E-vector's 135 deg, Q = 0, U = -p.
    media::Media media;
    media.field.ordered.assign(1, {3e-6F, 0.0F, 3e-6F});
    const auto emitted = emission::emit(sample::box(), media, {electrons(1)}, {{Band::radio, 1.4e9, 1.4e9}},
                                        polarised(), edge_on(0), one_thread);
    const auto [i, q, u] = stokes(emitted, 0);
    CHECK(u == Approx(-0.75 * i).epsilon(2e-3));
    CHECK(std::abs(q) < 1e-6 * i);
}

TEST_CASE("a mirrored grid emits what the grid of both sides emits", "[emission][polarisation][property]") {
    // An X-shaped field: away from the plane on both sides. Stored once and mirrored, or twice.
    const std::size_t layers = 3;
    const grid::Grid upper{grid::Geometry::rz, {0, kpc, 2 * kpc}, {}, {0, kpc, 2 * kpc, 4 * kpc}, true};
    const grid::Grid both{grid::Geometry::rz,
                          {0, kpc, 2 * kpc},
                          {},
                          {-4 * kpc, -2 * kpc, -kpc, 0, kpc, 2 * kpc, 4 * kpc},
                          false};
    for (const auto parity : {media::Parity::even, media::Parity::odd}) {
        media::Media stored;
        stored.field.parity = parity;
        media::Media whole;
        const float plane_sign = parity == media::Parity::even ? 1.0F : -1.0F;
        for (std::size_t k = 0; k < layers; ++k) {
            for (std::size_t i = 0; i < 2; ++i) {
                const float tilt = 0.4F * static_cast<float>(k + i);
                stored.field.ordered.push_back({2e-6F * (1 + tilt), 3e-6F, 1e-6F + 4e-6F * tilt});
                stored.field.random_rms.push_back(2e-6F + 1e-6F * tilt);
            }
        }
        for (std::size_t k = 0; k < 2 * layers; ++k) {
            const bool below = k < layers;
            for (std::size_t i = 0; i < 2; ++i) {
                const std::size_t from = i + 2 * (below ? layers - 1 - k : k - layers);
                auto b = stored.field.ordered[from];
                if (below) {
                    b = {plane_sign * b[0], plane_sign * b[1], -plane_sign * b[2]};
                }
                whole.field.ordered.push_back(b);
                whole.field.random_rms.push_back(stored.field.random_rms[from]);
            }
        }
        const auto uniform =
            sample::source(spectra::Species::electrons, sample::log_nodes(9 * rest, 1e6 * rest, 10), 12,
                           [](double t, std::size_t) { return 1e-6 * std::pow(1 + t / rest, -3.0) / rest; });
        // Seen from 60 deg above the plane, so that the two sides look different.
        emission::Orientation orientation;
        orientation.towards = {0, -std::sin(1.0), std::cos(1.0)};
        orientation.up = {0, std::cos(1.0), std::sin(1.0)};
        const std::vector<emission::Channel> channels{{Band::radio, 1.4e9, 1.4e9}};
        const auto one =
            emission::emit(upper, stored, {uniform}, channels, polarised(), orientation, one_thread);
        const auto two =
            emission::emit(both, whole, {uniform}, channels, polarised(), orientation, one_thread);
        CHECK(one.emissivity.value == two.emissivity.value);
        CHECK(one.report.planes[0].luminosity ==
              Approx(two.report.planes[0].luminosity).epsilon(1e-12)); // added up in another order
        const auto again =
            emission::emit(both, whole, {uniform}, channels, polarised(), orientation, one_thread, &one);
        CHECK(again.tables == one.tables);
        CHECK(again.emissivity.value == two.emissivity.value);
        // The test can tell: the two sides differ.
        CHECK(one.emissivity.value.front() != one.emissivity.value[3 * (2 * 16 * (2 * layers - 1))]);
    }
}

TEST_CASE("a near observer sees each cell's field across its own sight line", "[emission][polarisation]") {
    // The observer stands on the -y axis; the cell lies off by 45 deg towards +x. A field along that sight
    // line is not seen at all; one across it, in the x-y plane, is seen as one along the turned major axis.
    const double d = 10 * kpc;
    const grid::Grid grid{
        grid::Geometry::xyz, {9.5 * kpc, 10.5 * kpc}, {-kpc / 2, kpc / 2}, {-kpc / 2, kpc / 2}, false};
    emission::Orientation orientation;
    orientation.observer = std::array<double, 3>{0, -d, 0};
    const std::vector<emission::Channel> channels{{Band::radio, 1.4e9, 1.4e9}};
    const auto seen = [&](std::array<float, 3> b) {
        media::Media media;
        media.field.ordered.assign(1, b);
        return stokes(
            emission::emit(grid, media, {electrons(1)}, channels, polarised(), orientation, one_thread), 0);
    };
    const auto across = seen({3e-6F, -3e-6F, 0});
    const auto along = seen({3e-6F, 3e-6F, 0});
    CHECK(along[0] < 1e-4 * across[0]);
    CHECK(across[1] == Approx(-0.75 * across[0]).epsilon(2e-3));
    // Equal parts along the turned axis and along z: 45 deg, U = -p; with the axis of the centre it would
    // differ.
    const auto oblique = seen({3e-6F / std::sqrt(2.0F), -3e-6F / std::sqrt(2.0F), 3e-6F});
    CHECK(oblique[2] == Approx(-0.75 * oblique[0]).epsilon(2e-3));
    CHECK(std::abs(oblique[1]) < 1e-5 * oblique[0]);
}
