#include "read_table.hpp"

#include "aureole/base/constants.hpp"
#include "aureole/base/quadrature.hpp"
#include "aureole/physics/bremsstrahlung.hpp"

#include <catch2/catch.hpp>

#include <cmath>

using namespace aureole;
using namespace aureole::physics;

namespace {

constexpr double mev = constants::megaelectronvolt;
constexpr double rest = constants::electron_rest_energy;
constexpr double table_unit = constants::millibarn / mev;

/// int k (d sigma/dk) dk/E0 over all photons: the fraction of the energy lost per column of nuclei.
template <class Function> double stopping(double e0, Function&& cross_section) {
    const double highest = e0 - rest;
    return integrate_panels(
               gauss_legendre(16),
               [&](double v) { // k = highest (1 - v^2) opens the tip
                   const double k = highest * (1 - v) * (1 + v);
                   return 2 * highest * v * k * cross_section(e0, k);
               },
               0, 1, 20) /
           e0;
}

} // namespace

TEST_CASE("bremsstrahlung cross-sections agree with 60-digit values", "[physics]") {
    for (const auto& row : read_table("brems.csv")) {
        const double t = number(row, "T_e_MeV") * mev;
        const double e0 = t + rest;
        const double k = number(row, "k_MeV") * mev;
        INFO("T " << t / mev << " k " << k / mev);
        const double born = bremsstrahlung_3bn(e0, k) / table_unit;
        CHECK(born == Approx(number(row, "ep_3BN")).epsilon(t < 2e4 * mev ? 1e-8 : 1e-5));
        CHECK(bremsstrahlung_born(e0, k) / table_unit ==
              Approx(number(row, "ep_3BN")).epsilon(t < 2e3 * mev ? 1e-8 : 4e-6));
        CHECK(bremsstrahlung_bethe_heitler(e0, k) / table_unit ==
              Approx(std::max(0.0, number(row, "ep_rel"))).epsilon(1e-8));
        CHECK(bremsstrahlung_electron_electron(e0, k) / table_unit ==
              Approx(std::max(0.0, number(row, "ee_baring"))).epsilon(1e-8));
        CHECK(bremsstrahlung_screened(Atom::hydrogen, e0, k) / table_unit ==
              Approx(number(row, "H_scr")).epsilon(1e-8));
        CHECK(bremsstrahlung_screened(Atom::helium, e0, k) / table_unit ==
              Approx(number(row, "He_scr")).epsilon(1e-8));
    }
}

TEST_CASE("screening functions agree with quadrature and with the published table", "[physics][literature]") {
    for (const auto& row : read_table("brems_screening.csv")) {
        const double delta = number(row, "Delta");
        INFO("Delta " << delta);
        const Screening h = screening_functions(Atom::hydrogen, delta);
        const Screening he = screening_functions(Atom::helium, delta);
        CHECK(h.phi1 == Approx(number(row, "phi1_H")).epsilon(1e-9));
        CHECK(h.phi2 == Approx(number(row, "phi2_H")).epsilon(1e-9));
        CHECK(he.phi1 == Approx(number(row, "phi1_He")).epsilon(1e-9));
        CHECK(he.phi2 == Approx(number(row, "phi2_He")).epsilon(1e-9));
        // Blumenthal & Gould 1970, table 2, from memory
        CHECK(h.phi1 == Approx(number(row, "phi1_H_BG70")).epsilon(0).margin(0.035));
        CHECK(h.phi2 == Approx(number(row, "phi2_H_BG70")).epsilon(0).margin(0.035));
    }
}

TEST_CASE(
    "the screening correction vanishes with the fourth power of Delta and adds up to the published function",
    "[physics]") {
    for (const Atom atom : {Atom::hydrogen, Atom::helium}) {
        const double total = atom == Atom::hydrogen ? 2 : 6;
        for (const double delta : {1e-3, 0.1, 1.0}) {
            const double d = 2 * constants::fine_structure * delta;
            const Screening correction = screening_correction(atom, delta);
            const Screening published = screening_functions(atom, delta);
            CHECK(correction.phi1 + 4 * total * (-std::log(d) - 0.5) ==
                  Approx(published.phi1).epsilon(3 * d));
            CHECK(correction.phi2 + 4 * total * (-std::log(d) - 0.5) ==
                  Approx(published.phi2).epsilon(3 * d));
        }
        const double ratio = screening_correction(atom, 16).phi1 / screening_correction(atom, 8).phi1;
        CHECK(std::log2(ratio) == Approx(-4).epsilon(0).margin(0.3));
        CHECK(std::abs(screening_correction(atom, 8).phi1) < 3e-3 * total);
    }
}

TEST_CASE("radiation lengths of hydrogen and helium agree with the Particle Data Group",
          "[physics][literature]") {
    // X0: 63.04 and 94.32 g cm-2, Particle Data Group, from memory. Complete screening: -dE/dx = E/X0.
    const double e0 = 1e8 * mev;
    const double atomic_mass_unit = 1.66053907e-24;
    const double hydrogen = stopping(e0, [](double e, double k) { return bremsstrahlung_atomic(e, k, 0); });
    CHECK(1.00794 * atomic_mass_unit / hydrogen == Approx(63.04).epsilon(0.02));
    const double with_helium =
        stopping(e0, [](double e, double k) { return bremsstrahlung_atomic(e, k, 1); });
    CHECK(4.0026 * atomic_mass_unit / (with_helium - hydrogen) == Approx(94.32).epsilon(0.02));
}

TEST_CASE("high-energy losses have their closed forms", "[physics][conservation]") {
    const double unit = constants::fine_structure * constants::classical_electron_radius *
                        constants::classical_electron_radius;
    const Screening phi = screening_functions(Atom::hydrogen, 0);
    const double e0 = 1e8 * mev;
    CHECK(stopping(e0, [](double e, double k) { return bremsstrahlung_atomic(e, k, 0); }) ==
          Approx(unit * (4.0 / 3 * phi.phi1 - phi.phi2 / 3)).epsilon(1e-3));
    // ionised hydrogen: 2 x 4 alpha r_e^2 [ln(2 gamma) - 1/3]
    const double gamma = 1e5;
    CHECK(stopping(gamma * rest, [](double e, double k) { return bremsstrahlung_ionised(e, k, 0); }) ==
          Approx(8 * unit * (std::log(2 * gamma) - 1.0 / 3)).epsilon(2e-3));
}

TEST_CASE("gas cross-sections have no steps in energy and stay positive", "[physics]") {
    for (const double fraction : {1e-3, 0.01, 0.1, 0.3, 0.5, 0.8, 0.95}) {
        double before_atomic = 0;
        double before_ionised = 0;
        const double step = 1.002;
        for (double t = 2 * mev; t < 1e4 * mev; t *= step) {
            const double k = fraction * t;
            const double atomic = k * bremsstrahlung_atomic(t + rest, k);
            const double ionised = k * bremsstrahlung_ionised(t + rest, k);
            REQUIRE(atomic > 0);
            REQUIRE(ionised > 0);
            if (before_atomic > 0) {
                INFO("fraction " << fraction << " T " << t / mev << " MeV");
                REQUIRE(atomic == Approx(before_atomic).epsilon(3e-3));
                REQUIRE(ionised == Approx(before_ionised).epsilon(3e-3));
            }
            before_atomic = atomic;
            before_ionised = ionised;
        }
    }
}

TEST_CASE("the pieces of the electron-electron cross-section join", "[physics]") {
    const double e0 = 50 * mev;
    for (const double k : {0.02, 0.5}) {
        INFO("k/mc2 " << k);
        CHECK(bremsstrahlung_electron_electron(e0, k * rest * (1 - 1e-9)) ==
              Approx(bremsstrahlung_electron_electron(e0, k * rest * (1 + 1e-9))).epsilon(1e-7));
    }
    // above 1 GeV a free electron radiates like a proton
    CHECK(bremsstrahlung_electron_electron(1e3 * mev, 500 * mev) /
              bremsstrahlung_bethe_heitler(1e3 * mev, 500 * mev) ==
          Approx(1).epsilon(0.01));
    CHECK(bremsstrahlung_atomic(10 * mev, 9.6 * mev) == 0);
    CHECK(bremsstrahlung_ionised(10 * mev, 0) == 0);
    CHECK(bremsstrahlung_molecular(1e3 * mev, 10 * mev) == bremsstrahlung_atomic(1e3 * mev, 10 * mev));
}

TEST_CASE("atomic gas at high energy is the published screened cross-section", "[physics]") {
    for (const double t : {300.0, 1e4, 1e6}) {
        for (const double fraction : {1e-3, 0.1, 0.5}) {
            const double e0 = t * mev + rest;
            const double k = fraction * t * mev;
            const double published = bremsstrahlung_screened(Atom::hydrogen, e0, k) +
                                     0.1 * bremsstrahlung_screened(Atom::helium, e0, k);
            INFO("T " << t << " fraction " << fraction);
            CHECK(bremsstrahlung_atomic(e0, k) == Approx(published).epsilon(2e-3));
        }
    }
}
