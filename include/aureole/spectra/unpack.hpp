#pragma once

#include <cstddef>
#include <cstdint>

namespace aureole::spectra {

/// Turns raw big-endian 32-bit floats of a FITS file into weighted spectra: weighted[cell * stride + i] =
/// value * scale[i]. The padding from `nodes` to `stride` is left alone. Adds the 32-bit words of the data to
/// `word_sum` (the FITS checksum before its carries are folded). Returns false if any value is negative
/// (other than -0) or not finite; the output then holds what was found. Compiled for several instruction sets
/// and chosen at run time; every version gives the same bits.
bool unpack(const std::uint32_t* raw,
            std::size_t cells,
            std::size_t nodes,
            const float* scale,
            float* weighted,
            std::size_t stride,
            std::uint64_t* word_sum);

/// Whether, for any j < count, node[j] < left[j] node[j - 1] or node[j + 1] < right[j] node[j + 2]. node[-1]
/// .. node[count + 1] must exist.
bool any_below_ratio(const float* node, const float* left, const float* right, std::size_t count);

/// to[i] += factor from[i].
void add_scaled(const float* from, float factor, std::size_t count, float* to);

} // namespace aureole::spectra
