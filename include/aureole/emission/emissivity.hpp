#pragma once

#include "aureole/base/large_array.hpp"
#include "aureole/grid/cells.hpp"

#include <cstddef>
#include <string>
#include <vector>

namespace aureole::emission {

enum class Band { radio, gamma };

/// One column of an emissivity: what is emitted, where in the spectrum, and its scale.
struct Plane {
    Band band = Band::radio;
    std::string process;     ///< "total", "synchrotron", "synchrotron_q", "inverse_compton:cmb",
                             ///< "bremsstrahlung:hi", "pion_decay", ...
    std::size_t channel = 0; ///< index into the channels of both bands
    bool is_signed = false;  ///< Stokes Q, U
    /// CGS size of one stored unit: erg s-1 cm-3 Hz-1 sr-1 for radio; s-1 cm-3 sr-1 erg-1 (or, for a channel
    /// that is a band, s-1 cm-3 sr-1) for gamma. Emissivities of haloes are far below the smallest normal
    /// float.
    double unit = 1;
};

/// Emissivity per steradian in every cell: value[plane + planes.size() * cell], times planes[plane].unit.
struct Emissivity {
    grid::Cells cells;
    std::vector<Plane> planes;
    LargeArray<float> value;
};

} // namespace aureole::emission
