#pragma once

#include "aureole/base/run_context.hpp"
#include "aureole/grid/grid.hpp"
#include "aureole/spectra/basis.hpp"

#include <cstddef>
#include <functional>
#include <memory>
#include <string>
#include <vector>

namespace aureole::spectra {

enum class Species { electrons, protons };

/// Spectra of one species in every stored cell, read a block at a time and from any thread, whoever made
/// them: a file, a closed form, a solver. Electrons and positrons count together.
struct Source {
    Species species = Species::electrons;
    std::shared_ptr<const Basis> basis;
    std::size_t cells = 0;
    /// Opens a reader for one thread. The reader writes the spectra of cells first .. first + count - 1 as M
    /// = N T^2.5 [cm-3 erg^1.5], weighted[(cell - first) * stride + node], and leaves the padding alone. All
    /// values finite and >= 0, else Error(input) naming the cell and the energy.
    using Reader =
        std::function<void(std::size_t first, std::size_t count, float* weighted, std::size_t stride)>;
    std::function<Reader()> open;
    /// Called once after every cell has been read exactly once: throws Error(input) if the data do not match
    /// their checksum. May be empty.
    std::function<void()> finish;
    std::string name; ///< for messages
};

/// Averages over 2 x 2 x 2 (2 x 2 on an RZ grid) neighbouring cells, weighted with their volumes, on
/// grid::coarsened(fine). An odd last cell stands alone.
std::vector<Source> coarsened(const std::vector<Source>& sources, const grid::Grid& fine);

} // namespace aureole::spectra
