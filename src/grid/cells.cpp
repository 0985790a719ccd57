#include "aureole/grid/cells.hpp"

namespace aureole::grid {

Cells whole_galaxy(const Grid& stored, std::size_t sectors) {
    Cells cells{stored, {}, 1};
    if (stored.geometry == Geometry::rz && sectors > 1) {
        cells.sectors = sectors;
    }
    if (stored.mirrored) {
        for (std::size_t k = stored.z.size() - 1; k > 0; --k) {
            cells.z.push_back(-stored.z[k]);
        }
    }
    cells.z.insert(cells.z.end(), stored.z.begin(), stored.z.end());
    return cells;
}

std::vector<double> cell_volumes(const Cells& cells) {
    const auto stored = cell_volumes(cells.stored);
    const double share = cells.stored.geometry == Geometry::rz ? static_cast<double>(cells.sectors) : 1.0;
    std::vector<double> volume;
    volume.reserve(cells.size());
    for (std::size_t k = 0; k < cells.nz(); ++k) {
        for (std::size_t j = 0; j < cells.n2(); ++j) {
            for (std::size_t i = 0; i < cells.nx(); ++i) {
                volume.push_back(stored[cells.stored_cell(i, j, k)] / share);
            }
        }
    }
    return volume;
}

} // namespace aureole::grid
