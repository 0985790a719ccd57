#include "aureole/base/quadrature.hpp"

#include <catch2/catch.hpp>

#include <array>

using namespace aureole;

TEST_CASE("Gauss-Legendre nodes and weights agree with published tables", "[base][literature]") {
    // Abramowitz & Stegun 1964, table 25.4, n = 5 and n = 10 (first positive node): from memory, exact
    // radicals for n = 5
    const auto five = gauss_legendre(5);
    CHECK(five.node[4] == Approx(std::sqrt(5 + 2 * std::sqrt(10.0 / 7)) / 3).epsilon(2e-15));
    CHECK(five.node[3] == Approx(std::sqrt(5 - 2 * std::sqrt(10.0 / 7)) / 3).epsilon(2e-15));
    CHECK(five.node[2] == 0);
    CHECK(five.weight[2] == Approx(128.0 / 225).epsilon(2e-15));
    CHECK(five.weight[0] == Approx((322 - 13 * std::sqrt(70.0)) / 900).epsilon(2e-15));
    const auto ten = gauss_legendre(10);
    CHECK(ten.node[5] == Approx(0.148874338981631).epsilon(0).margin(6e-16));
    CHECK(ten.weight[5] == Approx(0.295524224714753).epsilon(0).margin(6e-16));
}

TEST_CASE("a Gauss-Legendre rule is exact up to degree 2n - 1 and no further", "[base]") {
    for (const int n : {1, 2, 3, 8, 16, 33, 64}) {
        const auto rule = gauss_legendre(n);
        INFO("points " << n);
        for (int degree = 0; degree < 2 * n; ++degree) {
            // on [0, 2]: odd degrees count as well
            const double exact = std::pow(2.0, degree + 1) / (degree + 1);
            const double found = integrate(
                rule, [&](double x) { return std::pow(x, degree); }, 0, 2);
            REQUIRE(found == Approx(exact).epsilon(1e-14 + 2e-15 * degree));
        }
        if (n <= 3) {
            const double beyond = integrate(
                rule, [&](double x) { return std::pow(x, 2 * n); }, 0, 2);
            CHECK(std::abs(beyond / (std::pow(2.0, 2 * n + 1) / (2 * n + 1)) - 1) > 1e-3);
        }
    }
}

TEST_CASE("composite rules add up their pieces and keep the sign of the interval", "[base]") {
    const auto rule = gauss_legendre(8);
    const auto f = [](double x) { return std::exp(-x) * std::cos(3 * x); };
    const auto whole = [](double x) { return std::exp(-x) * (3 * std::sin(3 * x) - std::cos(3 * x)) / 10; };
    const double exact = whole(5) - whole(-1);
    CHECK(integrate_panels(rule, f, -1, 5, 8) == Approx(exact).epsilon(1e-13));
    CHECK(integrate_panels(rule, f, 5, -1, 8) == Approx(-exact).epsilon(1e-13));
    const std::array<double, 5> edges{-1, 0, 0.7, 2.5, 5};
    CHECK(integrate_pieces(rule, f, edges) == Approx(exact).epsilon(1e-8));
    const auto points = composite_points(rule, edges);
    double sum = 0;
    for (std::size_t i = 0; i < points.x.size(); ++i) {
        sum += points.w[i] * f(points.x[i]);
    }
    CHECK(sum == Approx(integrate_pieces(rule, f, edges)).epsilon(1e-14));
    CHECK(integrate_pieces(rule, f, std::array<double, 1>{1}) == 0);
}
