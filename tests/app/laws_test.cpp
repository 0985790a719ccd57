#include "aureole/app/laws.hpp"
#include "aureole/base/error.hpp"
#include "aureole/scenario/starter.hpp"
#include "aureole/transport/read_scenario.hpp"

#include <catch2/catch.hpp>

#include <algorithm>
#include <cmath>
#include <filesystem>
#include <fstream>
#include <sstream>
#include <string>
#include <unistd.h>

using namespace aureole;
using namespace aureole::transport;
using Catch::Matchers::Contains;

TEST_CASE("the example of every law can be solved as it stands", "[app][laws]") {
    const auto folder = std::filesystem::temp_directory_path() / ("aureole_laws_" + std::to_string(getpid()));
    std::filesystem::create_directory(folder);
    std::ofstream(folder / "rates.ecsv") << "R [kpc],z [kpc],rigidity [GV],rate [s-1]\n8,0,1,1e-9\n";
    for (const LawEntry& law : law_catalogue()) {
        const std::string example = app::law_example(law);
        INFO(example);
        const auto scenario = scenario::parse(
            "[transport.protons.source.a]\npower = \"1e41 erg s-1\"\n" + example, folder / "halo.toml", {});
        const TransportSpec spec = read_transport(scenario);
        REQUIRE(spec.laws.size() == 1);
        CHECK(spec.laws[0].law.name == law.name);
        const Law checked = checked_law(spec.laws[0].law);
        CHECK(checked.entry == &law);
    }
    std::filesystem::remove_all(folder);
}

TEST_CASE("examples give the rates that the formulas of their laws say", "[app][laws]") {
    const auto rate = [](std::string_view name, double rigidity_in_gv) {
        const auto scenario = scenario::parse("[transport.protons.source.a]\npower = \"1e41 erg s-1\"\n" +
                                                  app::law_example(find_law(name)),
                                              "halo.toml", {});
        const Place place{.radius = empirical_radius(),
                          .height = 6e3 * 3.0856775814913673e18,
                          .field = {},
                          .ordered_field = {},
                          .ion_density = {},
                          .neutral_density = {},
                          .temperature = {},
                          .alfven_speed = {},
                          .turbulent_speed = {},
                          .turbulent_scale = {}};
        return rate_at(checked_law(read_transport(scenario).laws[0].law), place,
                       reference_particle(rigidity_in_gv * empirical_rigidity()));
    };
    CHECK(rate("constant", 5) == Approx(1e-9).epsilon(1e-12));
    // 6 kpc above the plane, two lengths of 3 kpc; 4 GV to the power -0.5
    CHECK(rate("falling", 4) == Approx(1e-9 * std::exp(-2) / 2).epsilon(1e-12));
    // r = 10 kpc from the centre
    CHECK(rate("formula", 4) == Approx(1e-9 / 2 / 2).epsilon(1e-12));
    // exp(-6/2) of 1e-9 s-1 is above 1e-11 s-1
    CHECK(rate("maximum", 1) == Approx(1e-9 * std::exp(-3)).epsilon(1e-12));
}

TEST_CASE("the laws of the starter agree near R = 8 kpc at 1 GV and differ elsewhere", "[app][laws]") {
    const auto starters = scenario::starters();
    const auto starter = std::find_if(starters.begin(), starters.end(),
                                      [](const auto& s) { return s.name == "scattering_laws"; });
    REQUIRE(starter != starters.end());
    const TransportSpec spec = read_transport(scenario::parse(starter->text, "laws.toml", {}));
    REQUIRE(spec.laws.size() == 3);
    Place home;
    home.radius = empirical_radius();
    Place high = home;
    high.height = 9 * 3.0856775814913673e21;
    std::vector<double> above;
    for (const NamedLaw& law : spec.laws) {
        INFO(law.name);
        REQUIRE(law.anchor.kind == AnchorSpec::Kind::rate);
        const Particle particle = reference_particle(law.anchor.rigidity);
        const Anchored scaled = anchored(checked_law(law.law), home, particle, law.anchor.value);
        CHECK(rate_at(scaled.law, home, particle) == Approx(1e-9).epsilon(1e-12));
        above.push_back(rate_at(scaled.law, high, reference_particle(1e3 * law.anchor.rigidity)));
    }
    CHECK(above[0] > 10 * above[1]);
    CHECK(above[1] > 10 * above[2]);
    CHECK(spec.secondaries);
    CHECK(spec.electron_sources[0].power < 0.2 * spec.proton_sources[0].power);
}

TEST_CASE("the text of a law names all of its parameters with their defaults", "[app][laws]") {
    for (const LawEntry& law : law_catalogue()) {
        const std::string text = app::law_text(law);
        INFO(text);
        if (law.name != "table") {
            for (const LawParameter& parameter : law.parameters) {
                CHECK_THAT(text, Contains("\n  " + std::string(parameter.name) + "  "));
            }
        }
        CHECK_THAT(text, Contains("Example:\n[law."));
    }
    const std::string text = app::law_text(find_law("rigidity_power"));
    CHECK_THAT(text, Contains("  rate  s-1; above 0, at most 1000 s-1; 1e-09 s-1\n"));
    CHECK_THAT(text, Contains("  reference_rigidity  GV; above 0; 1 GV\n"));
    CHECK_THAT(app::law_text(find_law("formula")), Contains("dP_res") && Contains("\nVariables:\n"));
    CHECK_THAT(app::law_list(), Contains("patchy"));
    CHECK_THROWS_AS(app::laws("pachy"), Error);
}

TEST_CASE("docs/laws.md is the page of the catalogue", "[app][laws][docs]") {
    std::ifstream file(std::string(AUREOLE_SOURCE_DIR) + "/docs/laws.md", std::ios::binary);
    REQUIRE(file);
    std::ostringstream text;
    text << file.rdbuf();
    CHECK(text.str() == app::laws_page()); // test_app "[write-laws]" writes it anew
    CHECK_THAT(text.str(), Contains("## self_confinement"));
}

TEST_CASE("write the page of laws", "[.][write-laws]") {
    std::ofstream(std::string(AUREOLE_SOURCE_DIR) + "/docs/laws.md", std::ios::binary) << app::laws_page();
}
