#pragma once

#include "elimination.hpp"

#include <cstddef>
#include <cstdint>
#include <vector>

namespace aureole::transport {

/// The matrix of derivatives of equations that each depend on the cells within one cell around theirs. Cells
/// of one colour share no equation, so that one difference of all equations gives the columns of a colour
/// (Curtis, Powell & Reid 1974, J. Inst. Maths. Applics. 13, 117).
struct ColouredMatrix {
    Pattern pattern; ///< without entries of faces and corners
    Elimination plan;
    std::size_t colours = 0;
    std::vector<std::uint8_t> colour;    ///< [cells]
    std::vector<std::uint32_t> position; ///< [colours x cells] entry of a row in the columns of a colour
    std::vector<double> values;          ///< [entries]

    /// Where a row has no column of a colour.
    static constexpr std::uint32_t none = 0xffffffff;
};

ColouredMatrix make_coloured_matrix(const Mesh& mesh);

} // namespace aureole::transport
