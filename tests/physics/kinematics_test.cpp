#include "aureole/base/constants.hpp"
#include "aureole/physics/kinematics.hpp"
#include "aureole/physics/published_spectra.hpp"

#include <catch2/catch.hpp>

#include <cmath>

using namespace aureole;
using namespace aureole::physics;

TEST_CASE("energy, momentum and speed agree with each other at all energies", "[physics]") {
    const double rest = constants::proton_rest_energy;
    for (const double ratio : {1e-12, 1e-4, 1.0, 1e6}) {
        const double t = ratio * rest;
        const double pc = momentum_times_c(t, rest);
        INFO("T/mc2 = " << ratio);
        CHECK(kinetic_energy_from_momentum(pc, rest) == Approx(t).epsilon(1e-14));
        CHECK(pc / total_energy(t, rest) == Approx(speed_over_c(t, rest)).epsilon(1e-14));
    }
    CHECK(speed_over_c(1e-12 * rest, rest) == Approx(std::sqrt(2e-12)).epsilon(1e-11));
    CHECK(kinetic_energy(lorentz_factor(3 * rest, rest), rest) == Approx(3 * rest).epsilon(1e-15));
    // a proton of 1 GeV kinetic energy: p c = 1.696 GeV, v = 0.875 c (Particle Data Group booklets, from
    // memory)
    CHECK(momentum_times_c(constants::gigaelectronvolt, rest) / constants::gigaelectronvolt ==
          Approx(1.696).epsilon(3e-4));
    CHECK(speed_over_c(constants::gigaelectronvolt, rest) == Approx(0.875).epsilon(1e-3));
}

TEST_CASE("published local spectra give their printed fluxes", "[physics][literature]") {
    const double gev = constants::gigaelectronvolt;
    const auto flux = [&](double density, double t, double rest) { // cm-2 s-1 sr-1 GeV-1
        return density * speed_over_c(t, rest) * constants::speed_of_light / (4 * constants::pi) * gev;
    };
    const double proton = constants::proton_rest_energy;
    const double table[][2] = {{1, 0.3526}, {10, 2.450e-3}, {100, 4.735e-6}};
    for (const auto& [t, j] : table) {
        CHECK(flux(vos_potgieter_2015_protons(t * gev), t * gev, proton) == Approx(j).epsilon(4e-4));
    }
    CHECK(flux(dermer_1986_protons(gev), gev, proton) == Approx(0.3565).epsilon(4e-4));
    // both fits describe the same protons
    CHECK(dermer_1986_protons(10 * gev) / vos_potgieter_2015_protons(10 * gev) == Approx(1).epsilon(0.25));
    // electrons at 1 GeV: about 100 m-2 s-1 sr-1 GeV-1 above the heliosphere, at 10 GeV 0.25-0.35 (AMS-02,
    // from memory)
    const double electron = constants::electron_rest_energy;
    CHECK(flux(potgieter_2015_electrons(10 * gev), 10 * gev, electron) * 1e4 == Approx(0.28).epsilon(0.4));
    CHECK(flux(potgieter_2015_electrons(gev), gev, electron) * 1e4 == Approx(200).epsilon(0.6));
}
