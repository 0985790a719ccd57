#include "read_table.hpp"
#include "synthetic.hpp"

#include "aureole/base/error.hpp"
#include "aureole/base/quadrature.hpp"
#include "aureole/profiles/heights.hpp"

#include <catch2/catch.hpp>

#include <cmath>

using namespace aureole::profiles;
using synthetic::kpc;
using synthetic::to_sigma;

namespace {

constexpr double degree = aureole::constants::degree;

/// Sight line through j = exp(-R/4 - |z|/hz), R < 12 kpc, split where it crosses the plane; X, Y in kpc.
double disc_intensity(double x, double y, double hz, double inclination) {
    static const auto rule = aureole::gauss_legendre(16);
    const double cosine = std::cos(inclination);
    const double sine = std::sin(inclination);
    if (std::abs(x) >= 12) {
        return 0;
    }
    // y' = Y cos i + s sin i, z = Y sin i - s cos i; |y'| < sqrt(144 - x^2).
    const double half = std::sqrt(144 - x * x);
    const double first = (-half - y * cosine) / sine;
    const double last = (half - y * cosine) / sine;
    const double plane = std::clamp(cosine > 1e-9 ? y * sine / cosine : 1e99, first, last);
    const double axis = std::clamp(-y * cosine / sine, first, last);
    std::vector<double> edges{first, last, plane, axis};
    for (const double step : {0.1, 0.3, 0.6, 1.0, 1.5, 2.5, 4.0, 6.0, 9.0, 13.0, 18.0}) {
        for (const double from : {plane, axis}) {
            for (const double sign : {-1.0, 1.0}) {
                edges.push_back(std::clamp(from + sign * step, first, last));
            }
        }
    }
    std::sort(edges.begin(), edges.end());
    const auto density = [&](double s) {
        const double in_plane = y * cosine + s * sine;
        const double height = y * sine - s * cosine;
        return std::exp(-std::hypot(x, in_plane) / 4 - std::abs(height) / hz);
    };
    return aureole::integrate_pieces(rule, density, edges);
}

/// Mean over |X| < 5 at Y = 0.25 ... 6 kpc, as the table has it.
Profile sampled_strip(double hz, double inclination) {
    const auto rule = aureole::gauss_legendre(12);
    Profile profile;
    for (int b = 1; b <= 24; ++b) {
        const double y = 0.25 * b;
        const double mean =
            aureole::integrate_panels(
                rule, [&](double x) { return disc_intensity(x, y, hz, inclination); }, 0, 5, 4) /
            5;
        profile.height.push_back(y * kpc);
        profile.width.push_back(0);
        profile.low.push_back((y - 0.125) * kpc);
        profile.high.push_back((y + 0.125) * kpc);
        profile.mean.push_back(mean);
    }
    profile.covariance = Eigen::MatrixXd::Identity(24, 24) * 1e-6;
    profile.errors = ErrorSource::noiseless;
    return profile;
}

HeightsSpec heights_spec(std::size_t strips, double width, double bin, double range) {
    HeightsSpec spec;
    spec.profile = synthetic::spec(strips, width, bin, range);
    spec.models = {Model::exponential, Model::gaussian, Model::two_exponential};
    return spec;
}

/// Convolution with a round Gaussian of `sigma` pixels, separable, edges left alone.
void blur(aureole::maps::Image& image, double sigma) {
    const auto nx = static_cast<int>(image.pixels.nx);
    const auto ny = static_cast<int>(image.pixels.ny);
    const int reach = static_cast<int>(std::ceil(6 * sigma));
    for (const bool across : {true, false}) {
        const std::vector<float> before = image.value;
        for (int j = 0; j < ny; ++j) {
            for (int i = 0; i < nx; ++i) {
                double sum = 0;
                double weight = 0;
                for (int k = -reach; k <= reach; ++k) {
                    const int a = across ? i + k : i;
                    const int b = across ? j : j + k;
                    if (a >= 0 && b >= 0 && a < nx && b < ny) {
                        const double w = std::exp(-0.5 * k * k / (sigma * sigma));
                        sum += w * static_cast<double>(before[static_cast<std::size_t>(a + nx * b)]);
                        weight += w;
                    }
                }
                image.value[static_cast<std::size_t>(i + nx * j)] = static_cast<float>(sum / weight);
            }
        }
    }
}

} // namespace

TEST_CASE("an edge-on fit of an inclined disc errs as the table says and the forward fit does not",
          "[profiles][literature]") {
    for (const auto& row : read_table("inclination_bias.csv")) {
        const double hz = number(row, "hz");
        const double inclination = number(row, "incl_deg") * degree;
        const Profile profile = sampled_strip(hz, inclination);
        INFO("hz = " << hz << ", i = " << number(row, "incl_deg"));
        FitSpec naive;
        // The table comes from sums on a 0.01 kpc lattice.
        CHECK(fit_height(profile, Model::exponential, naive).halo().h / kpc ==
              Approx(number(row, "h_fit")).epsilon(2e-3));
        FitSpec forward;
        forward.disc = disc_kernel(inclination, 4 * kpc, 12 * kpc, -5 * kpc, 5 * kpc, 0, 0.03 * kpc);
        const HeightResult fit = fit_height(profile, Model::exponential, forward);
        CHECK(fit.status == Status::ok);
        CHECK(fit.halo().h / kpc == Approx(hz).epsilon(1e-3));
    }
}

TEST_CASE("a map of an inclined disc gives its height to 1 % with the scale length fitted", "[profiles]") {
    const double pixel = 0.25;
    for (const double inclination : {75.0, 80.0, 85.0}) {
        auto image = synthetic::blank_map(104, 72, pixel, 1.25);
        auto spec = heights_spec(3, 3.0, 0.75, 6.0);
        spec.models = {Model::exponential};
        spec.profile.inclination = inclination * degree;
        spec.profile.rms = 0;
        spec.disc = DiscSpec{{}, 12 * kpc};
        synthetic::fill(image, spec.profile,
                        [&](double x, double y) { return disc_intensity(x, y, 1.0, inclination * degree); });
        blur(image, 1.25 * to_sigma / pixel);
        const auto report = measure_heights(std::span(&image, 1), spec, {});
        REQUIRE(report.scale_length.has_value());
        INFO("i = " << inclination << ", hR = " << report.scale_length->length / kpc);
        CHECK(report.scale_length->length / kpc == Approx(4).epsilon(0.01));
        for (const HeightRow& row : report.rows) {
            if (row.fit.forward) {
                CHECK(row.fit.status == Status::ok);
                CHECK(row.fit.halo().h / kpc == Approx(1).epsilon(0.01));
            } else {
                CHECK(row.fit.halo().h / kpc > 1.04);
            }
        }
    }
}

TEST_CASE("a noiseless profile of an inclined disc gives back its heights to 1e-6", "[profiles]") {
    // The profiles are sums over the kernel of closed forms; the fit goes by its own table of curves.
    for (const double inclination : {75.0, 88.0}) {
        for (const double sigma : {0.0, 0.25}) {
            for (const double strip : {-2.0, 4.0}) {
                const DiscKernel kernel = disc_kernel(inclination * degree, 4 * kpc, {}, strip * kpc,
                                                      (strip + 3) * kpc, sigma * kpc, 0.1 * kpc);
                DiscKernel in_kpc = kernel;
                for (double& offset : in_kpc.offset) {
                    offset /= kpc;
                }
                for (const Model model : {Model::exponential, Model::gaussian, Model::sech2,
                                          Model::two_exponential, Model::two_gaussian}) {
                    const double thin = components(model) == 2 ? 3 : 0;
                    const auto profile = synthetic::profile(0.25, 8, sigma, [&](double z, double width) {
                        return thin * bin_mean(kind(model), 0.4, sigma, z, width, in_kpc).value +
                               bin_mean(kind(model), 2.1, sigma, z, width, in_kpc).value;
                    });
                    FitSpec spec;
                    spec.disc = kernel;
                    for (const double least : {0.0, 0.7}) {
                        spec.least_height = least * kpc;
                        const HeightResult fit = fit_height(profile, model, spec);
                        INFO(to_string(model) << ", i " << inclination << ", sigma " << sigma << ", strip "
                                              << strip << ", from " << least << ": " << fit.problem);
                        REQUIRE(fit.status == Status::ok);
                        CHECK(fit.halo().h / kpc == Approx(2.1).epsilon(1e-6));
                        CHECK(fit.halo().amplitude == Approx(1).epsilon(1e-5));
                        CHECK(fit.component[0].h / kpc == Approx(thin > 0 ? 0.4 : 2.1).epsilon(2e-6));
                        for (std::size_t b = 0; b < profile.mean.size(); b += 5) {
                            // The inner bins are predicted where the fit leaves them out.
                            CHECK(fit.curve[b] == Approx(profile.mean[b]).epsilon(0).margin(1e-5));
                        }
                    }
                }
            }
        }
    }
}

TEST_CASE("a fit of the inclined disc with its centre free gives back centre and height to 1e-5",
          "[profiles]") {
    const DiscKernel kernel =
        disc_kernel(85 * degree, 4 * kpc, {}, -2 * kpc, 2 * kpc, 0.25 * kpc, 0.25 * kpc);
    DiscKernel in_kpc = kernel;
    for (double& offset : in_kpc.offset) {
        offset /= kpc;
    }
    const auto profile = synthetic::profile(0.5, 8, 0.25, [&](double z, double width) {
        return bin_mean(Model::exponential, 1.3, 0.25, z - 0.2, width, in_kpc).value;
    });
    FitSpec spec;
    spec.disc = kernel;
    spec.fit_centre = true;
    const HeightResult fit = fit_height(profile, Model::exponential, spec);
    REQUIRE(fit.status == Status::ok);
    CHECK(fit.centre / kpc == Approx(0.2).epsilon(1e-5));
    CHECK(fit.halo().h / kpc == Approx(1.3).epsilon(1e-5));
}

TEST_CASE("below 75 deg the edge-on model is refused unless forced", "[profiles]") {
    auto image = synthetic::blank_map(60, 60, 0.25, 1.25);
    auto spec = heights_spec(1, 6.0, 0.75, 6.0);
    spec.models = {Model::exponential};
    spec.profile.rms = 0;
    spec.profile.inclination = 70 * degree;
    synthetic::fill(image, spec.profile, [](double, double y) { return std::exp(-std::abs(y)); });
    auto report = measure_heights(std::span(&image, 1), spec, {});
    CHECK(report.rows.front().fit.status == Status::too_inclined);
    CHECK_FALSE(report.chosen.has_value());
    spec.force_inclination = true;
    report = measure_heights(std::span(&image, 1), spec, {});
    CHECK(usable(report.rows.front().fit.status));
}

TEST_CASE("heights that fall with frequency give their exponent, its error and the joint model",
          "[profiles][montecarlo]") {
    const double fwhm = 0.8;
    const double pixel = 0.2;
    const double eta = -0.25;
    synthetic::Normal normal(41);
    std::vector<aureole::maps::Image> images;
    auto spec = heights_spec(3, 2.4, 0.4, 6.0);
    spec.profile.rms = 1;
    spec.profile.distance_error = 0.1 * spec.profile.distance;
    for (const double frequency : {0.15e9, 1.5e9, 6e9}) {
        auto image = synthetic::blank_map(44, 68, pixel, fwhm);
        image.frequency = frequency;
        const double h = 1.2 * std::pow(frequency / 1.5e9, eta);
        synthetic::fill(image, spec.profile, [&](double, double y) {
            return 100 * convolved(Model::exponential, h, fwhm * to_sigma, y).value;
        });
        const auto noise = synthetic::beam_noise(44, 68, fwhm * to_sigma / pixel, normal);
        for (std::size_t k = 0; k < noise.size(); ++k) {
            image.value[k] += static_cast<float>(noise[k]);
        }
        images.push_back(image);
    }
    const auto report = measure_heights(images, spec, {});
    REQUIRE(report.chosen.has_value());
    CHECK(report.scores[*report.chosen].model == Model::exponential);
    REQUIRE(report.exponents.size() == 2);
    for (const HeightExponent& exponent : report.exponents) {
        CHECK(exponent.problem.empty());
        CHECK(exponent.maps == 3);
        CHECK(exponent.eta_error > 0);
        CHECK(exponent.eta_error < 0.05);
        CHECK(std::abs(exponent.eta - eta) < 4 * exponent.eta_error);
        const double expected = 1.2 * std::pow(exponent.frequency / 1.5e9, eta);
        CHECK(std::abs(exponent.h0 / kpc - expected) < 4 * exponent.h0_error / kpc);
        CHECK(exponent.h0_error_distance == Approx(0.1 * exponent.h0));
    }
    // A distance of its own changes all heights and no exponent.
    auto nearer = spec;
    for (double* length : {&nearer.profile.distance, &nearer.profile.strip_width, &nearer.profile.bin_height,
                           &nearer.profile.half_range}) {
        *length *= 0.5;
    }
    const auto half = measure_heights(images, nearer, {});
    REQUIRE(half.exponents.size() == 2);
    CHECK(half.exponents[0].eta == Approx(report.exponents[0].eta).epsilon(1e-6));
    CHECK(half.exponents[0].h0 == Approx(0.5 * report.exponents[0].h0).epsilon(1e-6));
    // Threads change nothing.
    aureole::RunContext two;
    two.threads = 2;
    CHECK(measure_heights(images, spec, two).exponents[0].eta == report.exponents[0].eta);
}

TEST_CASE("a report to start from changes no height and leaves nothing out", "[profiles]") {
    const double fwhm = 0.8;
    const double pixel = 0.2;
    synthetic::Normal normal(7);
    auto spec = heights_spec(3, 2.4, 0.4, 6.0);
    spec.profile.inclination = 86 * degree;
    spec.profile.rms = 1;
    spec.sides = Sides::each;
    spec.disc = DiscSpec{4 * kpc, {}};
    std::vector<aureole::maps::Image> images;
    std::vector<aureole::maps::Image> others;
    for (const double h : {1.2, 1.5}) {
        auto image = synthetic::blank_map(44, 68, pixel, fwhm);
        synthetic::fill(image, spec.profile, [&](double, double y) {
            return 100 * convolved(Model::exponential, h, fwhm * to_sigma, y).value;
        });
        others.push_back(image);
        const auto noise = synthetic::beam_noise(44, 68, fwhm * to_sigma / pixel, normal);
        for (std::size_t k = 0; k < noise.size(); ++k) {
            image.value[k] += static_cast<float>(noise[k]);
        }
        images.push_back(image);
    }
    const auto first = measure_heights(others, spec, {});
    const auto plain = measure_heights(images, spec, {});
    const auto hinted = measure_heights(images, spec, {}, &first);
    REQUIRE(hinted.rows.size() == plain.rows.size());
    CHECK(hinted.chosen == plain.chosen);
    std::size_t compared = 0;
    std::size_t rough = 0;
    for (std::size_t r = 0; r < plain.rows.size(); ++r) {
        const HeightRow& a = plain.rows[r];
        const HeightRow& b = hinted.rows[r];
        CHECK((a.image == b.image && a.strip == b.strip && a.fit.model == b.fit.model));
        // Two components where there is one: the optimum is a valley, and each start its own end of it.
        if (components(a.fit.model) == 1) {
            REQUIRE(b.fit.status == a.fit.status);
            CHECK(b.fit.halo().h == Approx(a.fit.halo().h).epsilon(1e-6));
            CHECK(b.fit.halo().h_err_noise == Approx(a.fit.halo().h_err_noise).epsilon(1e-5));
            CHECK(b.fit.halo().h != first.rows[r].fit.halo().h);
            CHECK(b.fit.halo().h_err_scatter == b.fit.halo().h_err_noise);
            rough += a.fit.halo().h_err_scatter > a.fit.halo().h_err_noise ? 1 : 0;
            compared += 1;
        }
    }
    CHECK(compared == 2 * 4 * 2 * 2 * 2);
    CHECK(rough > 0); // else the skipped scatter would not show
    // A report of other rows is no start.
    auto fewer = spec;
    fewer.models = {Model::gaussian};
    const auto alone = measure_heights(images, fewer, {}, &first);
    const auto same = measure_heights(images, fewer, {});
    CHECK(alone.rows.front().fit.halo().h_err_scatter == same.rows.front().fit.halo().h_err_scatter);
    aureole::RunContext two;
    two.threads = 2;
    const auto threaded = measure_heights(images, spec, two, &first);
    for (std::size_t r = 0; r < plain.rows.size(); ++r) {
        CHECK(threaded.rows[r].fit.aicc == hinted.rows[r].fit.aicc);
    }
}

TEST_CASE("one noise value too many or too few is an error of the scenario", "[profiles][bad-input]") {
    auto spec = heights_spec(1, 4, 0.5, 4);
    const std::vector<aureole::maps::Image> images(2, synthetic::blank_map(40, 40, 0.25, 1));
    for (const std::size_t count : {1U, 3U}) {
        spec.rms.assign(count, 0.1);
        try {
            measure_heights(images, spec, {});
            FAIL("accepted " << count);
        } catch (const aureole::Error& error) {
            CHECK(error.kind() == aureole::ErrorKind::scenario);
            CHECK_THAT(error.what(), Catch::Contains(std::to_string(count)) && Catch::Contains("2 maps"));
        }
    }
}

TEST_CASE("maps of unlike beam, pixels or unit are refused by name", "[profiles][bad-input]") {
    const auto spec = heights_spec(1, 4, 0.5, 4);
    const auto refused = [&](auto&& change, const std::string& word) {
        std::vector<aureole::maps::Image> images(2, synthetic::blank_map(40, 40, 0.25, 1));
        images[1].name = "second.fits";
        change(images[1]);
        try {
            measure_heights(images, spec, {});
            FAIL("accepted");
        } catch (const aureole::Error& error) {
            CHECK(error.kind() == aureole::ErrorKind::input);
            CHECK_THAT(error.what(), Catch::Contains("second.fits") && Catch::Contains(word));
        }
    };
    refused([](auto& image) { image.beam->major *= 1.1; }, "beam");
    refused([](auto& image) { image.beam.reset(); }, "no beam");
    refused([](auto& image) { image.pixels.step_x *= 1.01; }, "pixel");
    refused([](auto& image) { image.unit = "K"; }, "K");
    CHECK_THROWS_AS(measure_heights({}, spec, {}), aureole::Error);
}

TEST_CASE("maps with nothing in them end in an error or a status", "[profiles][bad-input]") {
    auto spec = heights_spec(2, 2, 0.5, 4);
    auto image = synthetic::blank_map(40, 40, 0.25, 1);
    spec.profile.rms = 0;
    for (const HeightRow& row : measure_heights(std::span(&image, 1), spec, {}).rows) {
        CHECK(row.fit.status == Status::no_signal);
    }
    spec.profile.rms.reset();
    for (const HeightRow& row : measure_heights(std::span(&image, 1), spec, {}).rows) {
        CHECK(row.fit.status == Status::no_signal);
    }
    image.value.assign(image.value.size(), std::nanf(""));
    CHECK_THROWS_AS(measure_heights(std::span(&image, 1), spec, {}), aureole::Error);
    spec.profile.rms = 1;
    CHECK_THROWS_AS(measure_heights(std::span(&image, 1), spec, {}), aureole::Error);
}

TEST_CASE("strips average by flux, with error and scatter of the strips", "[profiles]") {
    std::vector<HeightResult> fits(3);
    for (std::size_t k = 0; k < 3; ++k) {
        fits[k].status = Status::ok;
        fits[k].component.resize(1);
        fits[k].component[0].h = 1.0 + static_cast<double>(k);
        fits[k].component[0].h_err_noise = 0.1;
        fits[k].component[0].h_err_scatter = 0.2;
    }
    fits[2].status = Status::not_converged;
    const std::vector<const HeightResult*> pointers{&fits[0], &fits[1], &fits[2]};
    const std::vector<double> fluxes{3, 1, 5};
    const CombinedHeight mean = combine(pointers, fluxes, 0);
    CHECK(mean.strips == 2);
    CHECK(mean.h == Approx(1.25));
    CHECK(mean.error == Approx(std::sqrt(10.0) * 0.1 / 4));
    CHECK(mean.error_scatter == Approx(std::sqrt(10.0) * 0.2 / 4));
    CHECK(mean.strip_scatter == Approx(std::sqrt((3 * 0.0625 + 0.5625) / 4 * 2)));
}

TEST_CASE("a richer model is chosen only for more than 6 in AICc", "[profiles]") {
    const ModelScore simple{Model::exponential, false, 2, 30, false};
    ModelScore rich{Model::two_exponential, false, 4, 24.5, false};
    CHECK(*choose(std::vector{rich, simple}) == 1);
    rich.aicc = 23.5;
    CHECK(*choose(std::vector{rich, simple}) == 0);
    rich.aicc = std::numeric_limits<double>::infinity();
    CHECK(*choose(std::vector{rich, simple}) == 1);
    CHECK_FALSE(choose(std::vector{rich}).has_value());
}
