#include "read_table.hpp"

#include "aureole/base/error.hpp"
#include "aureole/base/quadrature.hpp"
#include "aureole/physics/synchrotron.hpp"

#include <catch2/catch.hpp>

#include <cmath>
#include <limits>

using namespace aureole;
using namespace aureole::physics;

namespace {

const double infinity = std::numeric_limits<double>::infinity();

/// int_0^inf f(x) dx of a synchrotron function: in ln x below 700.
template <class Function> double over_all_x(Function&& f) {
    return integrate_panels(
        gauss_legendre(16),
        [&](double y) {
            const double x = std::exp(y);
            return x * f(x);
        },
        -60, std::log(700.0), 80);
}

/// int N(gamma) f(x) dgamma over [low, high] for N = gamma^-s exp(-gamma/cut).
template <class Function> double over_electrons(double s, double cut, double low, double high, Function&& f) {
    return integrate_panels(
        gauss_legendre(16),
        [&](double y) {
            const double gamma = std::exp(y);
            return std::pow(gamma, 1 - s) * std::exp(-gamma / cut) * f(gamma);
        },
        std::log(low), std::log(high), 60);
}

} // namespace

TEST_CASE("synchrotron F and G agree with 30-digit quadrature", "[physics]") {
    for (const auto& row : read_table("synchrotron_F_G.csv")) {
        const double x = number(row, "x");
        INFO("x = " << x);
        CHECK(synchrotron_f(x) == Approx(number(row, "F")).epsilon(1e-12));
        CHECK(synchrotron_g(x) == Approx(number(row, "G")).epsilon(1e-12));
    }
    CHECK(synchrotron_f(0.285812247846) == Approx(0.918012333184).epsilon(1e-12)); // the maximum
}

TEST_CASE("synchrotron F agrees with printed three-digit tables", "[physics][literature]") {
    // Longair, High Energy Astrophysics, ch. 8; Pacholczyk 1970, from memory. The old entries at 0.5 and 1
    // (0.872, 0.655) are high by up to 0.6 %.
    const double table[][2] = {{0.01, .445}, {0.1, .818}, {0.3, .918}, {2, .301}};
    for (const auto& [x, f] : table) {
        INFO("x = " << x);
        CHECK(synchrotron_f(x) == Approx(f).epsilon(0).margin(0.7e-3));
    }
    CHECK(synchrotron_f(0.5) == Approx(.872).epsilon(6e-3));
    CHECK(synchrotron_f(1) == Approx(.655).epsilon(6e-3));
}

TEST_CASE("the random-field kernel agrees with its 25-digit closed form", "[physics]") {
    for (const auto& row : read_table("synchrotron_random_kernel.csv")) {
        const double x = number(row, "x");
        INFO("x = " << x);
        CHECK(synchrotron_random(x) == Approx(number(row, "R_closed")).epsilon(1e-12));
    }
}

TEST_CASE("the random-field kernel is the average of F over directions", "[physics]") {
    const auto rule = gauss_legendre(24);
    for (const double x : {1e-3, 0.3, 3.0, 30.0, 300.0}) {
        // sin a = 1/cosh u
        const double average = integrate_panels(
            rule,
            [&](double u) {
                const double c = std::cosh(u);
                return synchrotron_f(x * c) / (c * c * c);
            },
            0, 14, 40);
        CHECK(synchrotron_random(x) == Approx(average).epsilon(1e-12));
    }
}

TEST_CASE("integrals of the synchrotron kernels have their closed values", "[physics][conservation]") {
    const double f = 8 * constants::pi / (9 * std::sqrt(3.0));
    CHECK(over_all_x(synchrotron_f) == Approx(f).epsilon(1e-12));
    CHECK(over_all_x(synchrotron_g) == Approx(0.75 * f).epsilon(1e-12));
    CHECK(over_all_x(synchrotron_random) == Approx(2 * f / 3).epsilon(1e-12));
    // all power of one electron: (4/3) sigma_T c U_B gamma^2 in random directions
    const double field = 5e-6;
    const double gamma = 1e4;
    const double power = synchrotron_power_constant * field * (2 * f / 3) * synchrotron_critical_constant *
                         field * gamma * gamma;
    const double expected = 4.0 / 3 * constants::thomson_cross_section * constants::speed_of_light * field *
                            field / (8 * constants::pi) * gamma * gamma;
    CHECK(power / expected == Approx(1).epsilon(1e-8)); // CODATA constants agree among themselves to 1e-9
    CHECK(synchrotron_critical_constant == Approx(4.19887348e6).epsilon(1e-8));
    CHECK(synchrotron_power_constant == Approx(2.34435575e-22).epsilon(1e-8));
}

TEST_CASE("synchrotron kernels vanish without field and underflow to zero", "[physics]") {
    for (const auto f : {synchrotron_f, synchrotron_g, synchrotron_random}) {
        CHECK(f(infinity) == 0);
        CHECK(f(0) == 0);
        CHECK(f(1e5) == 0);
        CHECK(f(700) > 0);
        CHECK(std::isnan(f(-1)));
    }
    for (const double order : {0.0, 0.3, 1.0}) {
        CHECK(mixed_field(infinity, order).total == 0);
        CHECK(mixed_field(0, order).total == 0);
    }
    CHECK_THROWS_AS(mixed_field(1, 1.1), Error);
    CHECK_THROWS_AS(mixed_field(-1, 0.5), Error);
}

TEST_CASE("synchrotron kernels have their limits at small x", "[physics]") {
    for (const double x : {1e-40, 1e-20, 1e-15}) {
        INFO("x = " << x);
        CHECK(synchrotron_f(x) / std::cbrt(x) == Approx(2.14952824153).epsilon(1e-9));
        CHECK(synchrotron_g(x) / std::cbrt(x) == Approx(2.14952824153 / 2).epsilon(1e-9));
        CHECK(synchrotron_random(x) / std::cbrt(x) == Approx(1.80841802).epsilon(5e-9));
    }
    CHECK(synchrotron_random(1e-30 * (1 - 1e-12)) ==
          Approx(synchrotron_random(1e-30 * (1 + 1e-12))).epsilon(3e-12));
}

TEST_CASE("power-law emissivities agree with the analytic table", "[physics]") {
    for (const auto& row : read_table("synchrotron_powerlaw.csv")) {
        const double s = number(row, "s");
        const double field = number(row, "B_G");
        const double across = field * std::sin(number(row, "theta_deg") * constants::degree);
        const double frequency = number(row, "nu_Hz");
        INFO("s " << s << " B " << field << " nu " << frequency);
        if (row.at("case") == "powerlaw") {
            const double ordered = power_law_emissivity_ordered(1, s, across, frequency);
            CHECK(ordered == Approx(number(row, "j_I")).epsilon(2e-12));
            CHECK(ordered * maximum_polarisation(s) == Approx(number(row, "j_P")).epsilon(2e-12));
            CHECK(power_law_emissivity_random(1, s, field, frequency) ==
                  Approx(number(row, "j_random")).epsilon(2e-12));
            continue;
        }
        const double low = number(row, "gamma_min");
        const double high = number(row, "gamma_max");
        const double cut = number(row, "gamma_cut");
        const double unit = synchrotron_power_constant / (4 * constants::pi);
        const auto x = [&](double b, double gamma) {
            return frequency / (synchrotron_critical_constant * b * gamma * gamma);
        };
        CHECK(unit * across *
                  over_electrons(s, cut, low, high, [&](double g) { return synchrotron_f(x(across, g)); }) ==
              Approx(number(row, "j_I")).epsilon(1e-9));
        CHECK(unit * across *
                  over_electrons(s, cut, low, high, [&](double g) { return synchrotron_g(x(across, g)); }) ==
              Approx(number(row, "j_P")).epsilon(1e-9));
        CHECK(unit * field *
                  over_electrons(s, cut, low, high,
                                 [&](double g) { return synchrotron_random(x(field, g)); }) ==
              Approx(number(row, "j_random")).epsilon(1e-9));
    }
    CHECK_THROWS_AS(power_law_emissivity_random(1, 0.3, 1e-6, 1e9), Error);
}

TEST_CASE("moments of the projected field agree with quadrature over the Rice distribution", "[physics]") {
    for (const auto& row : read_table("synchrotron_mixed_field.csv")) {
        const double s = number(row, "s");
        const double sigma = 3e-6;
        const double b0 = number(row, "B0perp_over_sigma") * sigma;
        const MixedField found = power_law_emissivity_mixed(1, s, b0, sigma, 1e9);
        const double unit = power_law_emissivity_ordered(1, s, sigma, 1e9);
        INFO("s " << s << " b0/sigma " << b0 / sigma);
        CHECK(found.total / unit == Approx(number(row, "I_mom")).epsilon(1e-10));
        CHECK(found.polarised / unit ==
              Approx(maximum_polarisation(s) * number(row, "P_mom")).epsilon(1e-10));
    }
}

TEST_CASE("mixed-field kernels integrate to the closed power-law moments", "[physics][conservation]") {
    // int x^((s-3)/2) dx carries N = gamma^-s: the kernels' Mellin moments are those of F and G times
    // <b^((s+1)/2)>
    for (const double s : {2.0, 3.5}) {
        for (const double t : {0.0, 0.05, 0.5, 0.9, 0.999}) {
            const double power = (s - 3) / 2;
            const auto moment = [&](auto&& f) {
                return integrate_panels(
                    gauss_legendre(12), [&](double y) { return std::exp((power + 1) * y) * f(std::exp(y)); },
                    -40, std::log(700.0), 28);
            };
            const double b0 = std::sqrt(t);
            const double sigma = std::sqrt((1 - t) / 2);
            const MixedField closed = power_law_emissivity_mixed(1, s, b0, sigma, 1e9);
            const double unit = power_law_emissivity_ordered(1, s, 1, 1e9) / moment(synchrotron_f);
            INFO("s " << s << " t " << t);
            CHECK(unit * moment([&](double x) { return mixed_field_f(x, t); }) ==
                  Approx(closed.total).epsilon(1e-9));
            CHECK(unit * moment([&](double x) { return mixed_field_g(x, t); }) ==
                  Approx(closed.polarised).epsilon(1e-9).margin(1e-30));
        }
    }
}

TEST_CASE("mixed-field kernels agree with quadrature over the plane of the projected field", "[physics]") {
    // polar coordinates, Gaussian in two components, no Bessel function: periodic trapezium in the angle
    const auto rule = gauss_legendre(20);
    for (const double t : {0.0, 0.2, 0.8, 0.99, 0.9999}) {
        const int angles = t > 0.99 ? 2000 : 300;
        for (const double x : {1e-8, 1e-3, 0.1, 1.0, 10.0, 60.0}) {
            const double b0 = std::sqrt(t);
            const double variance = (1 - t) / 2;
            const auto average = [&](auto&& kernel, int harmonic) {
                const auto ring = [&](double b) {
                    double sum = 0;
                    for (int i = 0; i < angles; ++i) {
                        const double phi = 2 * constants::pi * i / angles;
                        const double half = std::sin(phi / 2);
                        const double distance2 = (b - b0) * (b - b0) + 4 * b * b0 * half * half;
                        sum += std::exp(-distance2 / (2 * variance)) * std::cos(harmonic * phi);
                    }
                    return sum / angles / variance * b * kernel(x / b);
                };
                const double wide = 9 * std::sqrt(variance) + 2 * std::cbrt(x * variance);
                const double from = std::log(std::max(b0 - wide, 1e-6));
                return integrate_panels(
                    rule, [&](double y) { return std::exp(2 * y) * ring(std::exp(y)); }, from,
                    std::log(b0 + wide), wide < b0 ? 12 : 60);
            };
            const MixedField found = mixed_field(x, t);
            INFO("t " << t << " x " << x);
            CHECK(found.total == Approx(average(synchrotron_f, 0)).epsilon(1e-10));
            CHECK(found.polarised ==
                  Approx(average(synchrotron_g, 2)).epsilon(1e-10).margin(1e-10 * found.total));
        }
    }
}

TEST_CASE("mixed-field kernels go over into the ordered and the isotropic case", "[physics]") {
    for (const double x : {1e-6, 0.01, 1.0, 20.0}) {
        CHECK(mixed_field_f(x, 1) == synchrotron_f(x));
        CHECK(mixed_field_g(x, 1) == synchrotron_g(x));
        CHECK(mixed_field_f(x, 1 - 1e-10) == Approx(synchrotron_f(x)).epsilon(1e-10 * (1 + x * x)));
        CHECK(mixed_field_g(x, 1 - 1e-10) == Approx(synchrotron_g(x)).epsilon(1e-9 * (1 + x * x)));
        CHECK(mixed_field_g(x, 0) == 0);
        // t = 0: a Gaussian field of three components is the average of R over its Maxwellian strength
        const double sigma = std::sqrt(0.5);
        const double maxwell = integrate_panels(
            gauss_legendre(16),
            [&](double y) {
                const double b = std::exp(y);
                return std::sqrt(2 / constants::pi) * std::pow(b / sigma, 3) *
                       std::exp(-b * b / (2 * sigma * sigma)) * b * synchrotron_random(x / b);
            },
            -12, 2.3, 40);
        CHECK(mixed_field_f(x, 0) == Approx(maxwell).epsilon(1e-10));
    }
}
