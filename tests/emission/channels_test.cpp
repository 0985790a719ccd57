#include "sample_galaxy.hpp"

#include "aureole/base/quadrature.hpp"
#include "aureole/physics/radiation.hpp"

#include <catch2/catch.hpp>

#include <map>
#include <string>

using namespace aureole;
using emission::Band;
using emission::Channel;

namespace {

constexpr double gev = constants::gigaelectronvolt;
constexpr double ev = constants::electronvolt;
const RunContext one_thread;

/// Gas, starlight and a field, with electrons and protons that fall as power laws.
media::Media everything() {
    media::Media media;
    media.field.random_rms.assign(1, 5e-6F);
    media.gas.hi.assign(1, 1.0F);
    media.gas.hii.assign(1, 0.2F);
    const double temperature = 4500;
    media.radiation.push_back(
        {"starlight", temperature, 0.1 * physics::blackbody_energy_density(temperature), {}, {}, {}});
    return media;
}

std::vector<spectra::Source> particles() {
    const auto law = [](double t, std::size_t) { return 1e-12 / gev * std::pow(t / gev, -2.6); };
    return {sample::source(spectra::Species::electrons, sample::log_nodes(1e-2 * gev, 1e5 * gev, 12), 1, law),
            sample::source(spectra::Species::protons, sample::log_nodes(1e-1 * gev, 1e6 * gev, 12), 1, law)};
}

/// Integral of the emissivity at single frequencies or energies over [from, to], by a quadrature of its own;
/// one for each process, by its name.
std::vector<double>
by_quadrature(Band band, double from, double to, int panels, const emission::Processes& processes) {
    const auto rule = gauss_legendre(10);
    std::vector<double> edges;
    for (int i = 0; i <= panels; ++i) {
        edges.push_back(std::log(from) + std::log(to / from) * i / panels);
    }
    const auto points = composite_points(rule, edges);
    std::vector<Channel> channels;
    for (const double x : points.x) {
        channels.push_back({band, std::exp(x), std::exp(x)});
    }
    const auto emitted =
        emission::emit(sample::box(), everything(), particles(), channels, processes, {}, one_thread);
    std::map<std::string, double> sum;
    for (std::size_t p = 0; p < emitted.emissivity.planes.size(); ++p) {
        const auto& plane = emitted.emissivity.planes[p];
        sum[plane.process] +=
            points.w[plane.channel] * channels[plane.channel].from * sample::value(emitted, 0, p);
    }
    std::vector<double> result;
    for (const auto& [process, value] : sum) {
        result.push_back(value);
    }
    return result;
}

} // namespace

TEST_CASE("a radio band is the mean of the emission over its frequencies", "[emission][channels]") {
    emission::Processes processes;
    const double from = 1e9;
    const double to = 2e9;
    const auto emitted = emission::emit(sample::box(), everything(), particles(), {{Band::radio, from, to}},
                                        processes, {}, one_thread);
    const double expected = by_quadrature(Band::radio, from, to, 3, processes).front() / (to - from);
    // Limited by straight lines between rows of weights, and by sums in single precision.
    CHECK(sample::value(emitted, 0, 0) == Approx(expected).epsilon(1e-4));
}

TEST_CASE("a gamma-ray band is the integral of every process over its energies", "[emission][channels]") {
    emission::Processes processes;
    processes.separate = true;
    for (const auto& [from, to] : {std::pair{0.05 * gev, 0.07 * gev},
                                   {0.1 * gev, 1 * gev},
                                   {1 * gev, 300 * gev},
                                   {1e3 * gev, 1e4 * gev}}) {
        const auto emitted = emission::emit(sample::box(), everything(), particles(),
                                            {{Band::gamma, from, to}}, processes, {}, one_thread);
        const auto expected = by_quadrature(Band::gamma, from, to, 8, processes);
        const auto& planes = emitted.emissivity.planes;
        REQUIRE(planes.size() == 5);
        std::map<std::string, std::size_t> in_order;
        for (std::size_t p = 0; p < planes.size(); ++p) {
            in_order[planes[p].process] = p;
        }
        std::size_t next = 0;
        for (const auto& [process, p] : in_order) {
            INFO(process << " from " << from / gev << " to " << to / gev << " GeV");
            CHECK(sample::value(emitted, 0, p) == Approx(expected[next++]).epsilon(2e-4));
        }
    }
}

TEST_CASE("neighbouring bands add up to the band of both", "[emission][channels]") {
    const auto emitted = emission::emit(
        sample::box(), everything(), particles(),
        {{Band::gamma, gev, 5 * gev}, {Band::gamma, 5 * gev, 100 * gev}, {Band::gamma, gev, 100 * gev}}, {},
        {}, one_thread);
    CHECK(sample::value(emitted, 0, 0) + sample::value(emitted, 0, 1) ==
          Approx(sample::value(emitted, 0, 2)).epsilon(1e-4));
}

TEST_CASE("radiation tabulated in a cell acts as the black body it samples", "[emission][radiation]") {
    const double temperature = 4500;
    const double dilution = 1e-3;
    media::Media tabulated;
    media::Radiation field;
    field.name = "file";
    field.photon_energy = sample::log_nodes(1e-3 * ev, 10 * ev, 40);
    for (const double eps : field.photon_energy) {
        // Planck: n(eps) = 8 pi eps^2/(h c)^3 / (exp(eps/kT) - 1)
        const double hc = constants::planck * constants::speed_of_light;
        field.photon_density.push_back(
            static_cast<float>(dilution * 8 * constants::pi * eps * eps / (hc * hc * hc) /
                               std::expm1(eps / (constants::boltzmann * temperature))));
    }
    tabulated.radiation.push_back(field);
    media::Media black;
    black.radiation.push_back(
        {"file", temperature, dilution * physics::blackbody_energy_density(temperature), {}, {}, {}});
    const std::vector<Channel> channels{{Band::gamma, 1e-4 * gev, 1e-4 * gev},
                                        {Band::gamma, gev, gev},
                                        {Band::gamma, 1e3 * gev, 1e3 * gev},
                                        {Band::gamma, gev, 10 * gev}};
    emission::Processes processes;
    processes.separate = true;
    const auto one =
        emission::emit(sample::box(), tabulated, particles(), channels, processes, {}, one_thread);
    const auto two = emission::emit(sample::box(), black, particles(), channels, processes, {}, one_thread);
    REQUIRE(one.emissivity.planes.size() == 2 * channels.size());
    REQUIRE(two.emissivity.planes.size() == 2 * channels.size());
    for (std::size_t p = 0; p < 2 * channels.size(); ++p) {
        INFO("plane " << p);
        // Straight lines between 40 nodes a decade: second order, (step^2/12) times the curvature.
        CHECK(sample::value(one, 0, p) == Approx(sample::value(two, 0, p)).epsilon(1.5e-3));
    }
}

TEST_CASE("the share missing is what the spectrum beyond its last node would add", "[emission][estimates]") {
    const auto electrons = [](double from, double to) {
        return sample::source(spectra::Species::electrons, sample::log_nodes(from * gev, to * gev, 16), 1,
                              [](double t, std::size_t) { return 1e-12 / gev * std::pow(t / gev, -2.6); });
    };
    media::Media media = everything();
    const std::vector<Channel> channels{{Band::radio, 1e10, 1e10}, {Band::gamma, gev, gev}};
    emission::Processes processes;
    processes.pion_decay = false;
    const auto cut =
        emission::emit(sample::box(), media, {electrons(0.02, 10)}, channels, processes, {}, one_thread);
    const auto whole =
        emission::emit(sample::box(), media, {electrons(0.02, 1e5)}, channels, processes, {}, one_thread);
    for (std::size_t p = 0; p < channels.size(); ++p) {
        const double missing = 1 - sample::value(cut, 0, p) / sample::value(whole, 0, p);
        INFO("channel " << p);
        CHECK(missing > 0.05);
        CHECK(cut.report.planes[p].missing_above == Approx(missing).epsilon(0.02));
        CHECK(whole.report.planes[p].missing_above < 1e-3);
    }
}

TEST_CASE("the energy error covers the true one for a smoothly bent spectrum", "[emission][estimates]") {
    const auto bent = [](double t, std::size_t) {
        return 1e-12 / gev * std::pow(t / gev, -2.0) / (1 + std::pow(t / (5 * gev), 1.2)) *
               std::exp(-t / (300 * gev));
    };
    const auto with = [&](std::size_t per_decade) {
        return emission::emit(
            sample::box(), everything(),
            {sample::source(spectra::Species::electrons, sample::log_nodes(1e-2 * gev, 1e4 * gev, per_decade),
                            1, bent)},
            {{Band::radio, 5e9, 5e9}, {Band::gamma, gev, gev}, {Band::gamma, gev, 100 * gev}}, {}, {},
            one_thread);
    };
    const auto coarse = with(6);
    const auto fine = with(48);
    for (std::size_t p = 0; p < 3; ++p) {
        const double error = std::abs(sample::value(coarse, 0, p) / sample::value(fine, 0, p) - 1);
        INFO("channel " << p << ", true error " << error);
        CHECK(coarse.report.planes[p].energy_error > 0.3 * error);
        CHECK(coarse.report.planes[p].energy_error < 1e-2);
    }
}

TEST_CASE("the estimates look at all columns of a grid whose rows divide the step of the sample",
          "[emission][estimates]") {
    // 8 x 64 x 32 cells, of which every eighth or so is looked at. The first column has a steep spectrum, all
    // others a flat one that is cut off at the last node.
    const auto missing = [](const grid::Grid& grid, const std::function<double(std::size_t)>& steep_share) {
        media::Media media;
        media.field.random_rms.assign(grid.stored_cells(), 5e-6F);
        const auto electrons = sample::source(
            spectra::Species::electrons, sample::log_nodes(0.1 * gev, 10 * gev, 8), grid.stored_cells(),
            [&](double t, std::size_t cell) {
                const double steep = steep_share(cell);
                return 1e-12 / gev *
                       (steep * std::pow(t / gev, -4.0) + (1 - steep) * std::pow(t / gev, -2.2));
            });
        return emission::emit(grid, media, {electrons}, {{Band::radio, 1e10, 1e10}}, {}, {}, one_thread)
            .report.planes[0]
            .missing_above;
    };
    const double mean = missing(sample::box(), [](std::size_t) { return 1.0 / 8; });
    REQUIRE(mean > 0.2);
    CHECK(missing(sample::box(8, 64, 32), [](std::size_t cell) { return cell % 8 == 0 ? 1.0 : 0.0; }) ==
          Approx(mean).epsilon(0.01));
}
