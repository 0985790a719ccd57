#include "aureole/base/constants.hpp"
#include "aureole/base/error.hpp"
#include "aureole/base/units.hpp"

#include <catch2/catch.hpp>
#include <fmt/format.h>

#include <clocale>
#include <cmath>
#include <locale>
#include <random>
#include <string>
#include <string_view>
#include <vector>

using namespace aureole;
using Catch::Matchers::Contains;

namespace {

std::string message_of(auto&& call) {
    try {
        call();
    } catch (const Error& error) {
        return error.what();
    }
    return "no error";
}

Approx to_rounding(double value) {
    return Approx(value).epsilon(1e-14).margin(0);
}

/// Unit strings that another reader of FITS units is asked about too: tests/outside/astropy_units.py.
constexpr std::string_view shared_units =
    "cm|m|km|um|pc|kpc|Mpc|Gpc|AU|s|min|h|d|yr|Myr|Gyr|Hz|kHz|MHz|GHz|THz|g|kg|mg|K|mK|uK|G|uG|"
    "nG|mG|T|nT|eV|keV|MeV|GeV|TeV|PeV|erg|J|W|N|Pa|Jy|mJy|uJy|MJy/sr|Jy/beam|mJy/beam|"
    "Jy/pixel|Jy beam-1|rad|sr|deg|arcmin|arcsec|mas|rad m-2|cm-3 GeV-1|m-3 MeV-1|eV-1 cm-3|"
    "erg s-1 cm-3 Hz-1 sr-1|cm-2 s-1 sr-1 MeV-1|GeV-1 cm-3 s-1 sr-1|ph cm-2 s-1|photon/cm**2/s|"
    "count|km/s|km s-1|cm**2 s**-1|cm^2 s^-1|erg.s**-1|solMass pc-3|solLum|10**-3 Jy|"
    "10**3 erg s-1|W m-2 Hz-1|Angstrom|barn|eV cm-3|";

const std::vector<Dimension>& spoken_dimensions() {
    namespace d = dimension;
    static const std::vector<Dimension> dimensions{d::length,
                                                   d::time,
                                                   d::frequency,
                                                   d::speed,
                                                   d::energy,
                                                   d::temperature,
                                                   d::magnetic_field,
                                                   d::angle,
                                                   d::number_density,
                                                   d::energy_density,
                                                   d::spectral_density,
                                                   d::radio_intensity,
                                                   d::flux_density,
                                                   d::radio_emissivity,
                                                   d::photon_emissivity,
                                                   {.length = 1, .field = 1},
                                                   {.length = 2, .mass = 1, .time = -3},
                                                   {.length = -2, .mass = 1},
                                                   {.mass = 1, .time = -1},
                                                   {.length = 3, .time = -1}};
    return dimensions;
}

} // namespace

TEST_CASE("units have the sizes that their definitions give", "[base][units]") {
    const auto factor = [](const char* unit) { return parse_unit(unit).factor; };
    CHECK(factor("kpc") == to_rounding(3.0856775814913673e21)); // 648000/pi AU, IAU 2015 B2
    CHECK(factor("AU") == to_rounding(1.495978707e13));         // IAU 2012 B2
    CHECK(factor("GeV") == to_rounding(1.602176634e-3));        // exact in SI 2019
    CHECK(factor("yr") == to_rounding(365.25 * 86400));
    CHECK(factor("T") == to_rounding(1e4));
    CHECK(factor("uJy") == to_rounding(1e-29));
    CHECK(factor("arcsec") == to_rounding(constants::pi / 648000));
    CHECK(factor("W m-2 Hz-1") == to_rounding(1e3)); // 1 Jy = 1e-26 W m-2 Hz-1 = 1e-23 CGS
    CHECK(factor("10**-26 W m-2 Hz-1") == to_rounding(constants::jansky));
    CHECK(factor("GV") == to_rounding(1e17 / constants::speed_of_light)); // 1 V = 1e8/c statvolt
    CHECK(parse_unit("GV").dimension == parse_unit("G cm").dimension);
    CHECK(parse_unit("GV").dimension == parse_unit("statvolt").dimension);
    CHECK(factor("Pa") == to_rounding(10)); // 1 N/m2 = 1e5 dyn / 1e4 cm2
    CHECK(factor("") == 1);
    CHECK(factor("ph") == 1);
    CHECK(factor("photon") == 1);
    CHECK(factor("count") == 1);
}

TEST_CASE("prefixes are case-sensitive powers of ten", "[base][units]") {
    const auto ratio = [](const std::string& a, const std::string& b) {
        return parse_unit(a).factor / parse_unit(b).factor;
    };
    CHECK(ratio("Mpc", "mpc") == to_rounding(1e9));
    CHECK(ratio("MHz", "mHz") == to_rounding(1e9));
    CHECK(ratio("PeV", "peV") == to_rounding(1e27));
    CHECK(ratio("dam", "dm") == to_rounding(100));
    CHECK(ratio("hm", "cm") == to_rounding(1e4));
    CHECK(parse_unit("G").dimension == dimension::magnetic_field);
    CHECK(parse_unit("g").dimension == Dimension{.mass = 1});
    CHECK(parse_unit("min").factor == 60);                          // not a milli-inch
    CHECK(parse_unit("Pa").dimension == dimension::energy_density); // not a peta-year
    for (const char* refused : {"KPC", "kpC", "ghz", "kerg", "mdeg", "Msr", "kbeam", "kkpc", "μG"}) {
        INFO(refused);
        CHECK_THROWS_AS(parse_unit(refused), Error);
    }
}

TEST_CASE("products, quotients and powers multiply out", "[base][units]") {
    const double expected = constants::gigaelectronvolt;
    for (const char* text : {"cm-3 GeV-1", "cm**-3.GeV**-1", "cm^-3*GeV^-1", "/cm3/GeV", "cm^(-3) / GeV",
                             "(cm3 GeV)-1", "GeV-1 / (cm2 cm)", "  cm-3\tGeV-1 "}) {
        INFO(text);
        const Unit unit = parse_unit(text);
        CHECK(unit.dimension == dimension::spectral_density);
        CHECK(unit.factor * expected == to_rounding(1));
    }
    CHECK(parse_unit("Jy/beam").dimension == dimension::flux_density / Dimension{.beam = 1});
    CHECK(parse_unit("sr").dimension == parse_unit("rad2").dimension);
    CHECK(parse_unit("MJy/sr").dimension == dimension::radio_intensity);
    CHECK(parse_unit("erg/s/cm2/Hz/sr").dimension == dimension::radio_intensity);
}

TEST_CASE("a unit that cannot be read names the place", "[base][units]") {
    CHECK_THAT(message_of([] { parse_unit("cm-3 Gev-1"); }), Contains("\"Gev-1\" at character 6"));
    CHECK_THAT(message_of([] { parse_unit("erg/"); }), Contains("the end"));
    CHECK_THAT(message_of([] { parse_unit("erg/s cm2"); }),
               Contains("after a division")); // s cm2 or s-1 cm2?
    CHECK_THAT(message_of([] { parse_unit("cm-3GeV-1"); }), Contains("between units"));
    CHECK_THAT(message_of([] { parse_unit("(cm s"); }), Contains("closing bracket"));
    for (const char* text : {".kpc", "*kpc", "kpc.", "cm^", "cm**", "cm^1.5", "cm+-2", "cm99999999999",
                             "cm^(2", "10 kpc", "10** kpc", "kpc kpc 2", "-", "kpc-"}) {
        INFO(text);
        CHECK_THROWS_AS(parse_unit(text), Error);
    }
}

TEST_CASE("quantities are read into CGS", "[base][units]") {
    CHECK(to_cgs("3 kpc", dimension::length) == 3 * constants::kiloparsec);
    CHECK(to_cgs(" +3kpc ", dimension::length) == 3 * constants::kiloparsec);
    CHECK(to_cgs("-15 deg", dimension::angle) == to_rounding(-constants::pi / 12));
    CHECK(to_cgs("1e28 cm2 s-1", dimension::length * dimension::speed) == 1e28);
    CHECK(to_cgs("6 uG", dimension::magnetic_field) == to_rounding(6e-6));
    CHECK(to_cgs("0.5 eV cm-3", dimension::energy_density) == to_rounding(0.5 * constants::electronvolt));
    CHECK(to_cgs("1 eV", dimension::energy) == constants::electronvolt); // not the exponent of 1e
    CHECK(to_cgs("2.5", dimension::none) == 2.5);
}

TEST_CASE("a quantity of the wrong kind is refused with an example", "[base][units]") {
    const auto refusal = [](const char* text, const Dimension& dimension) {
        return message_of([&] { to_cgs(text, dimension); });
    };
    CHECK_THAT(refusal("3", dimension::length),
               Contains("\"3\" without a unit") && Contains("a length such as \"3 kpc\""));
    CHECK_THAT(refusal("3 GHz", dimension::length), Contains("which is a frequency") && Contains("a length"));
    CHECK_THAT(refusal("3 kpC", dimension::length), Contains("\"kpC\" at character 2"));
    CHECK_THAT(refusal("1e300 Gpc", dimension::length), Contains("too large"));
    for (const char* text : {"", " ", "kpc", "nan kpc", "inf kpc", "1e999 kpc", "0x10 kpc", "3,5 kpc",
                             "--3 kpc", "+-3 kpc", "3 3 kpc", "3 kpc 4"}) {
        INFO(text);
        CHECK_THROWS_AS(to_cgs(text, dimension::length), Error);
    }
    CHECK_THROWS_AS(unit_factor("GHz", dimension::length), Error);
    CHECK(unit_factor("m-3 GeV-1", dimension::spectral_density) ==
          to_rounding(1e-6 / constants::gigaelectronvolt));
}

TEST_CASE("a written quantity reads back to the same double", "[base][units][round-trip]") {
    std::mt19937_64 random(20240611);
    std::uniform_real_distribution<double> logarithm(-60, 60);
    std::uniform_real_distribution<double> mantissa(-10, 10);
    for (const Dimension& dimension : spoken_dimensions()) {
        for (int i = 0; i < 2000; ++i) {
            const double value = mantissa(random) * std::pow(10.0, logarithm(random));
            const std::string text = format_quantity(value, dimension);
            INFO(text << " from seed 20240611");
            REQUIRE(to_cgs(text, dimension) == value);
        }
        CHECK(to_cgs(format_quantity(0, dimension), dimension) == 0);
    }
}

TEST_CASE("a quantity is written as short as it was typed", "[base][units][round-trip]") {
    const auto again = [](const char* text, const Dimension& dimension) {
        return format_quantity(to_cgs(text, dimension), dimension);
    };
    CHECK(again("3 kpc", dimension::length) == "3 kpc");
    CHECK(again("10 Mpc", dimension::length) == "10 Mpc");
    CHECK(again("144 MHz", dimension::frequency) == "144 MHz");
    CHECK(again("12 arcsec", dimension::angle) == "12 arcsec");
    CHECK(again("88 deg", dimension::angle) == "88 deg");
    CHECK(again("1.5e-11 cm-3 GeV-1", dimension::spectral_density) == "1.5e-11 cm-3 GeV-1");
    CHECK(again("0 kpc", dimension::length) == "0 kpc");
    CHECK(again("10 GV", {.length = 1, .field = 1}) == "10 GV");
    CHECK(again("0.02 yr-1", dimension::frequency) == "0.02 yr-1");
    CHECK(format_quantity(0.1, dimension::none) == "0.1");
    CHECK_THROWS_AS(format_quantity(1, Dimension{.mass = 7}), Error);
}

TEST_CASE("a dimension is spoken of with an example that it can read", "[base][units]") {
    for (const Dimension& dimension : spoken_dimensions()) {
        const auto text = describe(dimension);
        INFO(text.name);
        CHECK_NOTHROW(to_cgs(text.example, dimension));
    }
    CHECK(describe(dimension::length).name == "a length");
    CHECK(describe(dimension::none).name == "a number");
}

TEST_CASE("random text makes no unit reader fail otherwise than by Error", "[base][units][fuzz]") {
    std::mt19937 random(7);
    const std::string alphabet = "kpcMGeVHzJyuGTsr0123456789+-*/^.() e\t";
    std::size_t refused = 0;
    for (int i = 0; i < 200000; ++i) {
        std::string text(random() % 14, ' ');
        for (char& c : text) {
            c = i % 4 == 0 ? static_cast<char>(random() % 256) : alphabet[random() % alphabet.size()];
        }
        try {
            const Unit unit = parse_unit(text);
            CHECK(unit.factor > 0);
        } catch (const Error&) {
            ++refused;
        }
        try {
            const double value = to_cgs(text, dimension::length);
            CHECK(std::isfinite(value));
        } catch (const Error&) {
            ++refused;
        }
    }
    CHECK(refused > 0);
}

namespace {

struct CommaPoint : std::numpunct<char> {
    char do_decimal_point() const override { return ','; }
    char do_thousands_sep() const override { return '.'; }
    std::string do_grouping() const override { return "\3"; }
};

} // namespace

TEST_CASE("a locale with decimal commas changes neither reading nor writing", "[base][units][locale]") {
    const std::locale before = std::locale::global(std::locale(std::locale::classic(), new CommaPoint));
    std::setlocale(LC_NUMERIC, "de_DE.UTF-8"); // where it is installed
    const double read = to_cgs("4.85 GHz", dimension::frequency);
    const std::string written = format_quantity(1234.5 * constants::gigaelectronvolt, dimension::energy);
    std::setlocale(LC_NUMERIC, "C");
    std::locale::global(before);
    CHECK(read == 4.85e9);
    CHECK(written == "1234.5 GeV");
}

TEST_CASE("print the table of units for another reader", "[.][print-units]") {
    for (std::size_t start = 0; start < shared_units.size(); start = shared_units.find('|', start) + 1) {
        const std::string_view text = shared_units.substr(start, shared_units.find('|', start) - start);
        const Unit unit = parse_unit(text);
        const Dimension& d = unit.dimension;
        fmt::print("unit|{}|{}|{} {} {} {} {} {} {} {}\n", text, unit.factor, d.length, d.mass, d.time,
                   d.temperature, d.field, d.angle, d.beam, d.pixel);
    }
}
