#include "read_table.hpp"

#include "aureole/base/constants.hpp"
#include "aureole/physics/gyration.hpp"
#include "aureole/physics/kinematics.hpp"

#include <catch2/catch.hpp>

using namespace aureole;
using namespace aureole::physics;

TEST_CASE("gyroradius, gyrofrequency and proton energy of a rigidity agree with the table", "[physics]") {
    const double rest = constants::proton_rest_energy;
    for (const auto& row : read_table("gyroradius.csv")) {
        const double r = number(row, "R_GV") * gigavolt;
        const double field = number(row, "B_uG") * constants::microgauss;
        const double t = kinetic_energy_from_rigidity(r, rest);
        INFO("R " << row.at("R_GV") << " GV, B " << row.at("B_uG") << " uG");
        CHECK(gyroradius(r, field) == Approx(number(row, "rg_cm")).epsilon(1e-10));
        CHECK(t / constants::gigaelectronvolt == Approx(number(row, "Tp_GeV")).epsilon(1e-9));
        CHECK(speed_over_c(t, rest) == Approx(number(row, "beta_p")).epsilon(1e-9));
        CHECK(gyrofrequency(total_energy(t, rest), field) ==
              Approx(number(row, "Omega_p_rad_s")).epsilon(1e-9));
        CHECK(gyroradius(r, field) * gyrofrequency(total_energy(t, rest), field) ==
              Approx(speed_over_c(t, rest) * constants::speed_of_light).epsilon(1e-13));
    }
}

TEST_CASE("rigidity, momentum and kinetic energy turn back into each other for any charge", "[physics]") {
    const double rest = 4 * constants::proton_rest_energy;
    for (const double ratio : {1e-10, 1e-3, 1.0, 1e5}) {
        const double t = ratio * rest;
        CHECK(kinetic_energy_from_rigidity(rigidity(t, rest, 2), rest, 2) == Approx(t).epsilon(1e-13));
        CHECK(momentum_from_rigidity(rigidity(t, rest, 2), 2) ==
              Approx(momentum_times_c(t, rest)).epsilon(1e-14));
        CHECK(rigidity(t, rest, 2) == Approx(0.5 * rigidity(t, rest)).epsilon(1e-14));
    }
    // a momentum of 1 GeV/c and one elementary charge: 1 GV, by the definition of the electronvolt
    CHECK(rigidity_from_momentum(constants::gigaelectronvolt) == Approx(gigavolt).epsilon(1e-14));
}
