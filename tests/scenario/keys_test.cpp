#include "aureole/scenario/keys.hpp"
#include "aureole/scenario/scenario.hpp"

#include <catch2/catch.hpp>

#include <algorithm>
#include <fstream>
#include <set>
#include <sstream>

using namespace aureole::scenario;
using Catch::Matchers::Contains;

TEST_CASE("every key is named once, explained in a line, and found by its path", "[scenario][keys]") {
    std::set<std::string> seen;
    for (const Key& key : keys()) {
        INFO(key.path);
        CHECK(seen.insert(key.path).second);
        CHECK(!key.help.empty());
        CHECK(key.help.find_first_of("\n|") == std::string::npos); // a cell of the reference page
        CHECK(key.least <= key.greatest);
        CHECK(find_key(key.path) == &key);
        const bool chooses = key.kind == Kind::choice || key.kind == Kind::choice_list;
        CHECK(chooses == !key.choices.empty());
        if (key.kind == Kind::choice && !key.otherwise.empty()) {
            CHECK(std::count(key.choices.begin(), key.choices.end(), key.otherwise) == 1);
        }
    }
}

TEST_CASE("no key is a table as well", "[scenario][keys]") {
    for (const Key& key : keys()) {
        INFO(key.path);
        CHECK(!is_table(key.path));
    }
    CHECK(is_table("gas"));
    CHECK(is_table("radiation.component.dust"));
    CHECK(!is_table("radiation.component."));
    CHECK(!is_table("gas.hi.value"));
    CHECK(!is_table(""));
    CHECK(find_key("radiation.component.dust.value") == find_key("radiation.component.other.value"));
    CHECK(find_key("radiation.component..value") == nullptr);
    CHECK(find_key("gas.hi.value.") == nullptr);
    CHECK(find_key("gas.hi") == nullptr);
    CHECK(find_key("law.a.factor.b.length") == find_key("law.c.factor.d.length"));
    CHECK(find_key("law.a.factor.b.length") != find_key("law.a.length"));
    CHECK(is_named_table("law.a"));
    CHECK(is_named_table("law.a.factor.b"));
    CHECK(is_named_table("transport.protons.source.remnants"));
    CHECK(!is_named_table("law.a.factor"));
    CHECK(!is_named_table("gas.hi"));
}

TEST_CASE("every default can be read, so that an empty scenario is a scenario", "[scenario][keys]") {
    const Scenario scenario = parse("", "empty.toml", {});
    for (const Key& key : keys()) {
        INFO(key.path);
        const bool named = key.path.find("<name>") != std::string::npos;
        const bool solver = key.path.starts_with("transport.");
        CHECK(scenario.has(key.path) == (!named && !solver && !key.otherwise.empty()));
        CHECK(!scenario.is_set(key.path));
    }
    CHECK(!scenario.has_transport());
    const Scenario solved = parse("electrons.source = \"transport\"", "solved.toml", {});
    for (const Key& key : keys()) {
        INFO(key.path);
        const bool named = key.path.find("<name>") != std::string::npos;
        CHECK(solved.has(key.path) == (!named && !key.otherwise.empty()));
    }
}

TEST_CASE("the nearest key is the one with the fewest edits", "[scenario][keys]") {
    CHECK(nearest_key("view.inclinaton") == "view.inclination");  // an insertion
    CHECK(nearest_key("veiw.inclination") == "view.inclination"); // a swap
    CHECK(nearest_key("grid.radiuss") == "grid.radius");          // a deletion
    CHECK(nearest_key("map.pixal") == "map.pixel");               // a substitution
    CHECK(nearest_key("view.incl") == "view.inclination");        // cut short
    CHECK(nearest_key("radiation.component.dust.temprature") == "radiation.component.dust.temperature");
    CHECK(nearest_key("law.a.slop") == "law.a.slope");
    CHECK(nearest_key("law.a.factor.b.lenght") == "law.a.factor.b.length");
    CHECK(nearest_table("law.a.factors.b") == "law.a.factor.b");
    CHECK(nearest_table("gass") == "gas");
    CHECK(nearest_table("gas.h1") == "gas.hi");
    CHECK(nearest_table("radiation.componnet.dust") == "radiation.component.dust");
    CHECK(!nearest_key(std::string(100000, 'x')).empty());
}

TEST_CASE("docs/scenario.md is the reference page of this table", "[scenario][keys][docs]") {
    std::ifstream file(std::string(AUREOLE_SOURCE_DIR) + "/docs/scenario.md", std::ios::binary);
    REQUIRE(file);
    std::ostringstream text;
    text << file.rdbuf();
    CHECK(text.str() == reference_page()); // test_scenario "[write-reference]" writes it anew
    CHECK_THAT(text.str(),
               Contains("| `view.inclination` | angle | at least 0 deg and at most 180 deg | `90 deg` |"));
}

TEST_CASE("write the reference page", "[.][write-reference]") {
    std::ofstream(std::string(AUREOLE_SOURCE_DIR) + "/docs/scenario.md", std::ios::binary)
        << reference_page();
}
