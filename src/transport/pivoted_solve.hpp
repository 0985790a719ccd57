#pragma once

#include "aureole/transport/operator.hpp"

#include <span>

namespace aureole::transport {

/// x = A^-1 rhs by sparse LU factors with pivoting (KLU of SuiteSparse). False if A is singular.
bool pivoted_solve(const Pattern& pattern,
                   std::span<const double> values,
                   std::span<const double> rhs,
                   std::span<double> x);

} // namespace aureole::transport
