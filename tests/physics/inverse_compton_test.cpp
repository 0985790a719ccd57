#include "read_table.hpp"

#include "aureole/base/constants.hpp"
#include "aureole/base/error.hpp"
#include "aureole/base/quadrature.hpp"
#include "aureole/physics/inverse_compton.hpp"
#include "aureole/physics/radiation.hpp"

#include <catch2/catch.hpp>

#include <cmath>

using namespace aureole;
using namespace aureole::physics;

namespace {

constexpr double rest = constants::electron_rest_energy;
constexpr double thomson = constants::thomson_cross_section * constants::speed_of_light;

/// int f d eps over a black body, in ln eps.
template <class Function> double over_blackbody(double temperature, Function&& f) {
    const double thermal = constants::boltzmann * temperature;
    return integrate_panels(
        gauss_legendre(16),
        [&](double y) {
            const double eps = std::exp(y) * thermal;
            return eps * blackbody_photon_density(eps, temperature) * f(eps);
        },
        -30, 3.9, 24);
}

} // namespace

TEST_CASE("the black body has the published energy density and photon number", "[physics][literature]") {
    CHECK(blackbody_energy_density(cmb_temperature) / constants::electronvolt ==
          Approx(0.260571).epsilon(3e-6));
    CHECK(over_blackbody(cmb_temperature, [](double) { return 1; }) == Approx(410.727).epsilon(2e-6));
    CHECK(over_blackbody(5000, [](double eps) { return eps; }) ==
          Approx(blackbody_energy_density(5000)).epsilon(1e-12));
    CHECK(diluted_blackbody_photon_density(1e-12, 3000, 2e-12) * blackbody_energy_density(3000) ==
          Approx(blackbody_photon_density(1e-12, 3000) * 2e-12).epsilon(1e-14));
    CHECK(blackbody_photon_density(0, 3) == 0);
    CHECK(radiation_constant == Approx(7.5657e-15).epsilon(1e-5)); // CODATA, from memory
}

TEST_CASE("the scattering kernels agree with the table", "[physics]") {
    for (const auto& row : read_table("ic_kernel.csv")) {
        const double gamma = number(row, "gamma");
        const double eps = number(row, "eps") * rest;
        const double eps1 = number(row, "eps1") * rest;
        INFO("gamma " << gamma << " eps " << number(row, "eps") << " frac " << number(row, "frac"));
        // eps1 is printed to 13 digits; near the end of the range the kernel magnifies that by 1/(1 - frac)
        const double tolerance = 2e-12 / (1.001 - number(row, "frac"));
        CHECK(inverse_compton_kernel(gamma, eps, eps1) * rest ==
              Approx(number(row, "K_iso")).epsilon(tolerance + 1e-11));
        const std::pair<const char*, double> columns[] = {
            {"K_mu_m1", -1}, {"K_mu_m0.5", -.5}, {"K_mu_0", 0}, {"K_mu_p0.5", .5}};
        for (const auto& [name, mu] : columns) {
            CHECK(inverse_compton_kernel(gamma, eps, eps1, mu) * rest ==
                  Approx(number(row, name)).epsilon(tolerance + 1e-11));
        }
    }
}

TEST_CASE("the unidirectional kernel averages to the isotropic one", "[physics]") {
    const double eps = 1e-5 * rest;
    for (const double gamma : {100.0, 1e4, 1e6}) {
        const double g = 4e-5 * gamma;
        for (const double fraction : {0.01, 0.4, 0.95}) {
            const double z = fraction * g / (1 + g);
            // mu below which the photon can be made
            const double highest = 1 - z / (1 - z) / (2e-5 * gamma);
            const double mean =
                0.5 * integrate_panels(
                          gauss_legendre(24),
                          [&](double w) { // mu = 1 - exp(w): the kernel is a polynomial in 1/(1 - mu)
                              return std::exp(w) *
                                     inverse_compton_kernel(gamma, eps, z * gamma * rest, 1 - std::exp(w));
                          },
                          std::log1p(-highest) + 1e-15, std::log(2.0), 8);
            CHECK(inverse_compton_kernel(gamma, eps, z * gamma * rest) == Approx(mean).epsilon(1e-11));
        }
    }
}

TEST_CASE("scatterings and energy add up over the isotropic kernel", "[physics][conservation]") {
    for (const double b : {1e-3, 0.1, 1.0, 30.0, 1e4}) {
        const double gamma = 1e8; // the kernel leaves out q < 1/(4 gamma^2)
        const double eps = b / (4 * gamma) * rest;
        // in q from 1/(4 gamma^2), eps1 = gamma b q/(1 + b q)
        const auto over = [&](auto&& weight) {
            return integrate_panels(
                gauss_legendre(16),
                [&](double y) {
                    const double q = std::exp(y);
                    const double eps1 = gamma * rest * b * q / (1 + b * q);
                    return q * gamma * rest * b / ((1 + b * q) * (1 + b * q)) * weight(eps1) *
                           inverse_compton_kernel(gamma, eps, eps1);
                },
                -std::log(4 * gamma * gamma) + 1e-9, -1e-15, 40);
        };
        INFO("b " << b);
        CHECK(over([](double) { return 1; }) ==
              Approx(thomson * klein_nishina_rate_factor(b)).epsilon(1e-10));
        CHECK(over([](double e) { return e; }) ==
              Approx(4.0 / 3 * thomson * gamma * gamma * eps * klein_nishina_loss_factor(b)).epsilon(1e-10));
    }
    // total rate against the angle-averaged Klein-Nishina cross-section, six printed digits
    const double table[][2] = {
        {0.1, 0.939230}, {1, 0.655172}, {10, 0.258460}, {100, 0.0593951}, {1000, 0.00954072}};
    for (const auto& [b, value] : table) {
        CHECK(klein_nishina_rate_factor(b) == Approx(value).epsilon(1e-5));
    }
    CHECK(klein_nishina_rate_factor(0) == 1);
    CHECK(inverse_compton_rate(1e3, 1e-15, 410) == Approx(thomson * 410).epsilon(1e-4));
}

TEST_CASE("the Klein-Nishina loss factor agrees with 30-digit quadrature", "[physics]") {
    for (const auto& row : read_table("losses_ic_kn.csv")) {
        if (row.at("case") == "kernel") {
            INFO("b " << row.at("b"));
            CHECK(klein_nishina_loss_factor(number(row, "b")) == Approx(number(row, "alt")).epsilon(3e-12));
            continue;
        }
        const double gamma = number(row, "gamma");
        const double loss =
            4.0 / 3 * thomson * gamma * gamma * over_blackbody(number(row, "T_K"), [&](double eps) {
                return eps * klein_nishina_loss_factor(4 * gamma * eps / rest);
            });
        CHECK(loss == Approx(number(row, "value")).epsilon(1e-10));
    }
    CHECK(klein_nishina_loss_factor(0) == Approx(1).epsilon(1e-15));
    CHECK(klein_nishina_loss_factor(0.25 * (1 - 1e-13)) ==
          Approx(klein_nishina_loss_factor(0.25)).epsilon(2e-12));
}

TEST_CASE("emission on a black body agrees with double quadrature", "[physics]") {
    for (const auto& row : read_table("ic_blackbody.csv")) {
        const double s = number(row, "s");
        const double temperature = number(row, "T_K");
        const double eps1 = number(row, "E_gamma_eV") * constants::electronvolt;
        const double first = eps1 / rest; // gamma above which z < 1
        const double high = number(row, "gamma_max");
        if (high <= first) {
            CHECK(number(row, "j") == 0);
            continue;
        }
        const double low = number(row, "gamma_min");
        const double from = low > first ? std::log(low - first) : std::log(first) - 30;
        const double found = integrate_panels(
            gauss_legendre(16),
            [&](double y) {
                const double gamma = first + std::exp(y);
                return std::exp(y) * std::pow(gamma, -s) *
                       inverse_compton_blackbody_kernel(gamma, eps1, temperature);
            },
            from, std::log(high - first), 60);
        INFO("s " << s << " T " << temperature << " E " << row.at("E_gamma_eV"));
        CHECK(found * blackbody_energy_density(temperature) / (4 * constants::pi) * constants::electronvolt ==
              Approx(number(row, "j")).epsilon(number(row, "E_gamma_eV") > 1e11 ? 1e-7 : 1e-8));
    }
}

TEST_CASE("the energy of photons from a black body is the electron's loss", "[physics][conservation]") {
    for (const double gamma : {1e3, 1e6, 1e9}) {
        const double temperature = 30;
        const double thermal = constants::boltzmann * temperature;
        const double highest = gamma * rest;
        const double power = integrate_panels(
            gauss_legendre(16),
            [&](double y) { // eps1 = highest e^y/(1 + e^y)
                const double z = 1 / (1 + std::exp(-y));
                return highest * z * (1 - z) * highest * z *
                       inverse_compton_blackbody_kernel(gamma, highest * z, temperature);
            },
            std::log(4 * gamma * thermal / rest) - 16, std::log(4 * gamma * thermal / rest) + 5, 60);
        const double loss = 4.0 / 3 * thomson * gamma * gamma * over_blackbody(temperature, [&](double eps) {
                                return eps * klein_nishina_loss_factor(4 * gamma * eps / rest);
                            });
        CHECK(power * blackbody_energy_density(temperature) == Approx(loss).epsilon(1e-9));
    }
}

TEST_CASE("a fine table of a black body gives the black-body kernel, and tables are checked", "[physics]") {
    const double temperature = 30;
    const double thermal = constants::boltzmann * temperature;
    const auto error = [&](int nodes) {
        std::vector<double> energy, density;
        for (int i = 0; i < nodes; ++i) {
            energy.push_back(thermal * std::exp(-14 + 18.0 * i / (nodes - 1)));
            density.push_back(diluted_blackbody_photon_density(energy.back(), temperature, 1));
        }
        return inverse_compton_tabulated_kernel(1e6, 1e8 * constants::electronvolt, energy, density) /
                   inverse_compton_blackbody_kernel(1e6, 1e8 * constants::electronvolt, temperature) -
               1;
    };
    const double coarse = std::abs(error(200));
    CHECK(coarse < 1e-3);
    CHECK(std::log2(coarse / std::abs(error(400))) == Approx(2).margin(0.15).epsilon(0)); // second order
    // a power law of photons: one segment or many, the same
    const std::vector<double> ends{1e-15, 1e-11}, n{1e10, 1e4};
    const std::vector<double> more{1e-15, 1e-14, 1e-13, 1e-11}, m{1e10, 3.1622776601683793e8, 1e7, 1e4};
    CHECK(inverse_compton_tabulated_kernel(1e5, 1e-5, ends, n) ==
          Approx(inverse_compton_tabulated_kernel(1e5, 1e-5, more, m)).epsilon(1e-12));
    CHECK(inverse_compton_tabulated_kernel(1e5, 1e-5, ends, std::vector<double>{0, 0}) == 0);
    CHECK_THROWS_AS(inverse_compton_tabulated_kernel(1e5, 1e-5, ends, m), Error);
    CHECK_THROWS_AS(inverse_compton_tabulated_kernel(1e5, 1e-5, std::vector<double>{2, 1}, n), Error);
    CHECK_THROWS_AS(inverse_compton_tabulated_kernel(1e5, 1e-5, ends, std::vector<double>{-1, 1}), Error);
}

TEST_CASE("scattering stops at the kinematic limits", "[physics]") {
    const double eps = 1e-3 * constants::electronvolt;
    const double eps1 = 1e9 * constants::electronvolt;
    const double gamma = minimum_lorentz_factor(eps, eps1);
    CHECK(inverse_compton_kernel(gamma * (1 - 1e-9), eps, eps1) == 0);
    CHECK(inverse_compton_kernel(gamma * (1 + 1e-6), eps, eps1) > 0);
    CHECK(minimum_target_energy(gamma, eps1) == Approx(eps).epsilon(1e-12));
    CHECK(std::isinf(minimum_target_energy(1e3, 2e3 * rest)));
    CHECK(inverse_compton_blackbody_kernel(1e3, 2e3 * rest, 3000) == 0);
    CHECK(inverse_compton_blackbody_kernel(1e3, 1e3 * rest * (1 - 1e-6), 3) == 0);
}
