#include "aureole/base/error.hpp"
#include "aureole/transport/law.hpp"

#include <catch2/catch.hpp>

#include <algorithm>
#include <cmath>
#include <limits>
#include <set>

using namespace aureole;
using namespace aureole::transport;
using Catch::Matchers::Contains;
using Catch::Matchers::Equals;

namespace {

LawSpec spec(std::string name, std::map<std::string, double, std::less<>> numbers = {}) {
    return {.name = std::move(name), .numbers = std::move(numbers), .lists = {}, .texts = {}, .children = {}};
}

std::string complaint(const LawSpec& law) {
    try {
        (void)checked_law(law);
    } catch (const Error& error) {
        CHECK(error.kind() == ErrorKind::scenario);
        return error.what();
    }
    return "";
}

bool is_ascii(std::string_view text) {
    return std::all_of(text.begin(), text.end(), [](char c) { return c >= ' ' && c <= '~'; });
}

} // namespace

TEST_CASE("every law of the list has its words, and every parameter a default inside its range",
          "[transport][catalogue]") {
    std::set<std::string_view> names;
    for (const LawEntry& law : law_catalogue()) {
        INFO(law.name);
        CHECK(names.insert(law.name).second);
        for (const std::string_view text :
             {law.name, law.mechanism, law.formula, law.media, law.slope, law.source, law.caution}) {
            CHECK_FALSE(text.empty());
            CHECK(is_ascii(text));
        }
        std::set<std::string_view> parameters;
        for (const LawParameter& parameter : law.parameters) {
            INFO(parameter.name);
            CHECK(parameters.insert(parameter.name).second);
            CHECK_FALSE(parameter.help.empty());
            CHECK(is_ascii(parameter.help));
            if (parameter.kind == ParameterKind::number && !std::isnan(parameter.otherwise)) {
                CHECK(parameter.otherwise >= parameter.least);
                CHECK(parameter.otherwise <= parameter.greatest);
            }
            CHECK(parameter.least <= parameter.greatest);
        }
        CHECK((law.kind != LawClass::shape || find_parameter(law, "rate") != nullptr));
    }
    CHECK(names.size() == 14);
}

TEST_CASE("a law that needs nothing more is complete with its defaults", "[transport][catalogue]") {
    for (const char* name : {"constant", "rigidity_power", "falling", "plasma_power", "slab_turbulence",
                             "anisotropic_alfvenic", "self_confinement", "patchy", "dust"}) {
        INFO(name);
        CHECK_THAT(complaint(spec(name)), Equals(""));
    }
    CHECK_THAT(complaint(spec("fast_modes")), Contains("damping_scale: not given"));
    CHECK_THAT(complaint(spec("formula")), Contains("expression: not given"));
    CHECK_THAT(complaint(spec("table")), Contains("radius: not given") && Contains("rate: not given"));
    CHECK_THAT(complaint(spec("sum")), Contains("at least one"));
}

TEST_CASE("unknown laws and parameters are refused with the nearest name", "[transport][catalogue]") {
    CHECK_THAT(complaint(spec("rigidity_powr")), Contains("rigidity_powr") && Contains("'rigidity_power'"));
    CHECK_THAT(complaint(spec("rigidity_power", {{"slop", 1}})),
               Contains("rigidity_power") && Contains("'slop'") && Contains("'slope'"));
    LawSpec law = spec("rigidity_power");
    law.lists["slope"] = {1, 2};
    CHECK_THAT(complaint(law), Contains("slope: found a list"));
    law = spec("sum", {{"rate", 1}});
    law.children = {spec("constant", {{"rates", 1}})};
    CHECK_THAT(complaint(law),
               Contains("law 'sum': found the parameter 'rate', expected none") &&
                   Contains("law 'sum' > 'constant': found no parameter 'rates', the nearest is 'rate'"));
}

TEST_CASE("the nearest word is that of fewest edits, both ways", "[transport][catalogue]") {
    const auto nearest = [](std::string_view word, std::vector<std::string_view> words) {
        return nearest_word(word, words);
    };
    CHECK(nearest("fall", {"falling", "fell"}) == "fell");
    CHECK(nearest("falling", {"fall", "failing"}) == "failing");
    CHECK(nearest("slops", {"stops", "slope", "slop"}) == "stops"); // the first of equally near ones
    CHECK(nearest("x", {}).empty());
}

TEST_CASE("values out of range are refused with the range", "[transport][catalogue]") {
    CHECK_THAT(complaint(spec("constant", {{"rate", 0}})), Contains("rate: found 0") && Contains("above 0"));
    CHECK_THAT(complaint(spec("constant", {{"rate", -1e-9}})), Contains("found -1e-09"));
    CHECK_THAT(complaint(spec("constant", {{"rate", std::numeric_limits<double>::quiet_NaN()}})),
               Contains("nan"));
    CHECK_THAT(complaint(spec("falling", {{"length", std::numeric_limits<double>::infinity()}})),
               Contains("inf"));
    CHECK_THAT(complaint(spec("rigidity_power", {{"slope", 12}})),
               Contains("slope: found 12") && Contains("at least -3") && Contains("at most 3"));
    LawSpec law = spec("rigidity_power");
    law.lists = {{"break_rigidity", {2e9, 1e9}}, {"break_slope", {0.1}}};
    CHECK_THAT(complaint(law), Contains("ascending") && Contains("break_slope: found 1 values, expected 2"));
    law = spec("falling");
    law.texts["along"] = "heigth";
    CHECK_THAT(complaint(law), Contains("'heigth'") && Contains("nearest is 'height'"));
    law = spec("self_confinement");
    law.texts["damping"] = "ion_neutral, turbulence";
    CHECK_THAT(complaint(law), Contains("'turbulence'") && Contains("nearest is 'turbulent'"));
    law.texts["damping"] = "none";
    CHECK_THAT(complaint(law), Contains("expected some damping"));
    law.texts["damping"] = "none, turbulent";
    CHECK_THAT(complaint(law), Contains("'none' alone"));
    CHECK_THAT(complaint(spec("patchy", {{"least_size", 3e18}, {"greatest_size", 2e18}})),
               Contains("greatest_size: found 2e+18"));
    law = spec("table");
    law.lists = {{"radius", {1, 2}}, {"height", {0}}, {"rigidity", {1e6, 1e7}}, {"rate", {1e-9, 1e-9, 0}}};
    CHECK_THAT(complaint(law), Contains("rate: found 0") && Contains("rate: found 3 values, expected 4"));
}

TEST_CASE("formulas are read when the law is checked", "[transport][catalogue]") {
    LawSpec law = spec("formula");
    law.texts["expression"] = "1e-9*rigidty^-0.5";
    CHECK_THAT(complaint(law),
               Contains("law 'formula'") && Contains("rigidty") && Contains("rigidity, beta"));
    law.texts["expression"] = "1e-9*(R";
    CHECK_THAT(complaint(law), Contains("law 'formula'"));
    law.texts["expression"] = "nu = 1e-9";
    CHECK_THAT(complaint(law), Contains("assignment"));
    law.texts["expression"] = "R";
    law.texts["gives"] = "factor";
    CHECK_THAT(complaint(law), Contains("gives a factor"));
    LawSpec sum = spec("sum");
    sum.children = {law};
    CHECK_THAT(complaint(sum), Contains("gives a factor"));
}

TEST_CASE("factors of a law have no dimension and no rate", "[transport][catalogue]") {
    LawSpec law = spec("rigidity_power");
    law.children = {spec("slab_turbulence")};
    CHECK_THAT(complaint(law), Contains("'slab_turbulence' as a factor"));
    law.children = {spec("falling", {{"rate", 1e-9}})};
    CHECK_THAT(complaint(law), Contains("'falling' has a rate"));
    law.children = {spec("falling")};
    CHECK_THAT(complaint(law), Equals(""));
}

TEST_CASE("all that is wrong with a law is said at once", "[transport][catalogue]") {
    LawSpec law = spec("maximum");
    law.children = {spec("constant", {{"rate", 0}}), spec("nonsense"), spec("patchy", {{"slopes", 1}})};
    const std::string text = complaint(law);
    CHECK(std::count(text.begin(), text.end(), '\n') == 2);
    CHECK_THAT(text, Contains("constant") && Contains("nonsense") && Contains("slopes"));
}

TEST_CASE("variables of formulas stand in the order that the laws rely on", "[transport][catalogue]") {
    std::vector<std::string_view> names;
    for (const FormulaVariable& variable : formula_variables()) {
        names.push_back(variable.name);
        CHECK(is_ascii(variable.help));
    }
    CHECK(names == std::vector<std::string_view>{"R", "z", "r", "rigidity", "beta", "B", "B_ordered", "n_i",
                                                 "n_n", "T", "v_A", "u_t", "L_t", "r_g", "Omega", "P_res",
                                                 "dP_res"});
}
