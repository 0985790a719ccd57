#pragma once

#include <array>
#include <cstddef>
#include <span>
#include <vector>

namespace aureole::transport {

/// Particles [s-1] and kinetic energy [erg s-1].
struct Rate {
    double number = 0, energy = 0;
};

/// Where particles and energy of one kind went, over the whole mesh (one side of a mirrored grid) and the
/// momenta marched through. With the quadrature of the march all parts add up to what was injected.
struct Budget {
    Rate injected;
    std::vector<double> lost;  ///< [processes] erg s-1
    double adiabatic = 0;      ///< erg s-1 given to the gas
    std::vector<Rate> escaped; ///< [sides]
    Rate catastrophic;
    Rate remaining;  ///< cooled below the lowest momentum
    Rate defect;     ///< of the discrete identities, relative to what was injected
    Rate quadrature; ///< injected by the march over injected by a rule for piecewise power laws, minus 1
};

/// Sums over the mesh at one momentum of a march: rates per unit momentum, and the current b psi.
struct MomentumTotals {
    double momentum = 0;       ///< g cm s-1
    double kinetic_energy = 0; ///< erg
    double injected = 0;       ///< sum V Q
    double catastrophic = 0;
    std::vector<double> escaped; ///< [sides]
    std::vector<double> carried; ///< [processes + 1] sum V b psi, s-1; the last is adiabatic
};

/// Weights with which an interval between two consecutive momenta counts the one before its first, its first
/// and its last [g cm s-1].
using IntervalWeights = std::array<double, 3>;

/// Adds up a march over momenta totals[0] > totals[1] > ..., with intervals between.
/// Number: the current at the end of an interval is that at its start plus the weighted gains and losses.
/// Energy: the same times the mean kinetic energy of the interval; summed by parts, current times the drop of
/// kinetic energy is what the loss processes took.
Budget add_up(std::span<const MomentumTotals> totals, std::span<const IntervalWeights> intervals);

} // namespace aureole::transport
