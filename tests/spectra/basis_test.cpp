#include "aureole/base/error.hpp"
#include "aureole/spectra/basis.hpp"

#include <catch2/catch.hpp>

#include <cmath>
#include <vector>

using aureole::spectra::Basis;

namespace {

std::vector<double> log_nodes(double from, double to, std::size_t n) {
    std::vector<double> nodes;
    for (std::size_t i = 0; i < n; ++i) {
        nodes.push_back(from * std::pow(to / from, static_cast<double>(i) / static_cast<double>(n - 1)));
    }
    return nodes;
}

/// Largest relative error of the interpolated M of N = T^-s exp(-T/cut), below the cut.
double interpolation_error(std::size_t nodes, double s, double cut) {
    const Basis basis(log_nodes(1, 1e4, nodes));
    const auto m = [&](double t) {
        return std::pow(t, aureole::spectra::weighting - s) * std::exp(-t / cut);
    };
    std::vector<float> values;
    for (const double t : basis.energy()) {
        values.push_back(static_cast<float>(m(t)));
    }
    double worst = 0;
    for (double t = 1.01; t < std::min(cut, 9.9e3); t *= 1.013) {
        worst = std::max(worst, std::abs(basis.value(values, t) / m(t) - 1));
    }
    return worst;
}

} // namespace

TEST_CASE("the weighted cubic is exact for the spectrum of its own weight", "[spectra]") {
    CHECK(interpolation_error(33, aureole::spectra::weighting, 1e300) < 5e-7); // float storage
}

TEST_CASE("the weighted cubic converges at fourth order", "[spectra][order]") {
    const double coarse = interpolation_error(33, 3.5, 1e3);
    const double fine = interpolation_error(65, 3.5, 1e3);
    CHECK(std::log2(coarse / fine) == Approx(4.0).epsilon(0).margin(0.5));
}

TEST_CASE("Lagrange weights of every interval add up to one and reproduce cubics on uneven nodes",
          "[spectra]") {
    const Basis basis({1, 1.5, 4, 5, 11, 30, 31, 80});
    for (std::size_t j = 0; j < basis.intervals(); ++j) {
        for (double t = 0; t <= 1; t += 0.125) {
            const double place = std::log(basis.energy()[j]) * (1 - t) + std::log(basis.energy()[j + 1]) * t;
            const auto weight = basis.cubic(j, place);
            double one = 0;
            double cube = 0;
            for (std::size_t s = 0; s < 4; ++s) {
                one += weight[s];
                cube += weight[s] * std::pow(std::log(basis.energy()[basis.stencil_start(j) + s]), 3);
            }
            CHECK(one == Approx(1).epsilon(1e-12));
            CHECK(cube == Approx(std::pow(place, 3)).epsilon(1e-10).margin(1e-12));
        }
    }
}

TEST_CASE("a spectrum that ends sharply never interpolates below zero", "[spectra]") {
    const Basis basis(log_nodes(1, 1e3, 25));
    for (std::size_t last = 0; last < 25; ++last) {
        std::vector<float> values(25, 0.0F);
        for (std::size_t i = 0; i <= last; ++i) {
            values[i] = static_cast<float>(std::pow(0.7, i));
        }
        std::vector<std::size_t> found(basis.intervals());
        const std::size_t count = basis.negative_intervals(values.data(), found.data());
        CHECK(count <= 3);
        if (last < 23) {
            CHECK(count >= 1);
        }
        for (double t = 1; t < 1e3; t *= 1.01) {
            REQUIRE(basis.value(values, t) >= 0);
        }
    }
}

TEST_CASE("smooth spectra never fall back to straight lines", "[spectra]") {
    const Basis basis(log_nodes(1, 1e4, 65));
    std::vector<float> values;
    for (const double t : basis.energy()) {
        values.push_back(static_cast<float>(1e-20 * std::pow(t, -0.7) * std::exp(-t / 2e3)));
    }
    std::vector<std::size_t> found(basis.intervals());
    CHECK(basis.negative_intervals(values.data(), found.data()) == 0);
}

TEST_CASE("energy nodes must rise", "[spectra][bad-input]") {
    CHECK_THROWS_AS(Basis({1.0}), aureole::Error);
    CHECK_THROWS_AS(Basis({1.0, 1.0}), aureole::Error);
    CHECK_THROWS_AS(Basis({-1.0, 1.0}), aureole::Error);
    CHECK_THROWS_AS(Basis({1.0, NAN, 2.0}), aureole::Error);
}
