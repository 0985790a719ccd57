#include "aureole/grid/cells.hpp"

#include "aureole/base/constants.hpp"

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

double cell_volume(const Cells& cells, std::size_t i, std::size_t j, std::size_t k) {
    const auto& x = cells.stored.x;
    const double height = cells.z[k + 1] - cells.z[k];
    if (cells.stored.geometry == Geometry::rz) {
        return constants::pi * (x[i + 1] - x[i]) * (x[i + 1] + x[i]) * height /
               static_cast<double>(cells.sectors);
    }
    return (x[i + 1] - x[i]) * (cells.stored.y[j + 1] - cells.stored.y[j]) * height;
}

std::vector<double> cell_volumes(const Cells& cells) {
    std::vector<double> volume;
    volume.reserve(cells.size());
    for (std::size_t k = 0; k < cells.nz(); ++k) {
        for (std::size_t j = 0; j < cells.n2(); ++j) {
            for (std::size_t i = 0; i < cells.nx(); ++i) {
                volume.push_back(cell_volume(cells, i, j, k));
            }
        }
    }
    return volume;
}

} // namespace aureole::grid
