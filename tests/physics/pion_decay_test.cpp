#include "read_table.hpp"

#include "aureole/base/constants.hpp"
#include "aureole/base/error.hpp"
#include "aureole/base/quadrature.hpp"
#include "aureole/physics/bremsstrahlung.hpp"
#include "aureole/physics/kinematics.hpp"
#include "aureole/physics/pion_decay.hpp"
#include "aureole/physics/published_spectra.hpp"
#include "aureole/physics/synchrotron.hpp"

#include <catch2/catch.hpp>

#include <algorithm>
#include <cmath>
#include <vector>

using namespace aureole;
using namespace aureole::physics;

namespace {

constexpr double gev = constants::gigaelectronvolt;
constexpr double table_unit = constants::millibarn / gev;

PionModel model_named(const std::string& name) {
    return name == "geant4"   ? PionModel::kafexhiu_2014_geant4
           : name == "sibyll" ? PionModel::kafexhiu_2014_sibyll
           : name == "qgsjet" ? PionModel::kafexhiu_2014_qgsjet
                              : PionModel::kafexhiu_2014;
}

/// int f(T) dT from `low` to `high` [erg], in ln T with splits at the borders.
template <class Function> double over_protons(PionModel model, double low, double high, Function&& f) {
    std::vector<double> edges{low, high};
    for (const double border : pion_borders(model)) {
        if (border > low && border < high) {
            edges.push_back(border);
        }
    }
    for (double edge = 1.3 * low; edge < high; edge *= edge < 100 * gev ? 1.3 : 3) {
        edges.push_back(edge);
    }
    std::sort(edges.begin(), edges.end());
    const auto rule = gauss_legendre(14);
    double sum = 0;
    for (std::size_t i = 1; i < edges.size(); ++i) {
        sum += integrate(
            rule,
            [&](double v) { // ln T = ln a + (ln b/a) v^3 in the first piece: the threshold is a square root
                            // or so
                const double width = std::log(edges[i] / edges[i - 1]);
                const double t = edges[i - 1] * std::exp(width * (i == 1 ? v * v * v : v));
                return width * (i == 1 ? 3 * v * v : 1.0) * t * f(t);
            },
            0, 1);
    }
    return sum;
}

/// Photons (power 0) or photon energy (power 1) per collision area: int E^power (d sigma/dE) dE.
double moment(PionModel model, double t, int power) {
    const PhotonRange range = pion_photon_range(t);
    return integrate_panels(
        gauss_legendre(16),
        [&](double y) {
            const double e = std::exp(y);
            return std::pow(e, power + 1) * pion_gamma_cross_section(model, e, t);
        },
        std::log(range.min), std::log(range.max), 40);
}

double energy_fraction(PionModel model, double t) {
    return moment(model, t, 1) / (inelastic_cross_section(model, t) * t);
}

} // namespace

TEST_CASE("the Kafexhiu et al. cross-sections agree with the table", "[physics]") {
    for (const auto& row : read_table("pion_kafexhiu.csv")) {
        const PionModel model = model_named(row.at("model"));
        const double e = number(row, "E_gamma_GeV") * gev;
        INFO(row.at("row") << " " << row.at("model") << " T " << row.at("T_p_GeV") << " E "
                           << row.at("E_gamma_GeV"));
        if (row.at("row") == "dsigma") {
            const double t = number(row, "T_p_GeV") * gev;
            CHECK(inelastic_cross_section(model, t) / constants::millibarn ==
                  Approx(number(row, "sigma_inel_or_s")).epsilon(1e-9));
            CHECK(neutral_pion_cross_section(model, t) / constants::millibarn ==
                  Approx(number(row, "sigma_pi0_mb")).epsilon(1e-9));
            CHECK(pion_gamma_cross_section(model, e, t) / table_unit ==
                  Approx(number(row, "value")).epsilon(1e-9).margin(1e-12));
            continue;
        }
        const double s = number(row, "sigma_inel_or_s");
        const double low = minimum_proton_energy(model, e);
        const double emissivity = over_protons(model, low, 1e8 * gev, [&](double t) {
            return std::pow(t / gev + 0.938272, -s) * pion_gamma_cross_section(model, e, t);
        });
        CHECK(emissivity == Approx(number(row, "value")).epsilon(1e-6));
    }
}

TEST_CASE("the Kelner et al. spectra agree with the table", "[physics]") {
    for (const auto& row : read_table("pion_kelner.csv")) {
        const double first = number(row, "Ep_or_s");
        if (row.at("row") == "F_gamma") {
            INFO("E_p " << first << " x " << row.at("x"));
            CHECK(kelner_2006_spectrum(number(row, "x"), first * gev) ==
                  Approx(number(row, "value")).epsilon(1e-9));
            CHECK(inelastic_cross_section(PionModel::kelner_2006, (first - 0.93827209) * gev) /
                      constants::millibarn ==
                  Approx(number(row, "sigma_or_ntilde")).epsilon(1e-9));
            continue;
        }
        const bool direct = row.at("row") == "emis_direct";
        const double e = number(row, "E_gamma_GeV") * gev * (direct ? 1 : 1 - 1e-12);
        const double n = direct ? 1 : number(row, "sigma_or_ntilde");
        const double low = minimum_proton_energy(PionModel::kelner_2006, e);
        const double emissivity = over_protons(PionModel::kelner_2006, low, 1e8 * gev, [&](double t) {
            return std::pow(t / gev + 0.93827209, -first) * kelner_2006_cross_section(e, t, n);
        });
        INFO(row.at("row") << " s " << first << " E " << e / gev);
        CHECK(emissivity == Approx(number(row, "value")).epsilon(1e-6));
        if (!direct) {
            CHECK(kelner_2006_multiplicity(first) == Approx(n).epsilon(1e-5));
        }
    }
}

TEST_CASE("the multiplicities of the low-energy continuation are those printed", "[physics][literature]") {
    // Kelner, Aharonian & Bugayov 2006, sec. IV: 1.10, 0.86, 0.91 for slopes 2, 2.5, 3 (from memory)
    const double table[][2] = {{2, 1.10}, {2.5, 0.86}, {3, 0.91}};
    for (const auto& [slope, n] : table) {
        CHECK(kelner_2006_multiplicity(slope) == Approx(n).epsilon(0).margin(0.005));
    }
}

TEST_CASE("the continuous model makes exactly two photons per pion", "[physics][conservation]") {
    const PionModel model = PionModel::kafexhiu_2014_continuous;
    for (const double t :
         {0.3, 0.5, 0.9, 1.0, 1.2, 2.0, 3.0, 4.0, 5.0, 17.0, 20.0, 30.0, 50.0, 1e2, 1e4, 1e6}) {
        INFO("T " << t);
        CHECK(moment(model, t * gev, 0) / neutral_pion_cross_section(model, t * gev) ==
              Approx(2).epsilon(1e-7));
    }
}

TEST_CASE("the published form misses two photons per pion by up to a quarter", "[physics]") {
    double largest = 0;
    for (const double t : {0.5, 1.5, 3.0, 3.99, 4.01, 4.9, 10.0, 19.9, 20.1, 49.0, 60.0, 1e3}) {
        const double ratio = moment(PionModel::kafexhiu_2014, t * gev, 0) /
                             (2 * neutral_pion_cross_section(PionModel::kafexhiu_2014, t * gev));
        largest = std::max(largest, std::abs(ratio - 1));
    }
    CHECK(largest < 0.15);
    CHECK(largest > 0.10);
}

TEST_CASE("the continuous model has no steps where the published one falls by 41 per cent", "[physics]") {
    const auto step = [](PionModel model, double t, double width) {
        return energy_fraction(model, t * (1 + width) * gev) / energy_fraction(model, t * (1 - width) * gev) -
               1;
    };
    CHECK(step(PionModel::kafexhiu_2014, 4, 1e-4) == Approx(-0.41).epsilon(0).margin(0.02));
    for (const double t : {1.0, 2.0, 4.0, 5.0, 20.0, 50.0}) {
        INFO("T " << t);
        CHECK(std::abs(step(PionModel::kafexhiu_2014_continuous, t, 1e-4)) < 1e-3);
        CHECK(std::abs(step(PionModel::kafexhiu_2014_continuous, t, 0.03)) < 0.1);
        for (const double e : {0.03, 0.1, 0.5}) {
            const auto at = [&](double s) {
                return pion_gamma_cross_section(PionModel::kafexhiu_2014_continuous, e * gev, s * gev);
            };
            CHECK(at(t * 1.0001) == Approx(at(t * 0.9999)).epsilon(2e-3));
        }
    }
}

TEST_CASE("the mean pion energy of the continuous model rises with the proton energy", "[physics]") {
    const PionModel model = PionModel::kafexhiu_2014_continuous;
    double before = 0;
    double highest_fraction = 0;
    for (double t = 0.4; t < 2e5; t *= 1.12) {
        const double mean = 2 * moment(model, t * gev, 1) / moment(model, t * gev, 0);
        INFO("T " << t);
        CHECK(mean > before);
        before = mean;
        if (t > 2) { // where resonances are over, the share of the energy rises too, to 1.5 %
            const double fraction = energy_fraction(model, t * gev);
            CHECK(fraction > 0.985 * highest_fraction);
            highest_fraction = std::max(highest_fraction, fraction);
        }
    }
    CHECK(energy_fraction(model, 1e3 * gev) == Approx(1.0 / 6).epsilon(0.12));
}

TEST_CASE("photons keep to the kinematic range and are symmetric about half the pion mass", "[physics]") {
    const double m = 0.134976 * gev;
    CHECK(pion_threshold() / gev == Approx(0.2797).epsilon(1e-3));
    for (const double t : {0.4, 2.0, 30.0, 1e3}) {
        const PhotonRange range = pion_photon_range(t * gev);
        CHECK(std::sqrt(range.min * range.max) == Approx(m / 2).epsilon(1e-12));
        for (const PionModel model : {PionModel::kafexhiu_2014_continuous, PionModel::kafexhiu_2014}) {
            CHECK(minimum_proton_energy(model, range.max) == Approx(t * gev).epsilon(1e-9));
            CHECK(minimum_proton_energy(model, range.min) == Approx(t * gev).epsilon(1e-9));
            CHECK(pion_gamma_cross_section(model, range.max * 1.0001, t * gev) == 0);
            CHECK(pion_gamma_cross_section(model, range.min * 0.9999, t * gev) == 0);
            for (const double ratio : {1.3, 2.0}) {
                CHECK(pion_gamma_cross_section(model, m / 2 * ratio, t * gev) ==
                      Approx(pion_gamma_cross_section(model, m / 2 / ratio, t * gev)).epsilon(1e-12));
            }
        }
    }
    CHECK(pion_gamma_cross_section(PionModel::kafexhiu_2014_continuous, m / 2, pion_threshold()) == 0);
    CHECK(inelastic_cross_section(PionModel::kafexhiu_2014, 0.5 * pion_threshold()) == 0);
    CHECK(pion_photon_range(0.1 * gev).max < pion_photon_range(0.1 * gev).min);
    CHECK_THROWS_AS(neutral_pion_cross_section(PionModel::kelner_2006, gev), Error);
}

TEST_CASE("models agree above 100 GeV to the spread of the generators", "[physics]") {
    for (const double t : {1e3, 1e4}) {
        for (const double x : {0.01, 0.1, 0.3}) {
            const double kelner =
                pion_gamma_cross_section(PionModel::kelner_2006, std::max(x * t, 100.0) * gev, t * gev);
            const double pythia = pion_gamma_cross_section(PionModel::kafexhiu_2014_continuous,
                                                           std::max(x * t, 100.0) * gev, t * gev);
            INFO("T " << t << " x " << x);
            CHECK(pythia / kelner == Approx(1).epsilon(0.25));
        }
    }
}

TEST_CASE("local gas shines above 100 MeV as measured", "[physics][literature]") {
    // Abdo et al. 2009, ApJ 703, 1249: (1.63 +- 0.05) 1e-26 above 100 MeV and (0.66 +- 0.02) 1e-26 above 300
    // MeV, photons s-1 sr-1 per H
    const PionModel model = PionModel::kafexhiu_2014_continuous;
    const auto rule = gauss_legendre(12);
    const auto emissivity = [&](double above) {
        return integrate_panels(
            rule,
            [&](double y) {
                const double e = std::exp(y);
                const double pions =
                    nuclear_enhancement *
                    over_protons(model, minimum_proton_energy(model, e), 1e5 * gev, [&](double t) {
                        return vos_potgieter_2015_protons(t) *
                               speed_over_c(t, constants::proton_rest_energy) *
                               pion_gamma_cross_section(model, e, t);
                    });
                const double rest = constants::electron_rest_energy;
                const double electrons = integrate_panels(
                    rule,
                    [&](double z) {
                        const double t = e + std::exp(z);
                        return std::exp(z) * potgieter_2015_electrons(t) * speed_over_c(t, rest) *
                               bremsstrahlung_atomic(t + rest, e);
                    },
                    std::log(1e-4 * e), std::log(1e3 * e), 6);
                return e * (pions + electrons) * constants::speed_of_light / (4 * constants::pi);
            },
            std::log(above), std::log(100 * gev), 6);
    };
    CHECK(emissivity(0.1 * gev) == Approx(1.63e-26).epsilon(0.3));
    CHECK(emissivity(0.3 * gev) == Approx(0.66e-26).epsilon(0.3));
}

TEST_CASE("local electrons shine at radio frequencies as measured", "[physics][literature]") {
    // 408 MHz emissivity of the solar neighbourhood, 7 to 11 K per kpc (Beuermann, Kanbach & Berkhuijsen
    // 1985, A&A 153, 17, and later work; from memory)
    const double field = 6e-6; // total, of random direction
    const double frequency = 408e6;
    const double rest = constants::electron_rest_energy;
    const double j = synchrotron_power_constant * field / (4 * constants::pi) *
                     integrate_panels(
                         gauss_legendre(16),
                         [&](double y) {
                             const double t = std::exp(y);
                             const double gamma = 1 + t / rest;
                             return t * potgieter_2015_electrons(t) *
                                    synchrotron_random(
                                        frequency / (synchrotron_critical_constant * field * gamma * gamma));
                         },
                         std::log(5e-3 * gev), std::log(100 * gev), 20);
    const double wavelength = constants::speed_of_light / frequency;
    const double kelvin_per_kpc =
        j * constants::kiloparsec * wavelength * wavelength / (2 * constants::boltzmann);
    CHECK(kelvin_per_kpc == Approx(9).epsilon(0.5));
}
