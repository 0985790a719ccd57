#include "read_table.hpp"

#include "aureole/base/constants.hpp"
#include "aureole/base/error.hpp"
#include "aureole/maps/units.hpp"

#include <catch2/catch.hpp>

using namespace aureole;
using maps::Beam;
using maps::gamma_factor;
using maps::radio_factor;

TEST_CASE("one Jy per beam is the brightness and temperature of the table", "[maps][literature]") {
    for (const auto& row : read_table("jy_kelvin.csv")) {
        const double frequency = number(row, "nu_GHz") * 1e9;
        const Beam beam{number(row, "bmaj_arcsec") * constants::arcsecond,
                        number(row, "bmin_arcsec") * constants::arcsecond, 0.4};
        INFO("frequency " << frequency << ", beam " << row.at("bmaj_arcsec") << " x "
                          << row.at("bmin_arcsec"));
        CHECK(solid_angle(beam) == Approx(number(row, "Omega_sr")).epsilon(1e-13).margin(0));
        const double intensity = 1 / radio_factor("Jy/beam", frequency, beam, 1);
        CHECK(intensity * radio_factor("MJy/sr", frequency, beam, 1) ==
              Approx(number(row, "MJysr_per_JyBeam")).epsilon(1e-13).margin(0));
        CHECK(intensity * radio_factor("K", frequency, beam, 1) ==
              Approx(number(row, "T_RJ_K_per_JyBeam")).epsilon(1e-13).margin(0));
    }
}

TEST_CASE("a pixel as large as a beam holds as many Jy as the beam", "[maps]") {
    const Beam beam{3e-5, 2e-5, 0};
    CHECK(radio_factor("Jy/pixel", 1e9, std::nullopt, solid_angle(beam)) ==
          Approx(radio_factor("Jy/beam", 1e9, beam, 1)).epsilon(1e-15).margin(0));
}

TEST_CASE("photons per MeV are a thousandth of photons per GeV", "[maps]") {
    CHECK(gamma_factor("cm-2 s-1 sr-1 GeV-1") ==
          Approx(1000 * gamma_factor("cm-2 s-1 sr-1 MeV-1")).epsilon(1e-15).margin(0));
    CHECK(gamma_factor("cm-2 s-1 sr-1 MeV-1") ==
          Approx(1.602176634e-6).epsilon(1e-15).margin(0)); // CODATA: erg per MeV
    CHECK(gamma_factor("cm-2 s-1 sr-1") == 1);
}

TEST_CASE("units that cannot be had are refused by name", "[maps][bad-input]") {
    CHECK_THROWS_WITH(radio_factor("Jy/beam", 1e9, std::nullopt, 1e-10), Catch::Contains("without a beam"));
    CHECK_THROWS_WITH(radio_factor("mag", 1e9, std::nullopt, 1e-10), Catch::Contains("mag"));
    CHECK_THROWS_WITH(radio_factor("K", 0, std::nullopt, 1e-10), Catch::Contains("frequency"));
    CHECK_THROWS_WITH(gamma_factor("K"), Catch::Contains("\"K\""));
}
