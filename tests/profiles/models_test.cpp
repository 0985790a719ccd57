#include "read_table.hpp"

#include "aureole/base/error.hpp"
#include "aureole/base/quadrature.hpp"
#include "aureole/profiles/models.hpp"

#include <catch2/catch.hpp>

#include <cmath>
#include <cstdlib>
#include <numbers>

using namespace aureole::profiles;

namespace {

const double to_sigma = 1 / std::sqrt(8 * std::numbers::ln2);

double value_of(const std::map<std::string, std::string>& row, const std::string& column) {
    return std::strtod(row.at(column).c_str(), nullptr); // values below the smallest double read as 0
}

void compare(const std::string& table, Model model) {
    for (const auto& row : read_table(table)) {
        const double h = value_of(row, "z0");
        const double s = value_of(row, "FWHM") * to_sigma;
        const double z = value_of(row, "z");
        INFO(table << ": h = " << h << ", s = " << s << ", z = " << z);
        const double point = value_of(row, "W_convolved");
        if (point > 1e-280) {
            CHECK(convolved(model, h, s, z).value == Approx(point).epsilon(1e-12).margin(0));
        }
        const double mean = value_of(row, "W_binmean_dz0.5");
        if (mean > 1e-280) {
            CHECK(bin_mean(model, h, s, z, 0.5).value == Approx(mean).epsilon(1e-12).margin(0));
        }
    }
}

/// The bare shape, straight from its definition.
double bare(Model model, double h, double z) {
    if (model == Model::exponential) {
        return std::exp(-std::abs(z) / h);
    }
    if (model == Model::gaussian) {
        return std::exp(-z * z / (h * h));
    }
    return 1 / std::pow(std::cosh(z / h), 2);
}

/// Convolution by brute quadrature, split at the kink.
double brute(Model model, double h, double s, double z) {
    const auto rule = aureole::gauss_legendre(20);
    const auto integrand = [&](double t) {
        return bare(model, h, t) * std::exp(-0.5 * std::pow((z - t) / s, 2)) /
               (s * std::sqrt(2 * std::numbers::pi));
    };
    const double low = z - 9 * s;
    const double high = z + 9 * s;
    const double split = std::clamp(0.0, low, high);
    const int panels = static_cast<int>(std::ceil(20 + 20 * s / h));
    return aureole::integrate_panels(rule, integrand, low, split, panels) +
           aureole::integrate_panels(rule, integrand, split, high, panels);
}

} // namespace

TEST_CASE("convolved exponentials and their bin means agree with 40-digit values to 1e-12",
          "[profiles][literature]") {
    compare("dumke_exponential_convolved.csv", Model::exponential);
}

TEST_CASE("convolved Gaussians and their bin means agree with 40-digit values to 1e-12",
          "[profiles][literature]") {
    compare("dumke_gaussian_convolved.csv", Model::gaussian);
}

TEST_CASE("a convolved sech2 agrees with brute quadrature to 1e-10 of its peak", "[profiles]") {
    for (const double ratio : {0.05, 0.5, 0.99, 1.01, 3.0, 20.0}) {
        for (const double z : {0.0, 0.3, -1.2, 4.0}) {
            INFO("s/h = " << ratio << ", z = " << z);
            const double peak = convolved(Model::sech2, 1, ratio, 0).value;
            CHECK(convolved(Model::sech2, 1, ratio, z).value ==
                  Approx(brute(Model::sech2, 1, ratio, z)).epsilon(0).margin(1e-10 * peak));
        }
    }
}

TEST_CASE("bin means are the integral of the convolved model over the bin", "[profiles]") {
    const auto rule = aureole::gauss_legendre(20);
    for (const Model model : {Model::exponential, Model::gaussian, Model::sech2}) {
        for (const double s : {0.0, 0.1, 0.7, 3.0}) {
            for (const double z : {0.0, 0.1, -0.9, 2.5}) {
                for (const double width : {1e-6, 1e-3, 0.4, 2.0}) {
                    const double low = z - 0.5 * width;
                    const double high = z + 0.5 * width;
                    const double split = std::clamp(0.0, low, high);
                    const auto point = [&](double t) { return convolved(model, 0.8, s, t).value; };
                    const double sum = aureole::integrate_panels(rule, point, low, split, 6) +
                                       aureole::integrate_panels(rule, point, split, high, 6);
                    INFO(to_string(model) << ", s = " << s << ", z = " << z << ", width = " << width);
                    // The brute sum itself keeps 1e-10: a narrow beam rounds the kink off on a scale of s =
                    // 0.1.
                    CHECK(bin_mean(model, 0.8, s, z, width).value == Approx(sum / width).epsilon(1e-9));
                }
            }
        }
    }
}

TEST_CASE("derivatives of the models are the limits of their differences", "[profiles]") {
    for (const Model model : {Model::exponential, Model::gaussian, Model::sech2}) {
        for (const double s : {0.0, 0.2, 1.0, 4.0}) {
            for (const double z : {0.35, -0.9, 2.5}) {
                for (const double width : {0.0, 0.3, 1.1}) {
                    const double step = 1e-4;
                    const auto at = [&](double ln_h, double place) {
                        return bin_mean(model, 0.8 * std::exp(ln_h), s, place, width).value;
                    };
                    const Shape shape = bin_mean(model, 0.8, s, z, width);
                    INFO(to_string(model) << ", s = " << s << ", z = " << z << ", width = " << width);
                    CHECK(shape.by_ln_h ==
                          Approx((at(step, z) - at(-step, z)) / (2 * step)).epsilon(0).margin(3e-8));
                    CHECK(shape.by_z ==
                          Approx((at(0, z + step) - at(0, z - step)) / (2 * step)).epsilon(0).margin(3e-8));
                }
            }
        }
    }
}

TEST_CASE("an unknown height model is refused with the list of known ones", "[profiles][bad-input]") {
    CHECK(parse_model("two_gaussian") == Model::two_gaussian);
    try {
        parse_model("lorentzian");
        FAIL("accepted");
    } catch (const aureole::Error& error) {
        CHECK(error.kind() == aureole::ErrorKind::scenario);
        CHECK_THAT(error.what(), Catch::Contains("lorentzian") && Catch::Contains("two_exponential"));
    }
}
