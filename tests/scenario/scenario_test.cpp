#include "refusal.hpp"

#include "aureole/base/constants.hpp"
#include "aureole/scenario/scenario.hpp"

#include <catch2/catch.hpp>

#include <clocale>
#include <filesystem>
#include <fstream>
#include <locale>
#include <string>
#include <vector>

using namespace aureole;
using namespace aureole::scenario;
using Catch::Matchers::Contains;

namespace {

Scenario read(std::string_view text, const std::vector<std::string>& overrides = {}) {
    return parse(text, "halo.toml", overrides);
}

constexpr double kpc = constants::kiloparsec;

struct CommaPoint : std::numpunct<char> {
    char do_decimal_point() const override { return ','; }
    char do_thousands_sep() const override { return '.'; }
    std::string do_grouping() const override { return "\3"; }
};

constexpr std::string_view example = R"toml(
[run]
title = "a \"quoted\" title, ünicode \\ and\ttab"
[grid]
radius = "12.5 kpc"
cells_r = 50
mirror = false
[radiation.component.dust]
temperature = "35 K"
value = "0.7 eV cm-3"
profile = "formula"
formula = "exp(-R/5 - abs(z)/2)"
[radio]
frequencies = ["144 MHz", "1.4 GHz"]
beam_major = "6 arcsec"
[heights]
rms = ["10 uJy/beam", "5 uJy/beam"]
models = ["gaussian"]
)toml";

} // namespace

TEST_CASE("values arrive in CGS, with defaults where nothing is said", "[scenario]") {
    const Scenario scenario = read(example);
    CHECK(scenario.quantity("grid.radius") == 12.5 * kpc);
    CHECK(scenario.integer("grid.cells_r") == 50);
    CHECK(!scenario.boolean("grid.mirror"));
    CHECK(scenario.text("run.title") == "a \"quoted\" title, ünicode \\ and\ttab");
    CHECK(scenario.quantities("radio.frequencies") == std::vector<double>{144e6, 1.4e9});
    CHECK(scenario.texts("heights.models") == std::vector<std::string>{"gaussian"});
    CHECK(scenario.number("emission.nuclear_enhancement") == 1.8);
    CHECK(scenario.quantity("view.distance") == Approx(1e4 * kpc).epsilon(1e-15));
    CHECK(scenario.is_set("grid.radius"));
    CHECK(!scenario.is_set("view.distance"));
    CHECK(scenario.has("view.distance"));
    CHECK(!scenario.has("grid.nothing"));
    CHECK(scenario.path("input.grid").empty());
    CHECK(scenario.entries().find("grid.radius")->second.line == 5);
    CHECK_THROWS_AS(scenario.quantity("grid.nothing"), Error);
}

TEST_CASE("a profile and the names a user chose are gathered", "[scenario]") {
    const Scenario scenario = read(
        example, {"radiation.component.a-1.temperature=4000 K", "radiation.component.a-1.value=1 eV cm-3"});
    CHECK(scenario.names("radiation.component") == std::vector<std::string>{"a-1", "dust"});
    const ProfileSpec dust = scenario.profile("radiation.component.dust");
    CHECK(dust.kind == ProfileKind::formula);
    CHECK(dust.value == 0.7 * constants::electronvolt);
    CHECK(dust.formula == "exp(-R/5 - abs(z)/2)");
    CHECK(dust.key == "radiation.component.dust");
    CHECK(scenario.profile("radiation.component.a-1").kind == ProfileKind::constant);
    const std::pair<const char*, ProfileKind> kinds[] = {
        {"none", ProfileKind::none},
        {"constant", ProfileKind::constant},
        {"double_exponential", ProfileKind::double_exponential},
        {"sech2", ProfileKind::sech2},
        {"gaussian", ProfileKind::gaussian},
        {"beta", ProfileKind::beta},
        {"power_law", ProfileKind::power_law}};
    for (const auto& [name, kind] : kinds) {
        const Scenario one =
            read("", {"gas.hi.value=1 cm-3", std::string("gas.hi.profile=") + name, "gas.hi.height=0.3 kpc"});
        CHECK(one.profile("gas.hi").kind == kind);
        CHECK(one.profile("gas.hi").height == 0.3 * kpc);
    }
}

TEST_CASE("a slip in the TOML is told with line and column", "[scenario][bad-input]") {
    CHECK_THAT(refusal("[grid]\nradius = 3 kpc\n"), Contains("halo.toml:2:12:"));
    CHECK_THAT(refusal("[grid\n"), Contains("halo.toml:1:"));
    CHECK_THAT(refusal("[grid]\ncells_r = 3\ncells_r = 4\n"),
               Contains("halo.toml:3:") && Contains("cells_r"));
    CHECK_THAT(refusal("[grid]\n[grid]\n"), Contains("halo.toml:2:"));
    CHECK_THAT(refusal("a = \"\xff\"\n"), Contains("halo.toml:1:"));
}

TEST_CASE("an unknown key is refused with its line and the nearest name", "[scenario][bad-input]") {
    CHECK_THAT(refusal("[view]\n\n  inclinaton = \"80 deg\"\n"),
               Contains("halo.toml:3:3: view.inclinaton: unknown key; the nearest is view.inclination"));
    CHECK_THAT(refusal("[gass]\n"), Contains("halo.toml:1:2: gass: unknown table; the nearest is gas"));
    CHECK_THAT(refusal("[gas.hi]\nvalu = \"1 cm-3\"\n"),
               Contains("gas.hi.valu: unknown key; the nearest is gas.hi.value"));
    CHECK_THAT(refusal("x.y.z = 1\n"), Contains("x.y.z") || Contains("halo.toml:1:1: x: unknown"));
    CHECK_THAT(refusal("gas = 3\n"), Contains("halo.toml:1:1: gas: found 3, expected a table"));
    CHECK_THAT(refusal("[[gas.hi]]\n"), Contains("expected a table"));
    CHECK_THAT(refusal("\"gas.hi\" = { profile = \"none\" }\n"), Contains("expected letters"));
    CHECK_THAT(refusal("[radiation.component.\"a b\"]\ntemperature = \"3 K\"\n"),
               Contains("\"a b\"") && Contains("halo.toml:1:"));
}

TEST_CASE("a value of the wrong kind is told with what was expected", "[scenario][bad-input]") {
    const std::pair<const char*, const char*> cases[] = {
        {"grid.radius = 3",
         "halo.toml:1:6: grid.radius: found 3 (integer), expected a length such as \"3 kpc\""},
        {"grid.radius = 3.5", "found 3.5 (floating-point), expected a length"},
        {"grid.radius = \"3\"", "found \"3\" without a unit, expected a length"},
        {"grid.radius = \"3 GHz\"", "which is a frequency, expected a length"},
        {"grid.radius = \"3 kpC\"", "\"kpC\" at character"},
        {"grid.radius = true", "expected a length"},
        {"grid.radius = [\"3 kpc\"]", "expected a length"},
        {"[grid.radius]\nx = 1", "halo.toml:1:7: grid.radius: found a table, expected a length"},
        {"grid.cells_r = 3.0", "expected a whole number"},
        {"grid.cells_r = \"3\"", "expected a whole number"},
        {"grid.cells_r = 99999999999999999",
         "found 99999999999999999, expected at least 1 and at most 100000"},
        {"grid.mirror = 1", "expected true or false"},
        {"grid.geometry = \"rz\"", "found \"rz\", expected one of RZ, XYZ"},
        {"grid.geometry = 1", "expected one of RZ, XYZ"},
        {"electrons.slope = \"2.7\"", "found \"2.7\" (string), expected a number"},
        {"electrons.slope = nan", "expected a finite number"},
        {"electrons.slope = 9007199254740993", "expected at least -10 and at most 20"},
        {"run.title = 1979-05-27", "expected a text"},
        {"radio.frequencies = [\"1 GHz\", 2]", "found 2 (integer), expected a frequency"},
        {"radio.frequencies = [\"2 GHz\", \"1 GHz\"]", "found 1 GHz after 2 GHz, expected rising values"},
        {"radio.frequencies = [\"1 GHz\", \"1 GHz\"]", "expected rising values"},
        {"heights.models = [\"box\"]", "found \"box\", expected one of exponential"},
    };
    for (const auto& [text, part] : cases) {
        INFO(text);
        CHECK_THAT(refusal(text), Contains(part));
    }
}

TEST_CASE("a value out of its range is told with the range", "[scenario][bad-input]") {
    CHECK_THAT(refusal("view.inclination = \"300 deg\""),
               Contains("found \"300 deg\", expected at least 0 deg and at most 180 deg"));
    CHECK_THAT(refusal("view.distance = \"0 Mpc\""), Contains("found \"0 Mpc\", expected more than 0"));
    CHECK_THAT(refusal("gas.hi.value = \"-1 cm-3\""), Contains("expected at least 0 cm-3"));
    CHECK(refusal("view.inclination = \"180 deg\"") == "accepted"); // the bounds belong to the range
    CHECK(refusal("view.inclination = \"0 deg\"") == "accepted");
}

TEST_CASE("a range of quantities is laid out as it says", "[scenario]") {
    const Scenario scenario =
        read("radio.frequencies = { from = \"1 GHz\", to = \"100 GHz\", n = 3 }\nradio.unit = \"K\"\n"
             "gamma.energies = { from = \"1 GeV\", to = \"3 GeV\", n = 3, spacing = \"linear\" }");
    const auto frequencies = scenario.quantities("radio.frequencies");
    REQUIRE(frequencies.size() == 3);
    CHECK(frequencies[1] == Approx(1e10).epsilon(1e-14));
    CHECK(frequencies[2] == 1e11);
    CHECK(scenario.quantities("gamma.energies")[1] == Approx(2 * constants::gigaelectronvolt).epsilon(1e-15));
    for (const char* range : {"{ from = \"1 GHz\", n = 3 }", "{ from = \"1 GHz\", to = \"2 GHz\", n = 1 }",
                              "{ from = \"1 GHz\", to = \"2 GHz\", n = 3, spacing = 4 }",
                              "{ from = \"2 GHz\", to = \"1 GHz\", n = 3 }",
                              "{ from = \"1 GHz\", to = \"2 GHz\", n = 3, step = 4 }", "{}"}) {
        INFO(range);
        CHECK(refusal(std::string("radio.unit = \"K\"\nradio.frequencies = ") + range) != "accepted");
    }
}

TEST_CASE("a formula is refused where it stands", "[scenario][bad-input]") {
    const std::string head = "[gas.hi]\nprofile = \"formula\"\nvalue = \"1 cm-3\"\n";
    CHECK_THAT(refusal(head + "formula = \"exp(-height)\""), Contains("halo.toml:4:1: gas.hi.formula") &&
                                                                 Contains("\"height\"") &&
                                                                 Contains("R, z, x, y, r"));
    CHECK_THAT(refusal(head + "formula = \"z=5\""), Contains("assignment"));
    CHECK_THAT(refusal(head + "formula = inf"), Contains("gas.hi.formula"));
    CHECK_THAT(refusal(head),
               Contains("halo.toml:2:1: gas.hi.profile: found \"formula\" without gas.hi.formula"));
    CHECK(refusal(head + "formula = 0.5") == "accepted");
}

TEST_CASE("keys that need one another are checked together", "[scenario][bad-input]") {
    const std::pair<const char*, const char*> cases[] = {
        {"[radio]\nfrequencies = [\"1 GHz\"]", "radio.unit: found \"Jy/beam\" without a beam"},
        {"radio.beam_minor = \"6 arcsec\"", "halo.toml:1:7: radio.beam_minor"},
        {"gamma.band_edges = [\"1 GeV\"]", "found one edge"},
        {"gamma.band_edges = [\"1 GeV\", \"2 GeV\"]\ngamma.energies = [\"1 GeV\"]",
         "expected one of the two"},
        {"[gas.hi]\nvalue = \"1 cm-3\"", "halo.toml:2:1: gas.hi.value: found a value without gas.hi.profile"},
        {"[gas.hi]\nprofile = \"sech2\"",
         "halo.toml:2:1: gas.hi.profile: found \"sech2\" without gas.hi.value"},
        {"[gas.hi]\nprofile = \"file\"", "without input.grid"},
        {"electrons.source = \"file\"", "without input.grid"},
        {"electrons.source = \"energy_density\"", "without electrons.energy_density.profile"},
        {"electrons.space.profile = \"file\"", "found \"file\", expected one of none, constant"},
        {"electrons.energy_from = \"200 TeV\"",
         "halo.toml:1:11: electrons.energy_from: found energies from 200 TeV to 100 TeV"},
        {"heights.from = \"3 kpc\"\nheights.to = \"2 kpc\"", "heights.to: found no more than heights.from"},
        {"heights.rms = [\"1 Jy/beam\", \"2 Jy/beam\"]", "found 2 values for 0 radio frequencies"},
        {"heights.rms = [\"1 GHz\"]", "expected a brightness"},
        {"[radiation.component.dust]", "halo.toml:1:22: radiation.component.dust: found an empty table"},
        {"[radiation.component.dust]\nvalue = \"1 eV cm-3\"",
         "dust.temperature: missing, expected a temperature"},
        {"[radiation.component.dust]\ntemperature = \"30 K\"",
         "dust.value: missing, expected an energy density"},
        {"[radiation.component.cmb]\ntemperature = \"3 K\"\nvalue = \"1 eV cm-3\"", "a meaning of its own"},
    };
    for (const auto& [text, part] : cases) {
        INFO(text);
        CHECK_THAT(refusal(text), Contains(part));
    }
    // The file may supply what the scenario leaves out.
    CHECK(refusal("input.grid = \"a.fits\"\nelectrons.source = \"file\"\ngas.hi.profile = \"file\"") ==
          "accepted");
}

TEST_CASE("all problems are told at once, as they stand in the file", "[scenario][bad-input]") {
    const std::string message =
        refusal("[view]\nincl = 3\ndistance = 5\n[gas.hi]\nvalue = \"3 kpc\"\n[grid]\nradius = 1\n",
                {"map.pixel=5", "no.key=1"});
    const std::vector<const char*> expected{
        "halo.toml:2:1:", "halo.toml:3:1:",   "halo.toml:5:1:",
        "halo.toml:7:1:", "--set map.pixel:", "--set no.key: unknown key"};
    std::size_t place = 0;
    for (const char* part : expected) {
        INFO(part << " in\n" << message);
        const auto found = message.find(part, place);
        REQUIRE(found != std::string::npos);
        place = found;
    }
    CHECK(std::count(message.begin(), message.end(), '\n') == 5); // and nothing that only follows from these
}

TEST_CASE("overrides may leave out quotes and brackets", "[scenario][overrides]") {
    const Scenario scenario =
        read(example,
             {"grid.radius=20 kpc", "view.inclination = \"85 deg\"", "grid.cells_r=10", "grid.mirror=true",
              "radio.frequencies=150 MHz, 1.4 GHz,5 GHz", "gamma.energies=[\"1 GeV\"]", "run.title=x = y",
              "run.object='NGC \"0\"'", "heights.rms=10 uJy/beam", "radiation.component.dust.formula=exp(-r)",
              "electrons.slope=2.5", "protons.source=none"});
    CHECK(scenario.quantity("grid.radius") == 20 * kpc);
    CHECK(scenario.quantity("view.inclination") == Approx(85 * constants::degree).epsilon(1e-15));
    CHECK(scenario.integer("grid.cells_r") == 10);
    CHECK(scenario.boolean("grid.mirror"));
    CHECK(scenario.quantities("radio.frequencies") == std::vector<double>{150e6, 1.4e9, 5e9});
    CHECK(scenario.quantities("gamma.energies").size() == 1);
    CHECK(scenario.text("run.title") == "x = y");
    CHECK(scenario.text("run.object") == "NGC \"0\"");
    CHECK(scenario.texts("heights.rms") == std::vector<std::string>{"10 uJy/beam"});
    CHECK(scenario.profile("radiation.component.dust").formula == "exp(-r)");
    CHECK(scenario.number("electrons.slope") == 2.5);
    CHECK(scenario.text("protons.source") == "none");
    CHECK(scenario.is_set("view.inclination"));
}

TEST_CASE("a bad override is refused by its key", "[scenario][overrides][bad-input]") {
    const std::pair<std::string, const char*> cases[] = {
        {"view.distnce=5 kpc", "--set view.distnce: unknown key; the nearest is view.distance"},
        {"view.distance", "found \"view.distance\", expected KEY=VALUE"},
        {"=5", "expected KEY=VALUE"},
        {"", "expected KEY=VALUE"},
        {"view.distance=5", "--set view.distance: found \"5\" without a unit, expected a length"},
        {"view.distance=", "expected a length"},
        {"view.distance=\"5 kpc", "a text between quotes"},
        {"grid.cells_r=many", "expected a whole number"},
        {"grid.cells_r=5\ngrid.cells_z=5", "expected a whole number"},
        {"grid.mirror=yes", "expected true or false"},
        {"gas=5", "--set gas: unknown key"},
        {"radiation.component.a b.value=1 eV cm-3", "unknown key"},
        {"run.title=\xff\xfe", "UTF-8"},
    };
    for (const auto& [text, part] : cases) {
        INFO(text);
        CHECK_THAT(refusal("", {text}), Contains(part));
    }
}

TEST_CASE("the effective scenario reads back to the same values", "[scenario][round-trip]") {
    const Scenario first = read(example, {"electrons.slope=2", "map.tolerance=0.00037"});
    const std::string text = effective_toml(first);
    const Scenario second = read(text);
    for (const auto& [path, entry] : first.entries()) {
        INFO(path);
        REQUIRE(second.has(path));
        CHECK(second.entries().find(path)->second.value == entry.value);
    }
    CHECK(first.entries().size() == second.entries().size());
    CHECK(effective_toml(second) == text);
    CHECK_THAT(text, Contains("[grid]\n") && Contains("radius = \"12.5 kpc\"\n") &&
                         Contains("frequencies = [\"144 MHz\", \"1.4 GHz\"]\n") && Contains("slope = 2.0\n"));
}

TEST_CASE("a default that gives way to the grid file does so again in the effective scenario",
          "[scenario][round-trip]") {
    const Scenario first = read("input.grid = \"a.fits\"\ngas.hi.profile = \"none\"");
    const Scenario second = read(effective_toml(first));
    CHECK(!second.is_set("gas.h2.profile"));
    CHECK(!second.is_set("electrons.source"));
    CHECK(second.is_set("gas.hi.profile"));
    CHECK(second.is_set("electrons.slope"));
}

TEST_CASE("paths belong to the folder of the scenario", "[scenario]") {
    const Scenario scenario = parse("input.grid = \"../data/halo[1].fits\"", "/some/where/halo.toml", {});
    CHECK(scenario.path("input.grid") == "/some/data/halo[1].fits");
    const Scenario moved = parse(effective_toml(scenario), "/else/where/scenario.toml", {});
    CHECK(moved.path("input.grid") == "/some/data/halo[1].fits");
    CHECK(parse("input.grid = \"/abs.fits\"", "x/halo.toml", {}).path("input.grid") == "/abs.fits");
}

TEST_CASE("a scenario file is read, and a missing one refused as input", "[scenario]") {
    const auto folder = std::filesystem::temp_directory_path() / "aureole_scenario_test";
    std::filesystem::create_directories(folder);
    std::ofstream(folder / "one.toml") << "grid.cells_r = 7\n";
    CHECK(load(folder / "one.toml", {}).integer("grid.cells_r") == 7);
    for (const auto& file : {folder / "missing.toml", folder}) {
        try {
            load(file, {});
            FAIL("accepted");
        } catch (const Error& error) {
            CHECK(error.kind() == ErrorKind::input);
            CHECK_THAT(error.what(), Contains(file.string()));
        }
    }
    std::filesystem::remove_all(folder);
}

TEST_CASE("a locale with decimal commas changes neither reading nor the effective scenario",
          "[scenario][locale]") {
    const std::string expected = effective_toml(read(example, {"electrons.slope=2.25"}));
    const std::locale before = std::locale::global(std::locale(std::locale::classic(), new CommaPoint));
    std::setlocale(LC_NUMERIC, "de_DE.UTF-8"); // where it is installed
    const std::string found = effective_toml(read(example, {"electrons.slope=2.25"}));
    const std::string message = refusal("grid.radius = 12345.5\ngrid.cells_r = 1234567\n");
    std::setlocale(LC_NUMERIC, "C");
    std::locale::global(before);
    CHECK(found == expected);
    CHECK_THAT(message, Contains("12345.5") && Contains("1234567,"));
}
