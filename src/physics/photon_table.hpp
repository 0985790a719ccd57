#pragma once

#include "aureole/base/error.hpp"

#include <fmt/format.h>

#include <cmath>
#include <span>

/// A photon density [cm-3 erg-1] tabulated on energies [erg], as the tabulated functions of
/// inverse_compton.hpp and losses.hpp take it.
namespace aureole::physics::photon_table {

/// Throws Error(input) for fewer than two nodes, unequal lengths, energies not ascending and positive, or a
/// density that is negative or not finite.
inline void check(std::span<const double> energy, std::span<const double> density) {
    if (energy.size() < 2 || energy.size() != density.size()) {
        throw Error(
            ErrorKind::input,
            fmt::format(
                "photon spectrum: found {} energies and {} densities, expected the same number, at least 2",
                energy.size(), density.size()));
    }
    for (std::size_t i = 0; i < energy.size(); ++i) {
        if (!(energy[i] > (i == 0 ? 0.0 : energy[i - 1])) || !std::isfinite(energy[i])) {
            throw Error(ErrorKind::input, fmt::format("photon spectrum: found energy {} erg at node {}, "
                                                      "expected positive and ascending energies",
                                                      energy[i], i));
        }
        if (!(density[i] >= 0) || !std::isfinite(density[i])) {
            throw Error(
                ErrorKind::input,
                fmt::format("photon spectrum: found density {} at node {}, expected a finite density >= 0",
                            density[i], i));
        }
    }
}

/// Density between two nodes: a power law, or a straight line where an end is 0.
struct Segment {
    double e0, e1, n0, n1;

    bool empty() const { return n0 == 0 && n1 == 0; }
    double at(double energy) const {
        if (n0 > 0 && n1 > 0) {
            return n0 * std::pow(energy / e0, std::log(n1 / n0) / std::log(e1 / e0));
        }
        return n0 + (n1 - n0) * (energy - e0) / (e1 - e0);
    }
    /// Panels of 14 Gauss-Legendre points in ln energy that integrate it times a kernel over [from, to].
    int panels(double from, double to) const {
        const double slope_range = n0 > 0 && n1 > 0 ? std::abs(std::log(n1 / n0)) : 0.0;
        return static_cast<int>(std::ceil(std::log(to / from) / 2.2 + slope_range / 9));
    }
};

} // namespace aureole::physics::photon_table
