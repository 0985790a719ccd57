#pragma once

#include "aureole/grid/grid.hpp"
#include "aureole/spectra/source.hpp"
#include "aureole/transport/solve.hpp"

namespace aureole::transport {

/// Spectra of a solution for emission, on the stored cells of `grid`: the solution's own cells where that is
/// its grid, else interpolated at the centres of cells, bilinear in (R, z) of ln N where all four neighbours
/// are > 0, of N elsewhere; constant beyond the outermost centres.
/// species    electrons: e- and e+ together. Throws Error(scenario) if the solution has none of them
spectra::Source solution_source(const Solution& solution, spectra::Species species, const grid::Grid& grid);

} // namespace aureole::transport
