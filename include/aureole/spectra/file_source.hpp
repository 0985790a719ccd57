#pragma once

#include "aureole/grid/grid_file.hpp"
#include "aureole/scenario/scenario.hpp"
#include "aureole/spectra/source.hpp"

#include <vector>

namespace aureole::spectra {

/// Spectra of a grid file: CR_LEPTON, or CR_ELECTRON and CR_POSITRON added, or CR_PROTON. Plain 32-bit data
/// are read straight from the file and never held whole; everything else goes through CFITSIO. finish()
/// compares the data with DATASUM where the file has it. Throws Error(input) if the file holds no spectra of
/// the species.
Source file_source(const grid::GridFile& file, Species species);

/// The sources a scenario asks for: from the file, closed forms, or energy densities with a shape; none where
/// source = "none".
std::vector<Source> open_sources(const scenario::Scenario& scenario,
                                 const grid::Grid& grid,
                                 const grid::GridFile* file,
                                 const RunContext& context);

} // namespace aureole::spectra
