#include "refusal.hpp"

#include "aureole/base/constants.hpp"

#include <catch2/catch.hpp>

#include <string>
#include <vector>

using namespace aureole;
using namespace aureole::scenario;
using Catch::Matchers::Contains;

namespace {

Scenario read(std::string_view text, const std::vector<std::string>& overrides = {}) {
    return parse(text, "halo.toml", overrides);
}

constexpr double gigavolt = 1e17 / constants::speed_of_light; // statvolt

} // namespace

TEST_CASE("a transport table makes the solver the source of spectra that are not said",
          "[scenario][transport]") {
    const Scenario both = read("[transport]\nheadroom = 10");
    CHECK(both.text("electrons.source") == "transport");
    CHECK(both.text("protons.source") == "transport");
    CHECK_FALSE(both.is_set("electrons.source"));
    const Scenario one = read("[transport]\nheadroom = 10\n[electrons]\nsource = \"closed_form\"");
    CHECK(one.text("electrons.source") == "closed_form");
    CHECK(one.text("protons.source") == "transport");
    CHECK(one.texts("transport.species") == std::vector<std::string>{"protons"});
    const Scenario listed = read("transport.species = [\"electrons\"]");
    CHECK(listed.text("electrons.source") == "transport");
    CHECK(listed.text("protons.source") == "closed_form");
    CHECK(read("").text("electrons.source") == "closed_form");
    CHECK_FALSE(read("[law.a]\nkind = \"constant\"").has_transport());
}

TEST_CASE("spectra asked of the solver and of something else are refused", "[scenario][transport]") {
    const std::string source = "[transport.protons.source.remnants]\npower = \"1e41 erg s-1\"\n";
    CHECK(refusal(source) == "accepted");
    CHECK_THAT(refusal("protons.source = \"closed_form\"\n" + source),
               Contains("halo.toml:1:9: protons.source: found \"closed_form\" beside [transport.protons]"));
    CHECK_THAT(refusal("protons.source = \"file\"\ninput.grid = \"a.fits\"\n" + source),
               Contains("protons.source: found \"file\" beside [transport.protons]"));
    CHECK_THAT(refusal("protons.source = \"none\"\ntransport.species = [\"protons\"]"),
               Contains("protons.source: found \"none\" beside transport.species"));
    CHECK_THAT(refusal("protons.source = \"transport\"\ntransport.species = [\"electrons\"]"),
               Contains("transport.species: found no protons"));
    CHECK_THAT(refusal("transport.species = [\"electrons\"]\n" + source),
               Contains("protons.source: found \"closed_form\" beside [transport.protons]"));
}

TEST_CASE("laws and sources are read with the units of their keys", "[scenario][transport]") {
    const Scenario scenario = read("[transport.electrons.source.arms]\nleast_rigidity = \"10 MV\"\n"
                                   "[law.a]\nkind = \"rigidity_power\"\nrate = \"3e-9 s-1\"\n"
                                   "break_rigidity = [\"4 GV\", \"300 GV\"]\nbreak_slope = [0.6, 0.3]\n"
                                   "[law.a.factor.up]\nkind = \"falling\"\nlength = \"3 kpc\"",
                                   {"law.a.break_width=0.2, 0.1", "law.b.kind=constant"});
    CHECK(scenario.quantity("transport.electrons.source.arms.least_rigidity") ==
          Approx(0.01 * gigavolt).epsilon(1e-14));
    CHECK(scenario.number("transport.electrons.source.arms.slope") == 2.3);
    CHECK(scenario.quantity("law.a.rate") == Approx(3e-9).epsilon(1e-14));
    CHECK(scenario.quantities("law.a.break_slope") == std::vector<double>{0.6, 0.3}); // need not rise
    CHECK(scenario.quantities("law.a.break_width") == std::vector<double>{0.2, 0.1});
    CHECK(scenario.text("law.a.anchor") == "absolute");
    CHECK(scenario.quantity("law.a.factor.up.length") == 3 * constants::kiloparsec);
    CHECK_FALSE(scenario.has("law.a.slope")); // the catalogue has the default
    CHECK(scenario.names("law") == std::vector<std::string>{"a", "b"});
}

TEST_CASE("what is wrong with a law or a source is said with its place", "[scenario][transport]") {
    const std::vector<std::pair<std::string, std::string>> cases{
        {"[law.a]\nkind = \"rigidity_powr\"",
         "law.a.kind: found \"rigidity_powr\", expected one of constant,"},
        {"[law.a]\nslope = 0.5", "halo.toml:2:1: law.a.kind: missing, expected one of constant"},
        {"[law.a]\nkind = \"constant\"\nslop = 0.5", "law.a.slop: unknown key; the nearest is law.a.slope"},
        {"[law.a]\nkind = \"constant\"\nrate = 1e-9", "law.a.rate: found 1.0"},
        {"[law.a]\nkind = \"constant\"\nrate = \"0 s-1\"", "expected more than 0"},
        {"[law.a]\nkind = \"constant\"\nanchor_rigidity = \"1 GeV\"", "a rigidity such as \"10 GV\""},
        {"[law.a]\nkind = \"constant\"\n[law.a.factor.up]", "law.a.factor.up: found an empty table"},
        {"[law.a]\nkind = \"constant\"\n[law.a.factor.up]\nlength = \"1 kpc\"",
         "law.a.factor.up.kind: missing, expected one of rigidity_power, falling"},
        {"[law.a]", "law.a: found an empty table"},
        {"[transport]", "transport: found an empty table"},
        {"[transport.protons.source.a]", "transport.protons.source.a: found an empty table"},
        {"[transport.protons.source.a]\nelectron_share = 0.01", "unknown key"},
        {"[transport]\nperpendicular = 2", "at most 1"},
        {"[transport]\nperpendicular = 0", "expected more than 0"},
    };
    for (const auto& [text, part] : cases) {
        INFO(text);
        CHECK_THAT(refusal(text), Contains(part));
    }
}

TEST_CASE("the effective scenario of a solved one reads back to the same values",
          "[scenario][transport][round-trip]") {
    for (const char* text :
         {"[transport.protons.source.a]\npower = \"1e41 erg s-1\"\n[law.a]\nkind = \"constant\"\n"
          "[law.a.factor.up]\nkind = \"falling\"\n[transport.wind]\nkind = \"linear\"",
          "[transport]\nheadroom = 5\n[electrons]\nsource = \"none\"",
          "[law.a]\nkind = \"self_confinement\"\ndamping = [\"turbulent\"]\nion_neutral_coefficient = "
          "\"1e-8 cm3 s-1\"\nanchor = \"grammage\"\nanchor_grammage = \"8 g cm-2\"",
          "transport.species = []",
          "[transport.electrons.source.a]\nstar_formation_rate = \"2 solMass yr-1\""}) {
        INFO(text);
        const Scenario first = read(text);
        const Scenario second = parse(effective_toml(first), "elsewhere.toml", {});
        REQUIRE(first.entries().size() == second.entries().size());
        for (const auto& [path, entry] : first.entries()) {
            INFO(path);
            REQUIRE(second.has(path));
            CHECK(second.entries().find(path)->second.value == entry.value);
        }
    }
}
