#include "aureole/sight/accumulate.hpp"

#include "aureole/base/dispatch.hpp"

namespace aureole::sight {

namespace {

/// `Width` neighbouring planes at once, so that their sums stay in registers.
template <std::size_t Width>
[[gnu::always_inline]] inline void
add_planes(const Chord* chords, std::size_t count, const float* values, std::size_t planes, double* sums) {
    double sum[Width] = {};
    for (std::size_t c = 0; c < count; ++c) {
        const float* value = values + planes * chords[c].cell;
        // The cells of a ray lie far apart in memory; asking early hides the wait.
        constexpr std::size_t ahead = 8;
        if (c + ahead < count) {
            const float* next = values + planes * chords[c + ahead].cell;
            __builtin_prefetch(next);
            __builtin_prefetch(next + Width - 1);
        }
        const double length = chords[c].length;
        for (std::size_t p = 0; p < Width; ++p) {
            sum[p] += length * static_cast<double>(value[p]);
        }
    }
    for (std::size_t p = 0; p < Width; ++p) {
        sums[p] = sum[p];
    }
}

[[gnu::always_inline]] inline void
add_all(const Chord* chords, std::size_t count, const float* values, std::size_t planes, double* sums) {
    std::size_t plane = 0;
    for (; plane + 24 <= planes; plane += 24) {
        add_planes<24>(chords, count, values + plane, planes, sums + plane);
    }
    for (; plane + 8 <= planes; plane += 8) {
        add_planes<8>(chords, count, values + plane, planes, sums + plane);
    }
    for (; plane + 4 <= planes; plane += 4) {
        add_planes<4>(chords, count, values + plane, planes, sums + plane);
    }
    for (; plane < planes; ++plane) {
        add_planes<1>(chords, count, values + plane, planes, sums + plane);
    }
}

} // namespace

AUREOLE_HOT void
accumulate(const Chord* chords, std::size_t count, const float* values, std::size_t planes, double* sums) {
    add_all(chords, count, values, planes, sums);
}

void accumulate_baseline(
    const Chord* chords, std::size_t count, const float* values, std::size_t planes, double* sums) {
    add_all(chords, count, values, planes, sums);
}

} // namespace aureole::sight
