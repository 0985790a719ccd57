#include "read_table.hpp"

#include "aureole/base/constants.hpp"
#include "aureole/sight/view.hpp"

#include <catch2/catch.hpp>

using namespace aureole;
using namespace aureole::sight;

TEST_CASE("a galaxy vector is seen where rotated basis vectors place it", "[sight][geometry]") {
    for (const auto& row : read_table("geometry.csv")) {
        const View view{number(row, "incl_deg") * constants::degree,
                        number(row, "PA_deg") * constants::degree,
                        number(row, "phi0_deg") * constants::degree, 1.0, Projection::orthographic};
        const Vec3 vector{number(row, "vx"), number(row, "vy"), number(row, "vz")};
        INFO("inclination " << row.at("incl_deg") << ", PA " << row.at("PA_deg") << ", azimuth "
                            << row.at("phi0_deg"));
        const Vec3 seen = to_view(view, vector);
        const auto sky = to_sky(view, seen[0], seen[1]);
        // The table has 15 digits.
        CHECK(seen[0] == Approx(number(row, "X")).epsilon(0).margin(1e-12));
        CHECK(seen[1] == Approx(number(row, "Y")).epsilon(0).margin(1e-12));
        CHECK(seen[2] == Approx(number(row, "s")).epsilon(0).margin(1e-12));
        CHECK(sky[0] == Approx(number(row, "xi_E")).epsilon(0).margin(1e-12));
        CHECK(sky[1] == Approx(number(row, "eta_N")).epsilon(0).margin(1e-12));
        CHECK(-seen[2] == Approx(number(row, "toward")).epsilon(0).margin(1e-12));
        const auto back = from_sky(view, sky[0], sky[1]);
        const Vec3 galaxy = to_galaxy(view, {back[0], back[1], seen[2]});
        for (std::size_t axis = 0; axis < 3; ++axis) {
            CHECK(galaxy[axis] == Approx(vector[axis]).epsilon(0).margin(1e-14));
        }
    }
}

TEST_CASE("inclination 90 with position angle 270 shows the disc level with north up", "[sight][geometry]") {
    const View view{90 * constants::degree, 270 * constants::degree, 0, 1, Projection::orthographic};
    const auto sky_of = [&](const Vec3& vector) {
        const Vec3 seen = to_view(view, vector);
        return to_sky(view, seen[0], seen[1]);
    };
    CHECK(sky_of({1, 0, 0})[0] == Approx(-1)); // West
    CHECK(sky_of({0, 0, 1})[1] == Approx(1));  // North
}
