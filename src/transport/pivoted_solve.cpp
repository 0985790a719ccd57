#include "pivoted_solve.hpp"

#include <algorithm>
#include <klu.h>
#include <memory>
#include <vector>

namespace aureole::transport {

bool pivoted_solve(const Pattern& pattern,
                   std::span<const double> values,
                   std::span<const double> rhs,
                   std::span<double> x) {
    klu_common common;
    klu_defaults(&common);
    const auto free_symbolic = [&](klu_symbolic* it) { klu_free_symbolic(&it, &common); };
    const auto free_numeric = [&](klu_numeric* it) { klu_free_numeric(&it, &common); };
    // KLU wants columns; rows taken for columns are the transposed matrix.
    std::vector<int> start(pattern.row_start.begin(), pattern.row_start.end());
    std::vector<int> index(pattern.column.begin(), pattern.column.end());
    std::vector<double> entries(values.begin(), values.end());
    const int rows = static_cast<int>(pattern.rows());
    const std::unique_ptr<klu_symbolic, decltype(free_symbolic)> symbolic(
        klu_analyze(rows, start.data(), index.data(), &common), free_symbolic);
    if (symbolic == nullptr) {
        return false;
    }
    const std::unique_ptr<klu_numeric, decltype(free_numeric)> numeric(
        klu_factor(start.data(), index.data(), entries.data(), symbolic.get(), &common), free_numeric);
    if (numeric == nullptr) {
        return false;
    }
    std::copy(rhs.begin(), rhs.end(), x.begin());
    return klu_tsolve(symbolic.get(), numeric.get(), rows, 1, x.data(), &common) == 1;
}

} // namespace aureole::transport
