#include "aureole/base/error.hpp"
#include "aureole/files/ecsv.hpp"
#include "aureole/files/hash.hpp"
#include "aureole/files/json.hpp"

#include <catch2/catch.hpp>
#include <fmt/format.h>

#include <cmath>
#include <cstdlib>
#include <fstream>
#include <limits>

using namespace aureole;
using namespace aureole::files;
using Catch::Matchers::Contains;
using std::string;

namespace {

std::vector<EcsvColumn> sample_columns() {
    const double infinite = std::numeric_limits<double>::infinity();
    return {
        {"height", "kpc", "distance: \"above\" the plane",
         std::vector<double>{0.1, 1.0 / 3, std::nan(""), -infinite}},
        {"count", "", "", std::vector<long>{1, -2, 3000000000L, 0}},
        {"name", "", "a # sign", std::vector<string>{"plain", "two words, a comma", "say \"so\"", "#start"}},
        {"good", "", "", std::vector<bool>{true, false, true, false}},
        {"flux", "Jy / beam", "", std::vector<double>{1e-30, 1.4e9, 5e-324, -0.0}}};
}

Json sample_json() {
    return Json::Object{
        {"text", "quote \" backslash \\ tab \t line \n end \x01"},
        {"letters", "\xce\xb1\xe2\x82\xac\xf0\x9f\x8c\x80"},
        {"broken", "\xff\xc0\x80\xed\xa0\x80 end\xe2\x82"},
        {"numbers", Json::Array{0.1, 1e300, 5e-324, -0.0, 42, std::size_t{7}, -3L}},
        {"nothing", Json::Array{std::nan(""), std::numeric_limits<double>::infinity(), Json{}}},
        {"flags", Json::Array{true, false}},
        {"empty", Json::Object{{"list", Json::Array{}}, {"object", Json::Object{}}}}};
}

} // namespace

TEST_CASE("columns of different lengths are no table", "[files][ecsv]") {
    CHECK_THROWS_WITH(
        ecsv_text({{"a", "", "", std::vector<double>{1}}, {"b", "", "", std::vector<double>{1, 2}}}, {}),
        Contains("b") && Contains("2 rows"));
}

TEST_CASE("a table has one line a row, whatever its texts hold", "[files][ecsv]") {
    const string text = ecsv_text({{"name", "", "", std::vector<string>{"two\nlines", "tab\there", ""}}},
                                  {{"key", "line\nbreak"}});
    CHECK_THAT(text, Contains("# %ECSV 1.0\n# ---\n") && Contains("\"two lines\"\n") && Contains("\n\"\"\n"));
    CHECK(std::count(text.begin(), text.end(), '\n') == 8 + 1 + 3);
}

TEST_CASE("the hash is FNV-1a and may be had in pieces", "[files][hash]") {
    // Test vectors of the FNV page by Noll (isthe.com): "", "a", "foobar" for FNV-1a 64; from memory.
    CHECK(fnv1a("") == 0xcbf29ce484222325U);
    CHECK(fnv1a("a") == 0xaf63dc4c8601ec8cU);
    CHECK(fnv1a("foobar") == 0x85944171f73967e8U);
    CHECK(fnv1a("bar", fnv1a("foo")) == fnv1a("foobar"));
    CHECK(hex(0x1fU) == "000000000000001f");
}

TEST_CASE("JSON keeps its order and indents", "[files][json]") {
    CHECK(Json(Json::Object{{"b", 1}, {"a", Json::Array{true}}}).text() ==
          "{\n  \"b\": 1,\n  \"a\": [\n    true\n  ]\n}\n");
    CHECK(Json(std::nan("")).text() == "null\n");
}

TEST_CASE("write a table and a JSON file for another reader", "[.][write-tables]") {
    const char* folder = std::getenv("AUREOLE_TEST_OUTPUT");
    REQUIRE(folder != nullptr);
    std::ofstream(string(folder) + "/table.ecsv")
        << ecsv_text(sample_columns(), {{"object", "NGC 1"}, {"a: key", "1.4e9, \"quoted\" \\ # text"}});
    std::ofstream(string(folder) + "/value.json") << sample_json().text();
}
