#pragma once

#include "aureole/grid/grid.hpp"

#include <cstddef>
#include <cstdint>
#include <vector>

namespace aureole::grid {

/// The cells that emission fills and sight lines cross: the whole galaxy, mirror image included, and for an
/// axisymmetric grid each ring cut into `sectors` equal sectors of azimuth, since an ordered field radiates
/// differently at each azimuth. Cell index: i + nx (j + n2 k), i counts X or R, j counts Y or sectors (sector
/// j spans azimuth 2 pi j/n to 2 pi (j+1)/n, from +x towards +y), k counts Z from below.
struct Cells {
    Grid stored;             ///< what files and media hold
    std::vector<double> z;   ///< Z edges of both sides, cm
    std::size_t sectors = 1; ///< of azimuth; 1 for XYZ

    std::size_t nx() const { return stored.nx(); }
    std::size_t n2() const { return stored.geometry == Geometry::rz ? sectors : stored.ny(); }
    std::size_t nz() const { return z.size() - 1; }
    std::size_t size() const { return nx() * n2() * nz(); }

    /// Stored plane that plane k of the whole galaxy is, or is the mirror image of.
    std::size_t stored_plane(std::size_t k) const {
        if (!stored.mirrored) {
            return k;
        }
        const std::size_t half = stored.nz();
        return k >= half ? k - half : half - 1 - k;
    }
    bool is_mirror_image(std::size_t k) const { return stored.mirrored && k < stored.nz(); }
    /// Index of the stored cell behind a cell.
    std::size_t stored_cell(std::size_t i, std::size_t j, std::size_t k) const {
        const std::size_t row = stored.geometry == Geometry::rz ? 0 : j;
        return i + stored.nx() * (row + stored.ny() * stored_plane(k));
    }
};

/// sectors is ignored for XYZ.
Cells whole_galaxy(const Grid& stored, std::size_t sectors);

/// Volume of one cell [cm3].
double cell_volume(const Cells& cells, std::size_t i, std::size_t j, std::size_t k);

/// Of each cell, indexed as Cells.
std::vector<double> cell_volumes(const Cells& cells);

} // namespace aureole::grid
