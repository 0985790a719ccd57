#include "aureole/base/constants.hpp"
#include "aureole/base/error.hpp"
#include "aureole/base/quadrature.hpp"
#include "aureole/media/cell_average.hpp"
#include "aureole/physics/published_spectra.hpp"
#include "aureole/spectra/closed_form.hpp"

#include <catch2/catch.hpp>

#include <cmath>

using namespace aureole;
using namespace aureole::spectra;
using Catch::Matchers::Contains;

namespace {

constexpr double gev = constants::gigaelectronvolt;
constexpr double kpc = constants::kiloparsec;

scenario::Scenario parsed(const std::string& toml) {
    return scenario::parse(toml, "test.toml", {});
}

grid::Grid sample_grid() {
    return {grid::Geometry::rz,
            {0, kpc, 3 * kpc, 8 * kpc},
            {},
            {0, 0.2 * kpc, kpc, 2 * kpc, 5 * kpc, 9 * kpc},
            true};
}

std::vector<float> read_all(const Source& source) {
    std::vector<float> values(source.cells * source.basis->nodes());
    source.open()(0, source.cells, values.data(), source.basis->nodes());
    return values;
}

/// Slope d ln N / d ln T.
double slope_at(const std::function<double(double)>& shape, double t) {
    return std::log(shape(t * 1.001) / shape(t / 1.001)) / (2 * std::log(1.001));
}

/// Integral of M(T) T^power dT in the basis, Gauss-Legendre in ln T.
double integral(const Basis& basis, std::span<const float> weighted, double power) {
    const auto rule = gauss_legendre(6);
    double sum = 0;
    for (std::size_t i = 0; i < basis.intervals(); ++i) {
        sum += integrate(
            rule, [&](double u) { return basis.value(weighted, std::exp(u)) * std::exp((power + 1) * u); },
            std::log(basis.energy()[i]), std::log(basis.energy()[i + 1]));
    }
    return sum;
}

} // namespace

TEST_CASE("power laws are 1 at the reference energy and have their slopes", "[spectra][closed]") {
    const auto power = spectral_shape(parsed("electrons.slope = 2.4\nelectrons.reference_energy = '2 GeV'"),
                                      Species::electrons);
    CHECK(power(2 * gev) == Approx(1).epsilon(1e-14));
    CHECK(power(20 * gev) == Approx(std::pow(10, -2.4)).epsilon(1e-12));
    const auto cut = spectral_shape(parsed("electrons.cutoff_energy = '5 GeV'"), Species::electrons);
    CHECK(cut(10 * gev) / cut(gev) == Approx(std::pow(10, -2.7) * std::exp(-1.8)).epsilon(1e-12));
}

TEST_CASE("a broken power law has its two slopes however sharp the break", "[spectra][closed]") {
    for (const double width : {0.01, 0.1, 0.5, 2.0}) {
        INFO("width " << width);
        const auto shape = spectral_shape(parsed("[electrons]\nspectrum = 'broken_power_law'\nslope = "
                                                 "2\nslope_above = 3\nbreak_energy = '5 GeV'\n"
                                                 "break_smoothness = " +
                                                 std::to_string(width)),
                                          Species::electrons);
        CHECK(shape(gev) == Approx(1).epsilon(1e-14));
        CHECK(slope_at(shape, 5 * gev) == Approx(-2.5).epsilon(1e-6));
        const double far = 1e-4 + 1e3 * std::exp(-std::log(1e6) / width); // 1/(1 + x^(1/width)) at x = 1e6
        CHECK(slope_at(shape, 5e6 * gev) == Approx(-3).margin(far));
        CHECK(slope_at(shape, 5e-6 * gev) == Approx(-2).margin(far));
        CHECK(std::isfinite(shape(1e12 * gev)));
        CHECK(shape(1e12 * gev) > 0);
    }
}

TEST_CASE("published spectra are taken as they are", "[spectra][closed]") {
    const auto electrons = spectral_shape(parsed("electrons.spectrum = 'local'"), Species::electrons);
    CHECK(electrons(3 * gev) == physics::potgieter_2015_electrons(3 * gev));
    const auto older = parsed("[protons]\nspectrum = 'local'\nlocal = 'dermer_1986'");
    CHECK(spectral_shape(older, Species::protons)(3 * gev) == physics::dermer_1986_protons(3 * gev));
}

TEST_CASE("energy nodes run evenly from end to end", "[spectra][closed]") {
    const auto basis =
        scenario_basis(parsed("[protons]\nenergy_from = '0.1 GeV'\nenergy_to = '1 TeV'\nenergy_nodes = 41"),
                       Species::protons);
    REQUIRE(basis->nodes() == 41);
    CHECK(basis->energy().front() == Approx(0.1 * gev).epsilon(1e-14));
    CHECK(basis->energy().back() == Approx(1000 * gev).epsilon(1e-14));
    for (std::size_t i = 1; i < 41; ++i) {
        CHECK(basis->energy()[i] / basis->energy()[i - 1] == Approx(std::pow(10, 0.1)).epsilon(1e-12));
    }
    CHECK_THROWS_WITH(scenario_basis(parsed("protons.energy_from = '1 PeV'\nprotons.energy_to = '1 GeV'"),
                                     Species::protons),
                      Contains("protons.energy_from"));
}

TEST_CASE("closed forms are norm times shape times the mean profile of the cell", "[spectra][closed]") {
    const auto scenario =
        parsed("[electrons]\nnorm = '2e-11 cm-3 GeV-1'\nslope = 2.3\nreference_energy = '3 GeV'\n"
               "[electrons.space]\nprofile = 'double_exponential'\nradius = '4 kpc'\n"
               "height = '0.7 kpc'\nvalue = 1\n");
    const auto grid = sample_grid();
    const auto source = closed_form(scenario, grid, Species::electrons, RunContext{});
    REQUIRE(source.cells == grid.stored_cells());
    const auto values = read_all(source);
    const auto mean = media::cell_averages(scenario.profile("electrons.space"), grid, 0, grid.nz(), false);
    const std::size_t nodes = source.basis->nodes();
    for (std::size_t v = 0; v < values.size(); ++v) {
        const double t = source.basis->energy()[v % nodes];
        const double expected =
            2e-11 / gev * std::pow(t / (3 * gev), -2.3) * std::pow(t, weighting) * mean[v / nodes];
        REQUIRE(values[v] == Approx(expected).epsilon(2e-7));
    }
}

TEST_CASE("a height that changes with energy is that height at every node", "[spectra][closed]") {
    const std::string text =
        "[electrons]\nheight_slope = -0.4\nreference_energy = '2 GeV'\nenergy_nodes = 7\n"
        "energy_from = '0.2 GeV'\nenergy_to = '20 GeV'\n"
        "[electrons.space]\nprofile = 'sech2'\nradius = '4 kpc'\nheight = '1.5 kpc'\n";
    const auto scenario = parsed(text);
    const auto grid = sample_grid();
    const auto source = closed_form(scenario, grid, Species::electrons, RunContext{});
    const auto values = read_all(source);
    for (std::size_t i = 0; i < 7; ++i) {
        const double t = source.basis->energy()[i];
        auto profile = scenario.profile("electrons.space");
        profile.height *= std::pow(t / (2 * gev), -0.4);
        const auto mean = media::cell_averages(profile, grid, 0, grid.nz(), false);
        const double norm = scenario.quantity("electrons.norm") * std::pow(t / (2 * gev), -2.7);
        for (std::size_t c = 0; c < mean.size(); ++c) {
            REQUIRE(values[c * 7 + i] == Approx(norm * mean[c] * std::pow(t, weighting)).epsilon(2e-7));
        }
    }
}

TEST_CASE("an energy density is that of the spectra it becomes", "[spectra][closed][conservation]") {
    const auto scenario =
        parsed("[protons]\nslope = 2.4\nenergy_from = '0.1 GeV'\nenergy_to = '1 TeV'\nenergy_nodes = 41\n");
    const auto shape = spectral_shape(scenario, Species::protons);
    const auto source = from_energy_density({1e-12F, 0.0F, 3e-12F}, shape,
                                            scenario_basis(scenario, Species::protons), Species::protons);
    const auto values = read_all(source);
    const std::size_t nodes = source.basis->nodes();
    // u is the integral of T N dT = M T^-1.5 dT; the basis holds a power law of M to 1e-5 at 10 nodes a
    // decade.
    const std::span<const float> all(values);
    CHECK(integral(*source.basis, all.subspan(0, nodes), -1.5) == Approx(1e-12).epsilon(2e-5));
    CHECK(integral(*source.basis, all.subspan(nodes, nodes), -1.5) == 0);
    CHECK(integral(*source.basis, all.subspan(2 * nodes, nodes), -1.5) == Approx(3e-12).epsilon(2e-5));
    CHECK_THROWS_WITH(from_energy_density(
                          {1.0F}, [](double) { return 0.0; }, source.basis, Species::protons),
                      Contains("protons") && Contains("without energy"));
}

TEST_CASE("joining cells keeps the particles", "[spectra][coarsened][conservation]") {
    const auto scenario = parsed("[electrons]\nenergy_nodes = 9\n[electrons.space]\nheight = '0.8 kpc'\n");
    for (const bool box : {false, true}) {
        auto fine = sample_grid();
        if (box) {
            fine = {grid::Geometry::xyz,
                    {-3 * kpc, -kpc, 0, 2 * kpc},
                    {-kpc, 0, kpc, 4 * kpc, 5 * kpc},
                    {-2 * kpc, -kpc, 0, kpc, 3 * kpc},
                    false};
        }
        const auto source = closed_form(scenario, fine, Species::electrons, RunContext{});
        const auto joined = coarsened({source}, fine).front();
        const auto coarse = grid::coarsened(fine);
        REQUIRE(joined.cells == coarse.stored_cells());
        CHECK(joined.cells < source.cells);
        const auto before = read_all(source);
        const auto after = read_all(joined);
        const auto fine_volume = grid::cell_volumes(fine);
        const auto coarse_volume = grid::cell_volumes(coarse);
        for (std::size_t i = 0; i < 9; ++i) {
            double sum_before = 0;
            double sum_after = 0;
            for (std::size_t c = 0; c < source.cells; ++c) {
                sum_before += fine_volume[c] * static_cast<double>(before[c * 9 + i]);
            }
            for (std::size_t c = 0; c < joined.cells; ++c) {
                sum_after += coarse_volume[c] * static_cast<double>(after[c * 9 + i]);
            }
            CHECK(sum_after == Approx(sum_before).epsilon(5e-7)); // shares and sums in 24 bits
        }
        // Any portion gives the same bits.
        std::vector<float> one(9);
        const auto reader = joined.open();
        for (std::size_t c = 0; c < joined.cells; ++c) {
            reader(c, 1, one.data(), 9);
            for (std::size_t i = 0; i < 9; ++i) {
                REQUIRE(one[i] == after[c * 9 + i]);
            }
        }
    }
}

TEST_CASE("cells joined are the means of their parts", "[spectra][coarsened]") {
    const grid::Grid fine{grid::Geometry::xyz, {0, 1, 3}, {0, 2, 3}, {0, 1, 2}, false};
    Source source;
    source.basis = std::make_shared<const Basis>(std::vector<double>{1, 2});
    source.cells = 8;
    source.open = [] {
        return [](std::size_t first, std::size_t count, float* weighted, std::size_t stride) {
            for (std::size_t c = 0; c < count; ++c) {
                weighted[c * stride] = static_cast<float>(first + c);
                weighted[c * stride + 1] = 1;
            }
        };
    };
    const auto values = read_all(coarsened({source}, fine).front());
    REQUIRE(values.size() == 2);
    // Volumes 2, 4, 1, 2 in each plane: (0*2 + 1*4 + 2*1 + 3*2 + (4*2 + 5*4 + 6*1 + 7*2)) / 18
    CHECK(values[0] == Approx(60.0 / 18).epsilon(3e-7));
    CHECK(values[1] == Approx(1).epsilon(3e-7));
}

TEST_CASE("a space of kind file is refused", "[spectra][closed][bad-input]") {
    CHECK_THROWS_WITH(closed_form(parsed("input.grid = 'x.fits'\nelectrons.space.profile = 'file'"),
                                  sample_grid(), Species::electrons, RunContext{}),
                      Contains("electrons.space.profile"));
}
