#include "refusal.hpp"

#include "aureole/scenario/starter.hpp"

#include <catch2/catch.hpp>

#include <chrono>
#include <random>
#include <string>

using namespace aureole::scenario;

namespace {

/// Applies the change to copies of the starters for about 0.7 s: all must be accepted or refused by Error
/// alone. What is accepted must survive the effective scenario.
template <class Change> int survivors(const Change& change) {
    std::mt19937 random(2026);
    int accepted = 0;
    int tried = 0;
    const auto end = std::chrono::steady_clock::now() + std::chrono::milliseconds(700);
    while (std::chrono::steady_clock::now() < end) {
        std::string text(starters()[static_cast<std::size_t>(tried++) % starters().size()].text);
        change(text, random);
        try {
            const Scenario scenario = parse(text, "fuzz.toml", {});
            ++accepted;
            INFO(text);
            CHECK(refusal(effective_toml(scenario)) == "accepted");
        } catch (const aureole::Error& error) {
            CHECK(error.kind() == aureole::ErrorKind::scenario);
        }
    }
    CHECK(tried > 20);
    return accepted;
}

} // namespace

TEST_CASE("changed bytes make no scenario fail otherwise than by Error", "[scenario][fuzz]") {
    const int accepted = survivors([](std::string& text, std::mt19937& random) {
        for (std::size_t changes = 1 + random() % 3; changes > 0; --changes) {
            text[random() % text.size()] = static_cast<char>(random() % (changes == 1 ? 256 : 128));
        }
    });
    CHECK(accepted > 0); // changes inside comments, at least
}

TEST_CASE("lines cut out, doubled and moved make no scenario fail otherwise than by Error",
          "[scenario][fuzz]") {
    survivors([](std::string& text, std::mt19937& random) {
        const std::size_t from = random() % text.size();
        const std::string piece = text.substr(from, random() % 200);
        text.erase(from, piece.size());
        if (random() % 2 == 0) {
            text.insert(random() % (text.size() + 1), piece + piece);
        }
    });
}

TEST_CASE("random bytes and overrides make no scenario fail otherwise than by Error", "[scenario][fuzz]") {
    std::mt19937 random(5);
    for (int i = 0; i < 300; ++i) {
        std::string text(random() % 60, ' ');
        for (char& c : text) {
            c = static_cast<char>(random() % 256);
        }
        CHECK(refusal(text) != "another kind");
        CHECK(refusal("", {"run.title=" + text}) != "another kind");
        CHECK(refusal("", {"radio.frequencies=" + text}) != "another kind");
        CHECK(refusal("", {text}) != "another kind");
    }
}
