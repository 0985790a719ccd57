#include "synthetic.hpp"

#include "aureole/profiles/fit.hpp"
#include "aureole/profiles/models.hpp"
#include "aureole/profiles/noise.hpp"
#include "aureole/profiles/profile.hpp"

#include <Eigen/Eigenvalues>
#include <catch2/catch.hpp>

#include <algorithm>
#include <cmath>

using namespace aureole::profiles;
using synthetic::kpc;
using synthetic::to_sigma;

namespace {

constexpr double pixel = 0.15, narrow = 0.36, wide = 0.6; // kpc; beams before and after smoothing
constexpr double truth = 1.4;                             // kpc
constexpr std::size_t columns = 120, rows = 160;

/// Noise of a map with a beam of 0.36 kpc, smoothed to 0.6 kpc.
aureole::maps::Image smoothed_noise(synthetic::Normal& normal) {
    auto image = synthetic::blank_map(columns, rows, pixel, narrow);
    const auto noise = synthetic::beam_noise(columns, rows, narrow * to_sigma / pixel, normal);
    std::transform(noise.begin(), noise.end(), image.value.begin(),
                   [](double value) { return static_cast<float>(value); });
    const double beam = wide * kpc / synthetic::distance;
    return aureole::maps::convolve(image, {beam, beam, 0});
}

/// Correlated like a beam of covariance 2C' - C: the kernel C' - C folded in twice widens C.
LagTable exact_correlation(const aureole::maps::PixelGrid& pixels) {
    const double beam = std::sqrt(2 * wide * wide - narrow * narrow) * kpc / synthetic::distance;
    return beam_correlation(pixels, {beam, beam, 0});
}

struct Tally {
    double covered = 0, pull = 0, away = 0, claimed = 0, chi2 = 0, dof = 0, independent = 0;
    void add(const HeightResult& fit) {
        const double off = fit.halo().h / kpc - truth;
        const double error = fit.halo().h_err_noise / kpc;
        covered += std::abs(off) <= error ? 1 : 0;
        pull += off / error;
        away += off * off;
        claimed += error * error;
        chi2 += fit.chi2;
        dof += fit.dof;
        independent += fit.independent;
    }
};

struct Comparison {
    Tally measured, exact;
};

/// Heights of an exponential layer under smoothed noise, weighted with the correlation measured in each map
/// and with the exact one.
Comparison compare(double bin, int draws, std::uint64_t seed) {
    synthetic::Normal normal(seed);
    auto spec = synthetic::spec(1, 3.0, bin, 5.4);
    auto image = synthetic::blank_map(columns, rows, pixel, wide);
    synthetic::fill(image, spec, [](double, double y) {
        return 25 * convolved(Model::exponential, truth, wide * to_sigma, y).value;
    });
    const auto clean = image.value;
    Plan exact{lay_strips(image.pixels, spec), {}};
    const std::vector<unsigned char> good(clean.size(), 1);
    exact.covariance.push_back(
        unit_covariance(image.pixels, exact.strips[0], good, exact_correlation(image.pixels)));
    spec.source_free_height = 8.2 * kpc; // the layer is at 0.3 % of its peak: 0.07 rms
    Comparison result;
    for (int draw = 0; draw < draws; ++draw) {
        const auto noise = smoothed_noise(normal);
        // In units of the rms after smoothing, (C/(2C' - C))^(1/2) in brightness, per beam C'/C more.
        const double scale = std::sqrt(2 - std::pow(narrow / wide, 2)) * narrow / wide;
        for (std::size_t k = 0; k < clean.size(); ++k) {
            image.value[k] = clean[k] + static_cast<float>(scale * static_cast<double>(noise.value[k]));
        }
        spec.noise = NoiseFrom::autocorrelation;
        spec.rms.reset();
        const HeightResult measured = fit_height(measure(image, spec).back(), Model::exponential, {});
        REQUIRE(measured.status == Status::ok);
        result.measured.add(measured);
        spec.noise = NoiseFrom::beam;
        spec.rms = 1;
        result.exact.add(fit_height(measure(image, spec, exact).back(), Model::exponential, {}));
    }
    return result;
}

} // namespace

TEST_CASE("heights of smoothed maps with bins of half a beam are unbiased and their errors cover 68 %",
          "[profiles][montecarlo]") {
    constexpr int draws = 200;
    const auto [measured, exact] = compare(0.3, draws, 20240917); // fixed beforehand
    const double share = measured.covered / draws;
    CHECK(share > 0.60);
    CHECK(share < 0.75);
    CHECK(std::abs(measured.pull / draws) < 4 / std::sqrt(draws));
    // 200 noise beams without sources: weights that cost 1 % of precision, errors 3 % low, of which the
    // border, where smoothing finds nothing beyond the map, makes half.
    CHECK(std::sqrt(measured.away / exact.away) < 1.03);
    CHECK(std::sqrt(measured.claimed / exact.claimed) == Approx(1).epsilon(0).margin(0.06));
    CHECK(measured.chi2 / measured.dof > 0.85);
    CHECK(measured.chi2 / measured.dof < 1.25);
    CHECK(measured.independent / exact.independent == Approx(1).epsilon(0).margin(0.03));
}

TEST_CASE("heights of smoothed maps keep their precision with bins of a quarter of a beam",
          "[profiles][montecarlo]") {
    constexpr int draws = 60;
    const auto [measured, exact] = compare(0.15, draws, 20240918);
    CHECK(std::abs(measured.pull / draws) < 4 / std::sqrt(draws));
    CHECK(std::sqrt(measured.away / exact.away) < 1.05);
    CHECK(std::sqrt(measured.claimed / exact.claimed) == Approx(1).epsilon(0).margin(0.08));
    CHECK(measured.independent / exact.independent == Approx(1).epsilon(0).margin(0.05));
}

TEST_CASE("no covariance of boxes from a measured correlation has a negative eigenvalue", "[profiles]") {
    synthetic::Normal normal(20240919);
    auto spec = synthetic::spec(1, 3.0, 0.15, 5.4);
    for (const double height : {8.2, 11.0}) {
        const auto image = smoothed_noise(normal);
        spec.source_free_height = height * kpc;
        const auto free = source_free_pixels(image.pixels, spec);
        LagTable found = measured_correlation(image, free, measure_noise(image, free));
        CHECK(found.at(0, 0) == Approx(1));
        CHECK(found.at(13, 0) == 0); // 3 beams are 12 pixels
        CHECK(found.at(3, 5) == Approx(found.at(-3, -5)).epsilon(1e-12));
        const double least = found.least_eigenvalue;
        // A correlation exp(-d^2/2s^2) has sum rho^2 = pi s^2; the noise of the measured one adds to it.
        const double s = std::sqrt(2 * wide * wide - narrow * narrow) * to_sigma / pixel;
        const auto pixels = static_cast<double>(std::count(free.begin(), free.end(), 1));
        CHECK(least > 0.8 * 2 * aureole::constants::pi * s * s / pixels);
        CHECK(least < 2.5 * 2 * aureole::constants::pi * s * s / pixels);
        const std::vector<unsigned char> good(image.value.size(), 1);
        const Strip strip = lay_strips(image.pixels, spec).front();
        const auto extremes = [&] {
            const Eigen::MatrixXd covariance = unit_covariance(image.pixels, strip, good, found);
            const Eigen::VectorXd values =
                Eigen::SelfAdjointEigenSolver<Eigen::MatrixXd>(covariance).eigenvalues();
            return values.minCoeff() / values.maxCoeff();
        };
        CHECK(extremes() == Approx(least).epsilon(1e-6));
        found.least_eigenvalue = 0;
        CHECK(extremes() > -1e-13);
        CHECK(extremes() < least);
    }
}
