#pragma once

#include "aureole/sight/trace.hpp"

#include <cstddef>

namespace aureole::sight {

/// Integrals along a ray of piecewise constant quantities:  sums[p] = sum over chords of length * values[p +
/// planes * cell]. sums       [planes], overwritten; unit of the values times cm Accuracy   products and sums
/// in double: 1e-13 of the sum of absolute values. Compiled for several processors, so the last
///            bits may differ from machine to machine.
void accumulate(
    const Chord* chords, std::size_t count, const float* values, std::size_t planes, double* sums);

/// The same with the baseline instructions only: the same bits on all x86-64 machines.
void accumulate_baseline(
    const Chord* chords, std::size_t count, const float* values, std::size_t planes, double* sums);

} // namespace aureole::sight
