#pragma once

#include "aureole/spectra/basis.hpp"

#include <cstddef>
#include <functional>
#include <span>
#include <vector>

namespace aureole::emission {

/// One row of a matrix product: the integral over kinetic energy of  N(T) kernel(T) dT  as weights on the
/// nodes of M = N T^s. `fallback` holds, for each interval and each node of its stencil, what has to be added
/// where a cell's spectrum uses the straight line there instead of the cubic.
struct WeightRow {
    std::vector<double> cubic;    ///< [nodes]
    std::vector<double> fallback; ///< [intervals][4]
};

/// A kernel at the points of a quadrature over the nodes of a basis.
struct KernelPoint {
    double log_energy; ///< ln T, T in erg
    double value;      ///< kernel(T) T^(1 - s) x weight of the point in ln T
};

/// kernel(T): CGS, T in erg; need not be smooth at `splits` (erg; any order, those outside the nodes are
/// ignored). Gauss-Legendre with `points` per piece between nodes and splits, in ascending order.
std::vector<KernelPoint> kernel_points(const spectra::Basis& basis,
                                       const std::function<double(double)>& kernel,
                                       std::span<const double> splits,
                                       int points);

/// The row that the points make on a basis, whose nodes must be some or all of those that the points were
/// made for, ends included. Exact for the interpolant up to the smoothness of the kernel in one piece.
WeightRow weight_row(const spectra::Basis& basis, std::span<const KernelPoint> points);

/// Both.
WeightRow integrate_kernel(const spectra::Basis& basis,
                           const std::function<double(double)>& kernel,
                           std::span<const double> splits,
                           int points);

/// The integral of kernel(T) T^-s (T/T_end)^(-slope + s) over the range beyond the nodes: what the spectrum
/// would add if it went on as N ~ T^-slope from its end node, per unit M at that node. above: from the last
/// node up to 10^decades times it; else from the first node down by 10^-decades.
double tail_weight(const spectra::Basis& basis,
                   const std::function<double(double)>& kernel,
                   std::span<const double> splits,
                   double slope,
                   bool above,
                   double decades);

} // namespace aureole::emission
