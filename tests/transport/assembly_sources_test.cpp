#include "transport/galaxy.hpp"

#include "aureole/base/error.hpp"
#include "aureole/transport/particle.hpp"
#include "aureole/transport/sources.hpp"

#include <catch2/catch.hpp>

#include <numeric>

using namespace aureole;
using namespace aureole::transport;
using Catch::Matchers::Contains;
using galaxy::kpc;

namespace {

double sum_over(const grid::Grid& grid, const SourceDensity& source) {
    const auto volume = grid::cell_volumes(grid);
    return (grid.mirrored ? 2 : 1) *
           std::inner_product(volume.begin(), volume.end(), source.density.begin(), 0.0);
}

/// int T Q dp by Simpson's rule in ln p.
double power_of(const SourceTerm& term, double low, double high, double step_ln) {
    constexpr int panels = 20000;
    const double h = std::log(high / low) / (2 * panels);
    double sum = 0;
    for (int i = 0; i <= 2 * panels; ++i) {
        const double p = low * std::exp(h * i);
        const double weight = i == 0 || i == 2 * panels ? 1 : (i % 2 == 1 ? 4 : 2);
        sum += weight * p * particle_of_momentum(p, term.rest_energy).kinetic_energy *
               injected(term, p, step_ln);
    }
    return sum * h / 3;
}

double momentum_of(double rigidity) {
    return rigidity * constants::elementary_charge / constants::speed_of_light;
}

} // namespace

TEST_CASE("a disc of 50 pc on cells of 500 pc keeps every particle", "[transport][sources]") {
    grid::Grid grid;
    grid.geometry = grid::Geometry::rz;
    grid.mirrored = true;
    for (int i = 0; i <= 40; ++i) {
        grid.x.push_back(0.5 * kpc * i);
        grid.z.push_back(0.5 * kpc * i);
    }
    const auto source =
        source_density({.kind = "exponential", .radius = 3 * kpc, .width = 0, .height = 0.05 * kpc}, grid);
    CHECK(sum_over(grid, source) == Approx(1).epsilon(1e-13));
    const double x = 20.0 / 3;
    CHECK(source.inside == Approx((1 - (1 + x) * std::exp(-x)) * (1 - std::exp(-400.0))).epsilon(1e-12));
    const auto volume = grid::cell_volumes(grid);
    const auto part = [](double a, double b) { return (1 + a) * std::exp(-a) - (1 + b) * std::exp(-b); };
    for (const std::size_t i : {std::size_t{0}, std::size_t{7}, std::size_t{39}}) {
        const double from = static_cast<double>(i) / 6;
        const double expected = 0.5 * part(from, from + 1.0 / 6) * (1 - std::exp(-10.0)) / source.inside;
        CHECK(source.density[i] * volume[i] == Approx(expected).epsilon(1e-11));
    }
    CHECK(source.density[40] / source.density[0] == Approx(std::exp(-10.0)).epsilon(1e-9));
}

TEST_CASE("every shape of sources adds up to one in a grid that holds it", "[transport][sources]") {
    const auto grid = galaxy::rings(40, 30, 60 * kpc, 15 * kpc);
    for (const char* kind : {"exponential", "green_2015", "case_bhattacharya_1996", "case_bhattacharya_1998",
                             "lorimer_2006", "yusifov_kucuk_2004", "ring", "nucleus", "shell"}) {
        INFO(kind);
        const auto source =
            source_density({.kind = kind, .radius = 3 * kpc, .width = 0.3 * kpc, .height = 0.1 * kpc}, grid);
        CHECK(sum_over(grid, source) == Approx(1).epsilon(1e-12));
        CHECK(source.inside == Approx(1).margin(1e-6));
    }
}

TEST_CASE("a Gaussian nucleus has the error functions of its layers", "[transport][sources]") {
    auto grid = galaxy::rings(20, 20);
    const double w = 0.4 * kpc;
    const auto source = source_density({.kind = "nucleus", .radius = 0, .width = w, .height = 0}, grid);
    const auto volume = grid::cell_volumes(grid);
    for (const std::size_t k : {0U, 3U, 6U}) {
        double layer = 0;
        for (std::size_t i = 0; i < 20; ++i) {
            layer += volume[i + 20 * k] * source.density[i + 20 * k];
        }
        const double s = w * std::sqrt(2.0);
        const double expected = 0.5 * (std::erf(grid.z[k + 1] / s) - std::erf(grid.z[k] / s));
        CHECK(layer == Approx(expected).epsilon(1e-9));
    }
}

TEST_CASE("the sources inject the power that is asked", "[transport][sources]") {
    const auto grid = galaxy::rings(6, 6);
    SourceSpec spec{.shape = {.kind = "exponential", .radius = 3 * kpc, .width = 0, .height = 0.1 * kpc},
                    .spectrum = {},
                    .power = 3e40};
    spec.spectrum.least_rigidity = 0.3 * galaxy::gigavolt;
    for (const double rest : {constants::proton_rest_energy, constants::electron_rest_energy}) {
        spec.spectrum.slope = 2.3;
        spec.spectrum.break_rigidity.reset();
        spec.spectrum.cutoff_rigidity = 1e5 * galaxy::gigavolt;
        const double low = momentum_of(1e-3 * galaxy::gigavolt);
        auto term = source_term(spec, grid, rest, 0.144);
        CHECK(power_of(term, low, momentum_of(4e6 * galaxy::gigavolt), 0.144) == Approx(3e40).epsilon(1e-8));
        spec.spectrum.break_rigidity = 5 * galaxy::gigavolt;
        spec.spectrum.slope = 1.6;
        spec.spectrum.slope_above = 2.7;
        spec.spectrum.cutoff_rigidity.reset();
        term = source_term(spec, grid, rest, 0.144);
        // what lies above 1e9 GV is (1e9/5)^-0.7 of it
        CHECK(power_of(term, low, momentum_of(1e9 * galaxy::gigavolt), 0.144) == Approx(3e40).epsilon(2e-6));
    }
}

TEST_CASE("sources that cannot be are refused by name", "[transport][sources][bad-input]") {
    const auto grid = galaxy::rings(6, 6);
    const auto refused = [&](const SourceSpec& spec, const char* what) {
        CHECK_THROWS_WITH(source_term(spec, grid, constants::proton_rest_energy), Contains(what));
    };
    SourceSpec good{.shape = {.kind = "exponential", .radius = 3 * kpc, .width = 0, .height = 0.1 * kpc},
                    .spectrum = {},
                    .power = 1e40};
    CHECK_NOTHROW(source_term(good, grid, constants::proton_rest_energy));
    auto bad = good;
    bad.shape.kind = "spiral";
    refused(bad, "'spiral'");
    bad = good;
    bad.shape.height = 0;
    refused(bad, "height");
    bad = good;
    bad.shape = {.kind = "ring", .radius = 100 * kpc, .width = 1 * kpc, .height = 0.1 * kpc};
    refused(bad, "inside the grid");
    bad = good;
    bad.power = 0;
    refused(bad, "power");
    bad = good;
    bad.spectrum.slope = 2;
    refused(bad, "infinite");
    bad = good;
    bad.spectrum.slope = 3.1;
    refused(bad, "least rigidity");
    CHECK_THROWS_WITH(source_density(good.shape, galaxy::box(4, 4, 10 * kpc, 5 * kpc)), Contains("XYZ"));
}
