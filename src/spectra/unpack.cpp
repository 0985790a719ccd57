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

AUREOLE_HOT int count_below_ratio(const float* __restrict node,
                                  const float* __restrict left,
                                  const float* __restrict right,
                                  int count) {
    int suspects = 0;
    for (int j = 0; j < count; ++j) {
        suspects += static_cast<int>(node[j] < left[j] * node[j - 1]) |
                    static_cast<int>(node[j + 1] < right[j] * node[j + 2]);
    }
    return suspects;
}

} // namespace

bool any_below_ratio(const float* node, const float* left, const float* right, std::size_t count) {
    return count_below_ratio(node, left, right, static_cast<int>(count)) > 0;
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
