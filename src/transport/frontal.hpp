#pragma once

#include "elimination.hpp"

#include <cstddef>
#include <span>
#include <vector>

namespace aureole::transport {

/// L U (or L D L^T) of a matrix of about unit diagonal, for one Elimination.
struct Factor {
    std::vector<double> upper, lower, inverse_pivot; ///< lower is empty of a symmetric factor
    bool symmetric = false;
};

/// Memory for factorisations and solutions by one thread.
struct FrontalScratch {
    std::vector<double> stack, panel, vector, work, pivot_values;
};

/// False if a pivot vanishes, or is negative in a symmetric matrix.
/// values     [entries of the pattern]
/// baseline   the same bits on all x86-64 processors
bool factorize(const Elimination& plan,
               std::span<const double> values,
               bool symmetric,
               bool baseline,
               FrontalScratch& scratch,
               Factor& factor);

/// x = A^-1 x for several right-hand sides; each x by rows of the matrix.
void solve(const Elimination& plan,
           const Factor& factor,
           bool baseline,
           FrontalScratch& scratch,
           std::span<std::vector<double>> x);

} // namespace aureole::transport
