#include "aureole/sight/accumulate.hpp"

#include <catch2/catch.hpp>

#include <cmath>
#include <random>

using namespace aureole::sight;

TEST_CASE("sums along a ray are exact to double precision for any number of planes", "[sight]") {
    std::mt19937_64 random(3);
    std::uniform_real_distribution<float> even(0, 1);
    for (const std::size_t planes : {1U, 2U, 5U, 8U, 13U, 24U, 25U, 61U}) {
        INFO("planes " << planes);
        const std::size_t cells = 500;
        std::vector<float> value(cells * planes);
        for (float& v : value) {
            v = even(random);
        }
        std::vector<Chord> chords;
        for (int c = 0; c < 300; ++c) {
            chords.push_back(
                {static_cast<std::uint32_t>(random() % cells), static_cast<double>(even(random)), 0});
        }
        std::vector<double> fast(planes, -1.0);
        std::vector<double> baseline(planes, -1.0);
        accumulate(chords.data(), chords.size(), value.data(), planes, fast.data());
        accumulate_baseline(chords.data(), chords.size(), value.data(), planes, baseline.data());
        for (std::size_t p = 0; p < planes; ++p) {
            long double sum = 0;
            for (const Chord& chord : chords) {
                sum += static_cast<long double>(chord.length) * value[p + planes * chord.cell];
            }
            CHECK(fast[p] == Approx(static_cast<double>(sum)).epsilon(1e-13));
            CHECK(baseline[p] == Approx(static_cast<double>(sum)).epsilon(1e-13));
        }
        accumulate(chords.data(), 0, value.data(), planes, fast.data());
        CHECK(fast[planes - 1] == 0);
    }
}
