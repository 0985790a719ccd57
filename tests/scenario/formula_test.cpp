#include "aureole/base/error.hpp"
#include "aureole/scenario/formula.hpp"

#include <catch2/catch.hpp>

#include <array>
#include <clocale>
#include <cmath>
#include <locale>
#include <random>
#include <string>
#include <thread>
#include <vector>

using aureole::Error;
using aureole::scenario::Formula;
using Catch::Matchers::Contains;

namespace {

double value_of(const std::string& text, double radius = 2, double height = 3) {
    Formula formula(text, {"R", "z"});
    const std::array<double, 2> at{radius, height};
    return formula.eval(at);
}

std::string refused(const std::string& text) {
    try {
        Formula(text, {"R", "z"});
    } catch (const Error& error) {
        return error.what();
    }
    return "accepted";
}

struct CommaPoint : std::numpunct<char> {
    char do_decimal_point() const override { return ','; }
};

} // namespace

TEST_CASE("a formula has the value of its expression", "[scenario][formula]") {
    CHECK(value_of("R + 2*z") == 8);
    CHECK(value_of("exp(-R/4)*(1+z^2)") == Approx(10 * std::exp(-0.5)).epsilon(1e-15));
    CHECK(value_of("-2^2") == -4);
    CHECK(value_of("2^3^2") == 512);
    CHECK(value_of("log(_e)") == Approx(1).epsilon(1e-15)); // natural
    CHECK(value_of("R >= 2 && z != 1 ? 7 : 9") == 7);
    CHECK(value_of("z <= 2.5 ? 7 : 9") == 9);
    CHECK(std::isinf(value_of("1/(R-2)"))); // the caller names the place
    CHECK(std::isnan(value_of("log(-R)")));
}

TEST_CASE("a formula with an unknown name is refused with the known ones", "[scenario][formula][bad-input]") {
    const std::string message = refused("R + height");
    CHECK_THAT(message, Contains("\"height\"") && Contains("known variables: R, z"));
    CHECK_THAT(refused("foo(R)"), Contains("foo"));
}

TEST_CASE("assignments, lists and texts are no formulas", "[scenario][formula][bad-input]") {
    for (const char* text : {"z=5", "R = z", "z = = 5", "R, z", "1,2", "", " ", "R +", "(R", "R)", "\"R\"",
                             "R z", "1 2", "?", "R ? 1"}) {
        INFO(text);
        CHECK(refused(text) != "accepted");
    }
    CHECK_THAT(refused("z=5"), Contains("assignment"));
    CHECK_THAT(refused("1,2"), Contains("2 expressions"));
}

TEST_CASE("each thread may have a formula of its own", "[scenario][formula]") {
    std::vector<std::thread> threads;
    std::array<int, 4> wrong{};
    for (std::size_t t = 0; t < wrong.size(); ++t) {
        threads.emplace_back([t, &wrong] {
            Formula formula("R*z + " + std::to_string(t), {"R", "z"});
            Formula moved = std::move(formula);
            for (int i = 0; i < 2000; ++i) {
                const std::array<double, 2> at{static_cast<double>(i), 2};
                wrong[t] += moved.eval(at) == 2.0 * i + static_cast<double>(t) ? 0 : 1;
            }
        });
    }
    for (auto& thread : threads) {
        thread.join();
    }
    CHECK(wrong == std::array<int, 4>{});
}

TEST_CASE("a locale with decimal commas does not change a formula", "[scenario][formula][locale]") {
    const std::locale before = std::locale::global(std::locale(std::locale::classic(), new CommaPoint));
    std::setlocale(LC_NUMERIC, "de_DE.UTF-8"); // where it is installed
    const double value = value_of("1.5*R");
    std::setlocale(LC_NUMERIC, "C");
    std::locale::global(before);
    CHECK(value == 3);
}

TEST_CASE("random text makes no formula fail otherwise than by Error", "[scenario][formula][fuzz]") {
    std::mt19937 random(11);
    const std::string alphabet = "Rz0123456789.+-*/^()<>=!&|?:, expminlog\"e_";
    for (int i = 0; i < 4000; ++i) {
        std::string text(random() % 24, ' ');
        for (char& c : text) {
            c = i % 5 == 0 ? static_cast<char>(random() % 256) : alphabet[random() % alphabet.size()];
        }
        try {
            Formula formula(text, {"R", "z"});
            const std::array<double, 2> at{1, 2};
            formula.eval(at);
        } catch (const Error&) {
        }
    }
    CHECK(refused(std::string(20000, '1')) != "accepted");
    CHECK(refused(std::string(9000, '(')) != "accepted");
}
