#include "aureole/base/constants.hpp"
#include "aureole/base/error.hpp"
#include "aureole/base/quadrature.hpp"
#include "aureole/physics/star_formation.hpp"

#include <catch2/catch.hpp>

#include <cmath>

using namespace aureole;
using namespace aureole::physics;

namespace {

constexpr double kpc = constants::kiloparsec;
constexpr double solar_luminosity = 3.828e33; // IAU 2015 Resolution B3

} // namespace

TEST_CASE("initial mass functions give the supernovae per solar mass known for them",
          "[physics][literature]") {
    using Imf = InitialMassFunction;
    struct Row {
        Imf imf;
        double lightest, to_40, to_100; // progenitors 8-40 and 8-100 solar masses, of stars up to 100
    };
    // independent quadrature, two or three digits
    for (const Row& row :
         {Row{Imf::salpeter_1955, 0.1, 0.0068, 0.0074}, Row{Imf::kroupa_2001, 0.1, 0.0101, 0.0111},
          Row{Imf::kroupa_2001, 0.01, 0.0095, 0.0105}, Row{Imf::chabrier_2003, 0.1, 0.0108, 0.0118}}) {
        INFO("IMF " << static_cast<int>(row.imf) << " from " << row.lightest);
        CHECK(supernovae_per_solar_mass(row.imf, {8, 40}, {row.lightest, 100}) ==
              Approx(row.to_40).epsilon(0).margin(5.1e-5));
        CHECK(supernovae_per_solar_mass(row.imf, {8, 100}, {row.lightest, 100}) ==
              Approx(row.to_100).epsilon(0).margin(5.1e-5));
    }
    // closed form of one power law
    const double number = (std::pow(8, -1.35) - std::pow(40, -1.35)) / 1.35;
    const double mass = (std::pow(0.1, -0.35) - std::pow(100, -0.35)) / 0.35;
    CHECK(supernovae_per_solar_mass(Imf::salpeter_1955) == Approx(number / mass).epsilon(1e-10));
    CHECK_THROWS_AS(supernovae_per_solar_mass(Imf::salpeter_1955, {8, 120}), Error);
    CHECK_THROWS_AS(supernovae_per_solar_mass(Imf::salpeter_1955, {40, 8}), Error);
    CHECK_THROWS_AS(supernovae_per_solar_mass(Imf::salpeter_1955, {8, 40}, {0, 100}), Error);
}

TEST_CASE("the Milky Way's supernovae and infrared light give its cosmic-ray power",
          "[physics][literature]") {
    CHECK(cosmic_ray_power(0.02) == Approx(6.34e40).epsilon(1e-3));
    CHECK(cosmic_ray_power(0.02, 0.05, 2e51) == Approx(cosmic_ray_power(0.02)).epsilon(1e-14));
    // 1 solar mass per year: 10^43.41 erg/s, 6.7e9 solar luminosities
    CHECK(star_formation_rate_kennicutt_evans_2012(6.715e9 * solar_luminosity) == Approx(1).epsilon(2e-3));
    // about 2 solar masses a year make about 0.02 supernovae a year
    CHECK(2 * supernovae_per_solar_mass(InitialMassFunction::kroupa_2001) == Approx(0.02).epsilon(0.05));
}

TEST_CASE("source distributions are 1 at 8.5 kpc and peak where the fits do", "[physics]") {
    struct Fit {
        double (*sources)(double);
        double peak; // kpc: a/b R0
    };
    for (const Fit& fit :
         {Fit{sources_case_bhattacharya_1996, 8.5 * 1.69 / 3.33},
          Fit{sources_case_bhattacharya_1998, 8.5 * 2.0 / 3.53}, Fit{sources_green_2015, 8.5 * 1.09 / 3.87},
          Fit{sources_lorimer_2006, 8.5 * 1.9 / 5.0},
          Fit{sources_yusifov_kucuk_2004, 9.05 * 1.64 / 4.01 - 0.55}}) {
        INFO("peak " << fit.peak);
        CHECK(fit.sources(8.5 * kpc) == Approx(1).epsilon(1e-14));
        const double top = fit.sources(fit.peak * kpc);
        CHECK(top > fit.sources((fit.peak - 0.05) * kpc));
        CHECK(top > fit.sources((fit.peak + 0.05) * kpc));
        CHECK(fit.sources(30 * kpc) < 0.02);
    }
    CHECK(sources_case_bhattacharya_1998(0) == 0);
    // (0.55/9.05)^1.64 exp(4.01 x 8.5/9.05)
    CHECK(sources_yusifov_kucuk_2004(0) == Approx(0.4374956).epsilon(1e-7));
    CHECK(sources_exponential(8.5 * kpc + 3 * kpc, 3 * kpc) == Approx(std::exp(-1.0)).epsilon(1e-14));
}

TEST_CASE("the light of an exponential disc agrees with reference values and tends to a point", "[physics]") {
    const double luminosity = 4e10 * solar_luminosity;
    const auto density = [&](double r, double z) {
        return exponential_disc_energy_density(r * kpc, z * kpc, luminosity, 3 * kpc, 0.3 * kpc);
    };
    // eV/cm3, three printed digits
    const double table[][3] = {{0, 0.5, 3.90}, {8, 0, 0.918},    {8, 3, 0.414},
                               {0, 10, 0.198}, {0, 30, 2.81e-2}, {0, 100, 2.65e-3}};
    for (const auto& [r, z, value] : table) {
        INFO("R " << r << " z " << z);
        CHECK(density(r, z) / constants::electronvolt == Approx(value).epsilon(2e-3));
        CHECK(density(r, -z) == density(r, z));
    }
    const double far = 3000;
    CHECK(density(far, 0) * 4 * constants::pi * constants::speed_of_light * far * far * kpc * kpc /
              luminosity ==
          Approx(1).epsilon(1e-5));
    // the surface integral itself, in ring and angle, where it is smooth
    const double r = 4 * kpc;
    const double z = 2 * kpc;
    const auto rule = gauss_legendre(16);
    const double direct = integrate_panels(
        rule,
        [&](double at) {
            return at * std::exp(-at / (3 * kpc)) *
                   integrate_panels(
                       rule,
                       [&](double phi) {
                           return 2 /
                                  (r * r + at * at - 2 * r * at * std::cos(phi) + z * z + 0.09 * kpc * kpc);
                       },
                       0, constants::pi, 6);
        },
        0, 120 * kpc, 40);
    CHECK(density(4, 2) == Approx(direct * luminosity / (2 * constants::pi * 9 * kpc * kpc) /
                                  (4 * constants::pi * constants::speed_of_light))
                               .epsilon(1e-9));
}
