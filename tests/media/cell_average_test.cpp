#include "aureole/base/constants.hpp"
#include "aureole/base/error.hpp"
#include "aureole/media/cell_average.hpp"

#include <catch2/catch.hpp>

#include <cmath>
#include <numeric>

using namespace aureole;
using namespace aureole::media;
using Catch::Matchers::Contains;
using grid::Geometry;
using grid::Grid;
using scenario::ProfileKind;
using scenario::ProfileSpec;

namespace {

constexpr double kpc = constants::kiloparsec;

ProfileSpec profile_of(ProfileKind kind, double radius, double height) {
    ProfileSpec profile;
    profile.kind = kind;
    profile.value = 2.5;
    profile.radius = radius * kpc;
    profile.height = height * kpc;
    profile.core = radius * kpc;
    profile.slope = 1;
    profile.key = "gas.hi";
    return profile;
}

ProfileSpec formula_of(const std::string& text) {
    auto profile = profile_of(ProfileKind::formula, 1, 1);
    profile.formula = text;
    return profile;
}

Grid scaled(Grid grid) {
    for (auto* edges : {&grid.x, &grid.y, &grid.z}) {
        for (double& edge : *edges) {
            edge *= kpc;
        }
    }
    return grid;
}

Grid rings(std::vector<double> r, std::vector<double> z, bool mirrored = false) {
    return scaled({Geometry::rz, std::move(r), {}, std::move(z), mirrored});
}

double only_cell(const ProfileSpec& profile, const Grid& grid) {
    const auto values = cell_averages(profile, grid, 0, 1, false);
    REQUIRE(values.size() == 1);
    return values.front();
}

/// Sum of average times volume.
double mass(const ProfileSpec& profile, const Grid& grid) {
    const auto values = cell_averages(profile, grid, 0, grid.nz(), false);
    const auto volume = grid::cell_volumes(grid);
    return std::inner_product(values.begin(), values.end(), volume.begin(), 0.0);
}

/// 2 pi times the integral of R exp(-R/a) from 0 to b.
double exponential_disc(double a, double b) {
    return 2 * constants::pi * a * a * (1 - (1 + b / a) * std::exp(-b / a));
}

} // namespace

TEST_CASE("a layer thinner than its cell keeps its mean", "[media][average]") {
    for (const double height : {0.001, 0.01, 0.1, 1.0, 10.0}) {
        INFO("height " << height << " kpc in a cell of 1 kpc");
        const auto grid = rings({0, 4}, {0, 1}, true);
        const double radial = exponential_disc(6, 4) / (constants::pi * 16);
        const double exponential = 2.5 * radial * height * (1 - std::exp(-1 / height));
        CHECK(only_cell(profile_of(ProfileKind::double_exponential, 6, height), grid) ==
              Approx(exponential).epsilon(5e-7));
        const double sech2 = 2.5 * radial * height * std::tanh(1 / height);
        CHECK(only_cell(profile_of(ProfileKind::sech2, 6, height), grid) == Approx(sech2).epsilon(3e-6));
    }
}

TEST_CASE("a cell across the plane holds both sides", "[media][average]") {
    const auto across = rings({0, 4}, {-0.3, 0.7});
    const double radial = exponential_disc(6, 4) / (constants::pi * 16);
    const double expected = 2.5 * radial * 0.1 * (2 - std::exp(-3.0) - std::exp(-7.0));
    CHECK(only_cell(profile_of(ProfileKind::double_exponential, 6, 0.1), across) ==
          Approx(expected).epsilon(5e-7));
    const auto below = rings({0, 4}, {-2, -1});
    const auto above = rings({0, 4}, {1, 2});
    const auto profile = profile_of(ProfileKind::sech2, 6, 0.1);
    CHECK(only_cell(profile, below) == Approx(only_cell(profile, above)).epsilon(1e-14));
}

TEST_CASE("cells hold the mass of the disc whatever their size", "[media][average][conservation]") {
    const double expected =
        2.5 * exponential_disc(3 * kpc, 20 * kpc) * 2 * 0.2 * kpc * (1 - std::exp(-10 / 0.2));
    for (const std::size_t cells : {1U, 3U, 10U, 40U}) {
        INFO(cells << " cells along each axis");
        const auto profile = profile_of(ProfileKind::double_exponential, 3, 0.2);
        const auto r = grid::stretched_edges(20 * kpc, cells, 0, false);
        const auto z = grid::stretched_edges(10 * kpc, cells, 0, true);
        CHECK(mass(profile, {Geometry::rz, r, {}, z, false}) == Approx(expected).epsilon(5e-7));
    }
}

TEST_CASE("a Gaussian in boxes has the mass of its error functions", "[media][average][conservation]") {
    const auto profile = profile_of(ProfileKind::gaussian, 3, 0.5);
    const auto erf_part = [](double scale, double from, double to) {
        return 0.5 * scale * std::sqrt(constants::pi) * (std::erf(to / scale) - std::erf(from / scale));
    };
    const double expected =
        2.5 * kpc * kpc * kpc * erf_part(3, -9, 12) * erf_part(3, -10, 10) * erf_part(0.5, -4, 6);
    for (const bool fine : {false, true}) {
        Grid grid{Geometry::xyz, {-9, 1, 12}, {-10, 3, 10}, {-4, 1, 6}, false};
        if (fine) {
            grid = {Geometry::xyz,
                    {-9, -5, -2, 0, 1, 3, 7, 12},
                    {-10, -4, -1, 1, 4, 10},
                    {-4, -1, 0, 1, 6},
                    false};
        }
        CHECK(mass(profile, scaled(grid)) == Approx(expected).epsilon(3e-5));
    }
}

TEST_CASE("a steep beta model or power law holds its mass in coarse cells",
          "[media][average][conservation]") {
    // Integrals over the ball: beta with 1.5 slope = 5/2 has (4 pi/3) r^3 (1 + r^2/c^2)^(-3/2); the box is so
    // large that the rest is beyond it.
    auto beta = profile_of(ProfileKind::beta, 1, 1);
    beta.slope = 20; // exponent -30: total pi^1.5 c^3 Gamma(28.5)/Gamma(30)
    const double expected = 2.5 * kpc * kpc * kpc * std::pow(constants::pi, 1.5) *
                            std::exp(std::lgamma(28.5) - std::lgamma(30.0));
    const auto edges = grid::stretched_edges(8 * kpc, 4, 0, true);
    CHECK(mass(beta, {Geometry::xyz, edges, edges, edges, false}) == Approx(expected).epsilon(2e-5));
    CHECK(mass(beta, rings({0, 3, 8}, {-8, 1, 8})) == Approx(expected).epsilon(2e-5));
    auto power = profile_of(ProfileKind::power_law, 1, 1);
    power.slope = 20; // 4 pi c^3 B(3, 17) = 8 pi c^3 / (19 * 18 * 17)
    CHECK(mass(power, rings({0, 3, 30}, {-30, 1, 30})) ==
          Approx(2.5 * kpc * kpc * kpc * 8 * constants::pi / (19 * 18 * 17)).epsilon(1e-3));
}

TEST_CASE("a mirrored grid holds the upper half of both sides", "[media][average]") {
    const std::vector<double> upper{0, 0.2, 1, 3};
    const std::vector<double> both{-3, -1, -0.2, 0, 0.2, 1, 3};
    for (const auto kind : {ProfileKind::double_exponential, ProfileKind::beta, ProfileKind::gaussian}) {
        const auto profile = profile_of(kind, 3, 0.4);
        const auto half = cell_averages(profile, rings({0, 2, 5}, upper, true), 0, 3, false);
        const auto whole = cell_averages(profile, rings({0, 2, 5}, both), 0, 6, false);
        for (std::size_t k = 0; k < 3; ++k) {
            for (std::size_t i = 0; i < 2; ++i) {
                CHECK(half[i + 2 * k] == Approx(whole[i + 2 * (k + 3)]).epsilon(1e-14));
                CHECK(half[i + 2 * k] == Approx(whole[i + 2 * (2 - k)]).epsilon(1e-14));
            }
        }
    }
}

TEST_CASE("profiles have the values of their formulas", "[media][profile]") {
    const double r = 2 * kpc;
    const double z = -0.5 * kpc;
    const auto shape = [&](ProfileKind kind) { return profile_shape(profile_of(kind, 3, 0.4), r, z); };
    CHECK(shape(ProfileKind::none) == 0);
    CHECK(shape(ProfileKind::constant) == 1);
    CHECK(shape(ProfileKind::double_exponential) == Approx(std::exp(-2.0 / 3 - 1.25)).epsilon(1e-14));
    CHECK(shape(ProfileKind::sech2) ==
          Approx(std::exp(-2.0 / 3) / std::pow(std::cosh(1.25), 2)).epsilon(1e-14));
    CHECK(shape(ProfileKind::gaussian) == Approx(std::exp(-4.0 / 9 - 1.5625)).epsilon(1e-14));
    CHECK(shape(ProfileKind::beta) == Approx(std::pow(1 + 4.25 / 9, -1.5)).epsilon(1e-14));
    CHECK(shape(ProfileKind::power_law) == Approx(1 / (1 + std::sqrt(4.25) / 3)).epsilon(1e-14));
    auto flared = profile_of(ProfileKind::double_exponential, 3, 0.4);
    flared.flare = 4 * kpc;
    CHECK(profile_shape(flared, r, z) == Approx(std::exp(-2.0 / 3 - 1.25 * std::exp(-0.5))).epsilon(1e-14));
    CHECK(profile_shape(profile_of(ProfileKind::sech2, 3, 0.4), 0, 1000 * kpc) == 0); // no overflow of cosh
}

TEST_CASE("a formula is refined where it changes inside a cell", "[media][formula]") {
    const auto grid = rings({0, 2, 6}, {0, 1, 4}, true);
    const auto typed = cell_averages(formula_of("exp(-R/3 - abs(z)/0.3)"), grid, 0, 2, false);
    const auto closed = cell_averages(profile_of(ProfileKind::double_exponential, 3, 0.3), grid, 0, 2, false);
    for (std::size_t c = 0; c < closed.size(); ++c) {
        CHECK(typed[c] == Approx(closed[c]).epsilon(1e-4));
    }
    // A cylinder of radius 1.3 kpc fills (1.3/2)^2 of the innermost ring; four halvings resolve an eighth of
    // a kpc.
    const double inside = only_cell(formula_of("R < 1.3 ? 1 : 0"), rings({0, 2}, {0, 1}));
    CHECK(inside == Approx(2.5 * 0.4225).epsilon(0.04));
    const Grid box = scaled({Geometry::xyz, {-1, 1}, {0, 2}, {0, 2}, false});
    CHECK(only_cell(formula_of("(1 + x) * y * z^2"), box) == Approx(2.5 * 4.0 / 3).epsilon(1e-12));
    CHECK(only_cell(formula_of("r^2 - R^2"), box) == Approx(2.5 * 4.0 / 3).epsilon(1e-12));
}

TEST_CASE("a formula that fails names its key and the place", "[media][formula][bad-input]") {
    const auto grid = rings({0, 2}, {0, 1});
    const auto message = [&](const std::string& text, bool allow_negative) -> std::string {
        try {
            cell_averages(formula_of(text), grid, 0, 1, allow_negative);
        } catch (const Error& error) {
            CHECK(error.kind() == ErrorKind::scenario);
            return error.what();
        }
        return "accepted";
    };
    CHECK_THAT(message("1 - 2*z", false),
               Contains("gas.hi") && Contains("1 - 2*z") && Contains("kpc") && Contains("not negative"));
    CHECK(message("1 - 2*z", true) == "accepted");
    CHECK_THAT(message("log(-1 - R)", true), Contains("found") && Contains("nan") && Contains("x = "));
    CHECK_THAT(message("1/(z - z)", true), Contains("inf"));
    const auto from_file = profile_of(ProfileKind::file, 1, 1);
    CHECK_THROWS_WITH(cell_averages(from_file, grid, 0, 1, false),
                      Contains("gas.hi.profile") && Contains("file"));
}

TEST_CASE("averages in parallel are those of one thread to the bit", "[media][average]") {
    const auto grid = rings({0, 1, 2, 5}, {0, 0.1, 0.3, 1, 2, 5}, true);
    RunContext two;
    two.threads = 2;
    const auto profile = profile_of(ProfileKind::sech2, 3, 0.2);
    const auto one = cell_averages(profile, grid, false, RunContext{});
    CHECK(one == cell_averages(profile, grid, false, two));
    const auto planes = cell_averages(profile, grid, 0, grid.nz(), false);
    for (std::size_t c = 0; c < one.size(); ++c) {
        CHECK(one[c] == static_cast<float>(planes[c]));
    }
}

TEST_CASE("the averages of a separable profile are the products of its factors", "[media][cell-average]") {
    const RunContext context;
    const Grid boxes = scaled({Geometry::xyz, {-4, -1, 0.5, 3}, {-2, 0, 5}, {-3, -0.5, 0.25, 2}, false});
    const Grid ringed = rings({0, 0.5, 2, 9}, {0, 0.1, 1, 6}, true);
    for (const auto kind : {ProfileKind::double_exponential, ProfileKind::sech2, ProfileKind::gaussian}) {
        const auto profile = profile_of(kind, 2, 0.7);
        for (const Grid* grid : {&boxes, &ringed}) {
            REQUIRE(average_factors(profile, *grid));
            const auto whole = cell_averages(profile, *grid, false, context);
            const auto direct = cell_averages(profile, *grid, 0, grid->nz(), false);
            REQUIRE(whole.size() == direct.size());
            for (std::size_t cell = 0; cell < direct.size(); ++cell) {
                CHECK(static_cast<double>(whole[cell]) == Approx(direct[cell]).epsilon(1e-7)); // floats
            }
        }
        auto flared = profile;
        flared.flare = 5 * kpc;
        CHECK_FALSE(average_factors(flared, ringed));
    }
    CHECK_FALSE(average_factors(profile_of(ProfileKind::beta, 2, 1), ringed));
}
