#pragma once

#include <array>
#include <cstddef>
#include <span>
#include <vector>

namespace aureole::spectra {

/// Exponent s of the weighting: spectra are stored and interpolated as M = N(T) T^s, T kinetic energy in erg,
/// N in cm-3 erg-1.
inline constexpr double weighting = 2.5;

/// How a spectrum runs between its energy nodes. In each interval M is the cubic in ln T through the four
/// nearest nodes, so that N is linear in the node values and an integral over N is a matrix product. Where
/// that cubic would be negative the interval falls back to the straight line in ln T between its two nodes
/// ("hats").
class Basis {
  public:
    /// kinetic_energy: at least 2 nodes, erg, > 0, strictly increasing.
    explicit Basis(std::vector<double> kinetic_energy);

    std::size_t nodes() const { return energy_.size(); }
    std::size_t intervals() const { return energy_.size() - 1; }
    std::span<const double> energy() const { return energy_; } ///< erg
    std::span<const double> log_energy() const { return log_energy_; }
    /// First node of the stencil of an interval, and the number of nodes in it (4, or all where there are
    /// fewer).
    std::size_t stencil_start(std::size_t interval) const;
    std::size_t stencil_size() const { return stencil_; }
    /// Values of the stencil's Lagrange polynomials at ln T = log_energy inside or near the interval.
    std::array<double, 4> cubic(std::size_t interval, double log_energy) const;
    /// The same for the two nodes of the straight line.
    std::array<double, 2> hats(std::size_t interval, double log_energy) const;

    /// M interpolated at one energy inside the nodes, with the fallback applied. 0 outside.
    double value(std::span<const float> weighted, double kinetic_energy) const;

    /// Intervals in which the cubic of this spectrum (nodes() values, all >= 0) is negative somewhere. Writes
    /// their indices to `found` (room for intervals()) and returns how many there are.
    std::size_t negative_intervals(const float* weighted, std::size_t* found) const;

  private:
    std::vector<double> energy_, log_energy_;
    std::size_t stencil_;
    // Largest |w_outer/w_inner| over an interval for the left and right outer node: while the inner node is
    // above that fraction of its outer neighbour, the cubic cannot be negative. Interior intervals of the
    // four-node stencil only.
    std::vector<float> left_ratio_, right_ratio_;
    std::array<float, 2> end_ratio_{};
    std::vector<std::array<float, 4>> samples_; // 7 points per interval
};

} // namespace aureole::spectra
