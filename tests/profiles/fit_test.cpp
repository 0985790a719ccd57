#include "layer.hpp"
#include "synthetic.hpp"

#include "aureole/profiles/fit.hpp"
#include "aureole/profiles/heights.hpp"

#include <catch2/catch.hpp>

#include <cmath>

using namespace aureole::profiles;
using synthetic::kpc;
using synthetic::Layer;
using synthetic::to_sigma;

TEST_CASE("noiseless profiles give back their scale height to 1e-6", "[profiles]") {
    for (const Model model : {Model::exponential, Model::gaussian, Model::sech2}) {
        for (const double sigma : {0.0, 0.25}) {
            for (const double h : {0.3, 1.0, 2.5}) {
                const auto profile = synthetic::profile(0.25, 6, sigma, [&](double z, double width) {
                    return 3.7 * bin_mean(model, h, sigma, z, width).value;
                });
                for (const Side side : {Side::both, Side::above, Side::below}) {
                    FitSpec spec;
                    spec.side = side;
                    const HeightResult fit = fit_height(profile, model, spec);
                    INFO(to_string(model) << ", sigma " << sigma << ", h " << h << ", " << to_string(side));
                    CHECK(fit.status == Status::ok);
                    CHECK(fit.halo().h / kpc == Approx(h).epsilon(1e-6));
                    CHECK(fit.halo().amplitude == Approx(3.7).epsilon(1e-6));
                    CHECK(fit.curve[20] == Approx(profile.mean[20]).epsilon(1e-6));
                }
            }
        }
    }
}

TEST_CASE("noiseless two-component profiles give back both heights to 1e-6", "[profiles]") {
    for (const Model model : {Model::two_exponential, Model::two_gaussian}) {
        for (const double ratio : {4.0, 0.3}) {
            const auto profile = synthetic::profile(0.25, 8, 0.25, [&](double z, double width) {
                return ratio * bin_mean(model, 0.37, 0.25, z, width).value +
                       bin_mean(model, 2.3, 0.25, z, width).value;
            });
            FitSpec spec;
            const HeightResult fit = fit_height(profile, model, spec);
            INFO(to_string(model) << ", amplitudes " << ratio << " : 1");
            REQUIRE(fit.status == Status::ok);
            CHECK(fit.component[0].h / kpc == Approx(0.37).epsilon(1e-6));
            CHECK(fit.component[1].h / kpc == Approx(2.3).epsilon(1e-6));
            CHECK(fit.component[0].amplitude == Approx(ratio).epsilon(1e-5));
        }
    }
}

TEST_CASE("centre and background are found where they are asked for", "[profiles]") {
    const auto profile = synthetic::profile(0.25, 6, 0.25, [](double z, double width) {
        return 2 * bin_mean(Model::exponential, 0.9, 0.25, z - 0.17, width).value + 0.1;
    });
    FitSpec spec;
    spec.fit_centre = spec.fit_background = true;
    const HeightResult fit = fit_height(profile, Model::exponential, spec);
    REQUIRE(fit.status == Status::ok);
    CHECK(fit.centre / kpc == Approx(0.17).epsilon(1e-5));
    CHECK(fit.background == Approx(0.1).epsilon(1e-5));
    CHECK(fit.halo().h / kpc == Approx(0.9).epsilon(1e-5));
    CHECK(fit.parameters == 4);
}

TEST_CASE("pixels of a noiseless map give back the height of the layer", "[profiles]") {
    Layer layer;
    layer.image.value = layer.clean;
    auto spec = layer.spec;
    spec.rms = 0;
    const Profile profile = measure(layer.image, spec).back();
    CHECK(profile.errors == ErrorSource::noiseless);
    const HeightResult fit = fit_height(profile, Model::exponential, {});
    // Four pixels to the beam: the top hat that stands for them is good to fourth order.
    CHECK(fit.halo().h / kpc == Approx(layer.h).epsilon(1e-4));
    CHECK(fit.halo().h_err_noise < 1e-3 * fit.halo().h);
}

TEST_CASE("pixels that are means of the sky give the height when they are said to be", "[profiles]") {
    Layer layer;
    const double sigma = layer.fwhm * to_sigma;
    synthetic::fill(layer.image, layer.spec, [&](double, double y) {
        return 10 * bin_mean(Model::exponential, layer.h, sigma, y, layer.pixel).value;
    });
    auto spec = layer.spec;
    spec.rms = 0;
    spec.pixel_meaning = PixelMeaning::averages;
    const HeightResult right = fit_height(measure(layer.image, spec).back(), Model::exponential, {});
    CHECK(right.halo().h / kpc == Approx(layer.h).epsilon(1e-4));
    spec.pixel_meaning = PixelMeaning::samples;
    const HeightResult wrong = fit_height(measure(layer.image, spec).back(), Model::exponential, {});
    CHECK(std::abs(wrong.halo().h / kpc - layer.h) > 3 * std::abs(right.halo().h / kpc - layer.h));
}

TEST_CASE("errors from the measured autocorrelation are those from the beam", "[profiles][montecarlo]") {
    auto image = synthetic::blank_map(120, 160, 0.15, 0.6);
    auto spec = synthetic::spec(1, 3.0, 0.3, 5.4);
    spec.source_free_height = 8 * kpc;
    synthetic::fill(image, spec, [](double, double y) {
        return 25 * convolved(Model::exponential, 1.4, 0.6 * to_sigma, y).value;
    });
    synthetic::Normal normal(12);
    const auto noise = synthetic::beam_noise(120, 160, 0.6 * to_sigma / 0.15, normal);
    for (std::size_t k = 0; k < noise.size(); ++k) {
        image.value[k] += static_cast<float>(noise[k]);
    }
    const HeightResult beam = fit_height(measure(image, spec).back(), Model::exponential, {});
    spec.noise = NoiseFrom::autocorrelation;
    const Profile profile = measure(image, spec).back();
    CHECK(profile.errors == ErrorSource::autocorrelation);
    const HeightResult measured = fit_height(profile, Model::exponential, {});
    REQUIRE(measured.status == Status::ok);
    CHECK(std::abs(measured.halo().h / kpc - 1.4) < 4 * measured.halo().h_err_noise / kpc);
    // 350 beams of source-free sky know the noise in a strip of 5 beams to some 20 %.
    CHECK(measured.halo().h_err_noise == Approx(beam.halo().h_err_noise).epsilon(0.3));
    spec.noise = NoiseFrom::scatter;
    const Profile rough = measure(image, spec).back();
    CHECK(rough.errors == ErrorSource::scatter);
    CHECK(usable(fit_height(rough, Model::exponential, {}).status));
}

TEST_CASE("68 % errors of heights cover the truth in 68 % of noisy maps", "[profiles][montecarlo]") {
    Layer layer;
    synthetic::Normal normal(1995); // fixed beforehand
    constexpr int draws = 400;
    int covered = 0;
    double chi2 = 0;
    double dof = 0;
    for (int draw = 0; draw < draws; ++draw) {
        const HeightResult fit = fit_height(layer.draw(normal), Model::exponential, {});
        REQUIRE(fit.status == Status::ok);
        covered += std::abs(fit.halo().h / kpc - layer.h) <= fit.halo().h_err_noise / kpc ? 1 : 0;
        chi2 += fit.chi2;
        dof += fit.dof;
    }
    const double expected = 0.6826895;
    const double band = 4 * std::sqrt(expected * (1 - expected) / draws);
    CHECK(covered / static_cast<double>(draws) == Approx(expected).epsilon(0).margin(band));
    CHECK(chi2 / dof == Approx(1).epsilon(0).margin(4 * std::sqrt(2 / dof)));
}

TEST_CASE("a rough profile has wider errors with its scatter than from noise alone", "[profiles]") {
    Layer layer;
    synthetic::Normal normal(5);
    auto profile = layer.draw(normal);
    for (std::size_t b = 0; b < profile.mean.size(); ++b) {
        profile.mean[b] *= 1 + 0.15 * normal();
    }
    const HeightResult fit = fit_height(profile, Model::exponential, {});
    CHECK(fit.chi2 > 1.5 * fit.dof);
    CHECK(fit.fractional_scatter > 0.05);
    CHECK(fit.fractional_scatter < 0.3);
    CHECK(fit.halo().h_err_scatter > 1.2 * fit.halo().h_err_noise);
}

TEST_CASE("a layer far thinner than the beam gets an upper limit", "[profiles]") {
    Layer layer;
    synthetic::fill(layer.image, layer.spec, [&](double, double y) {
        return layer.peak * convolved(Model::gaussian, 0.001, layer.fwhm * to_sigma, y).value * 300;
    });
    layer.clean = layer.image.value;
    synthetic::Normal normal(6);
    const HeightResult fit = fit_height(layer.draw(normal), Model::exponential, {});
    CHECK(fit.status == Status::unresolved);
    REQUIRE(fit.halo().upper_limit.has_value());
    CHECK(*fit.halo().upper_limit / kpc == Approx(0.3));
}

TEST_CASE("a thick layer keeps a finite error where the thin one is not resolved", "[profiles]") {
    Layer layer;
    const double sigma = layer.fwhm * to_sigma;
    synthetic::fill(layer.image, layer.spec, [&](double, double y) {
        return 20000 * convolved(Model::exponential, 0.001, sigma, y).value +
               25 * convolved(Model::exponential, 1.4, sigma, y).value;
    });
    layer.clean = layer.image.value;
    for (std::uint64_t seed = 1; seed <= 4; ++seed) {
        synthetic::Normal normal(seed);
        const HeightResult fit = fit_height(layer.draw(normal), Model::two_exponential, {});
        INFO("seed " << seed << ": " << to_string(fit.status) << ", " << fit.problem);
        CHECK(fit.status == Status::unresolved);
        CHECK(fit.component[0].upper_limit.has_value());
        CHECK(fit.halo().h_err_noise / kpc > 0.01);
        CHECK(fit.halo().h_err_noise / kpc < 0.2);
        CHECK(std::abs(fit.halo().h / kpc - 1.4) < 4 * fit.halo().h_err_noise / kpc);
    }
}

TEST_CASE("profiles without a fit say so by their status", "[profiles][bad-input]") {
    FitSpec spec;
    const auto zero = synthetic::profile(0.25, 3, 0.2, [](double, double) { return 0.0; });
    CHECK(fit_height(zero, Model::exponential, spec).status == Status::no_signal);
    const auto negative =
        synthetic::profile(0.25, 3, 0.2, [](double z, double) { return -std::exp(-std::abs(z)); });
    CHECK(fit_height(negative, Model::two_gaussian, spec).status == Status::no_signal);
    const auto one = synthetic::profile(3, 3, 0.2, [](double, double) { return 1.0; });
    CHECK(fit_height(one, Model::exponential, spec).status == Status::too_few_bins);
    CHECK(fit_height(Profile{}, Model::sech2, spec).status == Status::too_few_bins);
    const auto flat = synthetic::profile(0.25, 3, 0.2, [](double, double) { return 1.0; });
    CHECK(fit_height(flat, Model::exponential, spec).status == Status::at_bound);
    const auto rising = synthetic::profile(0.25, 3, 0.2, [](double z, double) { return z * z; });
    CHECK_FALSE(usable(fit_height(rising, Model::gaussian, spec).status));
    // One exponential asked to be two: the second part is empty or the same again.
    const auto single = synthetic::profile(0.25, 6, 0.2, [](double z, double width) {
        return bin_mean(Model::exponential, 1, 0.2, z, width).value;
    });
    CHECK_FALSE(fit_height(single, Model::two_exponential, spec).status == Status::ok);
}
