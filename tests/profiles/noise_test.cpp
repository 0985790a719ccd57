#include "read_table.hpp"
#include "synthetic.hpp"

#include "aureole/profiles/noise.hpp"
#include "aureole/profiles/profile.hpp"

#include <Eigen/Eigenvalues>
#include <catch2/catch.hpp>

#include <cmath>

using namespace aureole::profiles;
using synthetic::kpc;
using synthetic::to_sigma;

TEST_CASE("the variance of a box of beam noise agrees with the table", "[profiles][literature]") {
    for (const auto& row : read_table("strip_noise.csv")) {
        const double s = number(row, "FWHM") * to_sigma;
        const double a = number(row, "a");
        const double b = number(row, "b");
        const BeamCovariance beam{s * s, 0, s * s};
        INFO("a = " << a << ", b = " << b);
        const double variance = box_covariance(0, 0, a, b, beam);
        CHECK(variance == Approx(number(row, "var_mean")).epsilon(1e-11));
        CHECK(box_covariance(a, 0, a, b, beam) / variance ==
              Approx(number(row, "corr_adjacent")).epsilon(1e-11));
    }
}

TEST_CASE("the quadrature for slanted beams meets the closed form as the slant goes to zero", "[profiles]") {
    for (const double d : {0.0, 0.4, 1.7}) {
        const BeamCovariance straight{0.5, 0, 0.04};
        const BeamCovariance slanted{0.5, 1e-10, 0.04};
        CHECK(box_covariance(d, 0.3, 1.1, 0.5, slanted) ==
              Approx(box_covariance(d, 0.3, 1.1, 0.5, straight)).epsilon(1e-8));
    }
}

TEST_CASE("the pixel covariance of a turned elliptical beam meets the double integral over boxes",
          "[profiles]") {
    auto image = synthetic::blank_map(90, 90, 0.1, 0.6);
    image.beam->major = 1.1 * kpc / synthetic::distance;
    image.beam->position_angle = 0.6;
    auto spec = synthetic::spec(1, 3.0, 0.5, 3.0);
    spec.position_angle = 1.1;
    const Strip strip = lay_strips(image.pixels, spec).front();
    const std::vector<unsigned char> good(image.value.size(), 1);
    const auto covariance =
        unit_covariance(image.pixels, strip, good, beam_correlation(image.pixels, *image.beam));
    const BeamCovariance beam = beam_in_strips(*image.beam, spec);
    CHECK(std::abs(beam.xy) > 0.1 * beam.xx);
    for (Eigen::Index lag = 0; lag < 6; ++lag) {
        INFO("lag " << lag);
        // Pixels cut by an edge blur it: 1 % of the variance at 6 pixels to the narrow beam.
        CHECK(covariance(3, 3 + lag) ==
              Approx(box_covariance(0, 0.5 * kpc * static_cast<double>(lag), 3 * kpc, 0.5 * kpc, beam))
                  .epsilon(0)
                  .margin(0.01 * covariance(3, 3)));
    }
}

TEST_CASE("the predicted covariance of box means is the one of simulated noise", "[profiles][montecarlo]") {
    auto image = synthetic::blank_map(30, 40, 0.2, 0.8);
    const auto spec = synthetic::spec(1, 4.0, 0.4, 2.0);
    image.value[30 * 20 + 14] = std::nanf(""); // a blank, to be left out on both sides
    const Plan made = plan(image, spec);
    const std::size_t bins = made.strips[0].box.size();
    synthetic::Normal normal(20240611);
    constexpr int draws = 4000;
    Eigen::MatrixXd sum =
        Eigen::MatrixXd::Zero(static_cast<Eigen::Index>(bins), static_cast<Eigen::Index>(bins));
    auto noisy = spec;
    noisy.rms = 1;
    for (int draw = 0; draw < draws; ++draw) {
        const auto noise = synthetic::beam_noise(30, 40, 0.8 * to_sigma / 0.2, normal);
        for (std::size_t k = 0; k < noise.size(); ++k) {
            if (std::isfinite(image.value[k])) {
                image.value[k] = static_cast<float>(noise[k]);
            }
        }
        const Profile profile = measure(image, noisy, made).front();
        const Eigen::Map<const Eigen::VectorXd> mean(profile.mean.data(), static_cast<Eigen::Index>(bins));
        sum += mean * mean.transpose();
    }
    const Eigen::MatrixXd measured = sum / draws;
    const Eigen::MatrixXd& expected = made.covariance.front();
    for (Eigen::Index a = 0; a < expected.rows(); ++a) {
        for (Eigen::Index b = 0; b <= a; ++b) {
            const double error =
                std::sqrt((expected(a, a) * expected(b, b) + expected(a, b) * expected(a, b)) /
                          static_cast<double>(draws));
            INFO("bins " << a << ", " << b);
            CHECK(measured(a, b) == Approx(expected(a, b)).epsilon(0).margin(4 * error));
        }
    }
}

TEST_CASE("rms and correlation measured in a map are those of the noise put in", "[profiles][montecarlo]") {
    auto image = synthetic::blank_map(160, 160, 0.2, 0.8);
    synthetic::Normal normal(77);
    const auto noise = synthetic::beam_noise(160, 160, 0.8 * to_sigma / 0.2, normal);
    const auto spec = synthetic::spec(1, 20.0, 0.4, 10.0);
    synthetic::fill(image, spec, [](double x, double y) { return 50 * std::exp(-(x * x + y * y) / 4); });
    for (std::size_t k = 0; k < noise.size(); ++k) {
        image.value[k] += static_cast<float>(2 * noise[k] + 0.3);
    }
    auto free_spec = spec;
    free_spec.source_free_height = 6 * kpc;
    const auto free = source_free_pixels(image.pixels, free_spec);
    const MeasuredNoise measured = measure_noise(image, free);
    // 160 x 100 pixels hold 880 beams of 18 pixels; MAD has 2.7 times the variance of a standard deviation.
    CHECK(measured.rms == Approx(2).epsilon(4 * std::sqrt(2.7 / (2 * 880.0))));
    CHECK(measured.level == Approx(0.3).epsilon(0).margin(4 * 2 * 1.25 / std::sqrt(880.0)));
    const LagTable found = measured_correlation(image, free, measured);
    const LagTable expected = beam_correlation(image.pixels, *image.beam);
    CHECK(found.at(0, 0) == Approx(1));
    for (std::ptrdiff_t lag = 1; lag < 9; ++lag) {
        CHECK(found.at(lag, 0) == Approx(expected.at(lag, 0)).epsilon(0).margin(4 / std::sqrt(880.0)));
        CHECK(found.at(lag, 0) == found.at(-lag, 0));
    }
}
