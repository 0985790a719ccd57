#pragma once

#include "aureole/base/large_array.hpp"
#include "aureole/base/run_context.hpp"
#include "aureole/emission/kernels.hpp"
#include "aureole/spectra/basis.hpp"

#include <array>
#include <cstddef>
#include <vector>

namespace aureole::emission {

/// Synchrotron weights on a spectrum's own nodes, tabulated against u = ln(nu/(nu_1 B)) and against how
/// ordered the field is, t = b0^2/B^2, where b0 is the projected ordered field, sigma the rms of one
/// component of the Gaussian random field, B^2 = b0^2 + 2 sigma^2 and nu_1 = 3e/(4 pi m c). The emissivity of
/// a cell is  scale(nu) B^(1 + tilt) sum_i M_i row_i(u, t),  rows tabulated times exp(tilt u), so that they
/// are flat in u for the spectra one meets, and straight lines between the table's values suffice.
struct SynchrotronRows {
    static constexpr double tilt = 0.75;
    double first = 0, step = 0.03;     ///< of u
    std::size_t tables = 0;            ///< values of u
    std::size_t nodes = 0, stride = 0; ///< of a row, and its padded length
    std::vector<double> order;         ///< values of t, 0 .. 1, at which the kernel was integrated
    std::vector<double> fine_order;    ///< those of `total` and `polarised`, between which lines suffice
    LargeArray<float> total;           ///< [table][fine order][stride], times `unit`
    LargeArray<float> polarised;       ///< the same; empty unless asked for
    std::vector<float> total_fallback; ///< [order][table][interval][4]
    std::vector<float> polarised_fallback;
    std::vector<int> first_node; ///< [table] before it this row and the next are zero; a multiple of 16
    double unit = 1;
    double beyond = 0; ///< u above which nothing is emitted (x > 700 for the highest energy)
};

/// from, to: range of u needed. Throws nothing; rows beyond `beyond` are left out.
SynchrotronRows synchrotron_rows(
    const spectra::Basis& basis, double from, double to, bool polarised, const RunContext& context);

/// Where a field lies between two of the fine orders: the first, and the way to the second, 0 .. 1.
struct OrderPlace {
    std::size_t first = 0;
    float towards = 0;
};
OrderPlace order_place(const SynchrotronRows& rows, double order);

/// The same for the fallback weights: the first of four orders and their cubic fractions.
struct CubicPlace {
    std::size_t first = 0;
    std::array<float, 4> fraction{};
};
CubicPlace cubic_place(const SynchrotronRows& rows, double order);

/// Constant C of  j = C B integral N(T) <b F(x/b)> dT  [erg s-1 cm-3 Hz-1 sr-1]: sqrt3 e^3 / (4 pi m c^2).
double synchrotron_constant();

} // namespace aureole::emission
