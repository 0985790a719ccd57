#include "aureole/scenario/scenario.hpp"
#include "aureole/scenario/starter.hpp"

#include <catch2/catch.hpp>

#include <set>
#include <string>

using namespace aureole;
using namespace aureole::scenario;
using Catch::Matchers::Contains;

TEST_CASE("every starter is a complete scenario without files", "[scenario][starters]") {
    std::set<std::string_view> names;
    for (const Starter& starter : starters()) {
        INFO(starter.name);
        CHECK(names.insert(starter.name).second);
        CHECK(!starter.line.empty());
        CHECK_THAT(std::string(starter.text),
                   Contains("# An invented") && Contains("aureole predict " + std::string(starter.name)));
        const Scenario scenario = parse(starter.text, "starter.toml", {});
        CHECK(scenario.path("input.grid").empty());
        CHECK(!scenario.quantities("radio.frequencies").empty());
        CHECK(scenario.quantities("gamma.energies").size() + scenario.quantities("gamma.band_edges").size() >=
              4);
        CHECK(scenario.profile("field.random").value > 0);
    }
    CHECK(names == std::set<std::string_view>{"edge_on_disc", "dwarf_wind", "large_halo", "scattering_laws"});
}

TEST_CASE("the effective scenario of a starter reads back to the same scenario",
          "[scenario][starters][round-trip]") {
    for (const Starter& starter : starters()) {
        INFO(starter.name);
        const Scenario first = parse(starter.text, "starter.toml", {});
        const std::string text = effective_toml(first);
        const Scenario second = parse(text, "elsewhere.toml", {});
        REQUIRE(first.entries().size() == second.entries().size());
        for (const auto& [path, entry] : first.entries()) {
            INFO(path);
            REQUIRE(second.has(path));
            CHECK(second.entries().find(path)->second.value == entry.value);
        }
        CHECK(effective_toml(second) == text);
    }
}
