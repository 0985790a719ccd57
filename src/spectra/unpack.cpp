#include "aureole/spectra/unpack.hpp"

#include "aureole/base/dispatch.hpp"

#include <cstring>

namespace aureole::spectra {

namespace {

constexpr std::uint32_t largest_finite = 0x7f7fffffU; // everything above it is negative, infinite or NaN
constexpr std::uint32_t minus_zero = 0x80000000U;

AUREOLE_HOT bool unpack_cells(const std::uint32_t* __restrict raw,
                              std::size_t cells,
                              std::size_t nodes,
                              const float* __restrict scale,
                              float* __restrict weighted,
                              std::size_t stride,
                              std::uint64_t* __restrict word_sum) {
    std::uint32_t bad = 0;
    std::uint64_t sum = 0;
    for (std::size_t cell = 0; cell < cells; ++cell) {
        const std::uint32_t* in = raw + cell * nodes;
        float* out = weighted + cell * stride;
        std::uint32_t low = 0;
        std::uint32_t high = 0;
        // Half words are summed apart in 32 bits, which vectorises well; it holds for spectra of up to 65536
        // nodes.
        for (std::size_t i = 0; i < nodes; ++i) {
            std::uint32_t bits = __builtin_bswap32(in[i]);
            low += bits & 0xffffU;
            high += bits >> 16;
            bits = bits == minus_zero ? 0U : bits;
            bad |= static_cast<std::uint32_t>(bits > largest_finite);
            float value;
            std::memcpy(&value, &bits, sizeof value);
            out[i] = value * scale[i];
        }
        sum += low + (static_cast<std::uint64_t>(high) << 16);
    }
    *word_sum += sum;
    return bad == 0;
}

AUREOLE_HOT bool below_ratio(const float* __restrict node,
                             const float* __restrict left,
                             const float* __restrict right,
                             std::size_t count) {
    constexpr std::size_t width = 16;
    if (count < width) {
        bool below = false;
        for (std::size_t j = 0; j < count; ++j) {
            below |= node[j] < left[j] * node[static_cast<std::ptrdiff_t>(j) - 1] ||
                     node[j + 1] < right[j] * node[j + 2];
        }
        return below;
    }
    int below = 0;
    for (std::size_t start = 0; start < count; start += width) {
        const std::size_t first = start + width > count ? count - width : start; // the last ones twice
        const float* n = node + first;
        const float* l = left + first;
        const float* r = right + first;
        for (int j = 0; j < static_cast<int>(width); ++j) {
            below |= static_cast<int>(n[j] < l[j] * n[j - 1]) | static_cast<int>(n[j + 1] < r[j] * n[j + 2]);
        }
    }
    return below != 0;
}

AUREOLE_HOT void
add_scaled_nodes(const float* __restrict from, float factor, std::size_t count, float* __restrict to) {
    for (std::size_t i = 0; i < count; ++i) {
        to[i] += factor * from[i];
    }
}

} // namespace

bool any_below_ratio(const float* node, const float* left, const float* right, std::size_t count) {
    return below_ratio(node, left, right, count);
}

void add_scaled(const float* from, float factor, std::size_t count, float* to) {
    add_scaled_nodes(from, factor, count, to);
}

bool unpack(const std::uint32_t* raw,
            std::size_t cells,
            std::size_t nodes,
            const float* scale,
            float* weighted,
            std::size_t stride,
            std::uint64_t* word_sum) {
    return unpack_cells(raw, cells, nodes, scale, weighted, stride, word_sum);
}

} // namespace aureole::spectra
