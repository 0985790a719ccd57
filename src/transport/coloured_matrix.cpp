#include "coloured_matrix.hpp"

#include <algorithm>

namespace aureole::transport {
namespace {

using Position = std::array<std::uint32_t, 3>;

bool within_one(const Position& a, const Position& b) {
    for (std::size_t axis = 0; axis < 3; ++axis) {
        if (std::max(a[axis], b[axis]) - std::min(a[axis], b[axis]) > 1) {
            return false;
        }
    }
    return true;
}

} // namespace

ColouredMatrix make_coloured_matrix(const Mesh& mesh) {
    const std::size_t cells = mesh.cells();
    std::vector<std::vector<std::uint32_t>> touching(cells);
    for (const Face& face : mesh.faces) {
        touching[face.first].push_back(face.second);
        touching[face.second].push_back(face.first);
    }
    ColouredMatrix matrix;
    Pattern& pattern = matrix.pattern;
    pattern.row_start.push_back(0);
    std::array<bool, 27> used{};
    for (std::uint32_t cell = 0; cell < cells; ++cell) {
        std::vector<std::uint32_t> row{cell};
        for (const std::uint32_t near : touching[cell]) {
            row.push_back(near);
            for (const std::uint32_t next : touching[near]) {
                if (within_one(mesh.position[cell], mesh.position[next])) {
                    row.push_back(next);
                }
            }
        }
        std::sort(row.begin(), row.end());
        row.erase(std::unique(row.begin(), row.end()), row.end());
        const auto diagonal = std::lower_bound(row.begin(), row.end(), cell) - row.begin();
        pattern.diagonal.push_back(pattern.row_start.back() + static_cast<std::uint32_t>(diagonal));
        pattern.column.insert(pattern.column.end(), row.begin(), row.end());
        pattern.row_start.push_back(static_cast<std::uint32_t>(pattern.column.size()));
        const Position& at = mesh.position[cell];
        matrix.colour.push_back(static_cast<std::uint8_t>(at[0] % 3 + 3 * (at[1] % 3) + 9 * (at[2] % 3)));
        used[matrix.colour.back()] = true;
    }
    std::array<std::uint8_t, 27> renamed{};
    for (std::size_t c = 0; c < used.size(); ++c) {
        renamed[c] = static_cast<std::uint8_t>(matrix.colours);
        matrix.colours += used[c] ? 1 : 0;
    }
    for (std::uint8_t& colour : matrix.colour) {
        colour = renamed[colour];
    }
    matrix.position.assign(matrix.colours * cells, ColouredMatrix::none);
    for (std::size_t row = 0; row < cells; ++row) {
        for (std::uint32_t e = pattern.row_start[row]; e < pattern.row_start[row + 1]; ++e) {
            matrix.position[matrix.colour[pattern.column[e]] * cells + row] = e;
        }
    }
    matrix.values.resize(pattern.column.size());
    matrix.plan = plan_elimination(pattern, mesh.position);
    return matrix;
}

} // namespace aureole::transport
