#pragma once

#include "aureole/transport/operator.hpp"

#include <array>
#include <cstddef>
#include <cstdint>
#include <span>
#include <vector>

namespace aureole::transport {

/// A run of neighbouring columns of a child's remainder that lands on neighbouring columns of its parent.
struct Run {
    std::uint32_t from = 0, to = 0, length = 0;
};

/// A matrix entry and its place in a panel of a front.
struct PanelEntry {
    std::uint32_t entry = 0, place = 0;
};

/// One dense step of the elimination: the pivots first .. first + pivots (in the order of elimination), and
/// the later unknowns they touch. Its upper panel has `rows` rows (pivots, filled up to 4) and `width`
/// columns: the pivots, filled up to 8, then the later unknowns, filled up to 8. The lower panel holds the
/// transposed other half in the same shape.
struct Front {
    std::uint32_t first = 0, pivots = 0, later = 0;
    std::uint32_t rows = 0, pivot_columns = 0, later_columns = 0;
    std::size_t panel = 0;                        ///< where its panels start in the factor
    std::size_t later_start = 0;                  ///< into Elimination::later
    std::size_t upper_start = 0, lower_start = 0; ///< into Elimination::upper, lower: up to the next front's
    std::vector<std::uint32_t> children;          ///< fronts, in the order in which they were eliminated
    std::vector<Run> runs;                        ///< of its remainder into its parent

    std::uint32_t width() const { return pivot_columns + later_columns; }
};

/// Order and plan of a sparse factorisation without pivoting, made once per pattern. Nested dissection by the
/// whole-number positions of the cells (George 1973, SIAM J. Num. Anal. 10, 345), dense fronts (Duff & Reid
/// 1983, ACM Trans. Math. Softw. 9, 302).
struct Elimination {
    std::vector<std::uint32_t> order;     ///< [rows] row eliminated at each place
    std::vector<std::uint32_t> place;     ///< [rows] its inverse
    std::vector<Front> fronts;            ///< children before parents
    std::vector<std::uint32_t> later;     ///< places of the later unknowns of all fronts, ascending per front
    std::vector<PanelEntry> upper, lower; ///< by front
    std::size_t panel_size = 0;           ///< numbers in all upper panels
    std::size_t stack_size = 0;           ///< numbers in all remainders alive at once
    std::size_t largest_panel = 0;
    std::size_t widest = 0; ///< columns of the widest front
    double operations = 0;  ///< multiplications of a factorisation that uses no symmetry
};

Elimination plan_elimination(const Pattern& pattern, std::span<const std::array<std::uint32_t, 3>> position);

} // namespace aureole::transport
