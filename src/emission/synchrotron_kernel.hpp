#pragma once

#include <array>
#include <vector>

namespace aureole::emission {

/// Rice averages <b F(x/b)> and <b G(x/b) cos 2 phi> at one order, tabulated evenly in ln x. Below the table
/// both rise as x^(1/3); above it they are zero.
struct KernelTable {
    static constexpr double first = -16, step = 0.1;
    static constexpr double largest_x = 700; ///< F(700) is below the smallest double
    std::vector<double> log_total, ratio;    ///< ln f, g/f

    /// {f, g}, by a cubic in ln x.
    std::array<double, 2> at(double log_x) const;
};

/// order: b0^2/B^2 as in SynchrotronRows, 0 .. 1.
KernelTable kernel_table(double order);

} // namespace aureole::emission
