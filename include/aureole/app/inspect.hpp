#pragma once

#include "aureole/base/run_context.hpp"

#include <string>

namespace aureole::app {

/// Prints what a file holds and every problem in it. A scenario, a HALO-GRID file and any other FITS file are
/// told apart by their content.
///   scenario   problems with their lines; else title, grid, sources, frequencies, energies, view
///   HALO-GRID  geometry, extents, energy axes, every data HDU with its unit, range and volume integral,
///   warnings FITS       every HDU with its shape, unit, range, blanks and checksum
/// All on standard output, problems alone where `quiet`; lines that start with "problem:" or "warning:" name
/// what is wrong. Returns 0 where the file is fine (warnings included), ErrorKind::scenario or
/// ErrorKind::input as a number where it has problems. Throws Error(input) if the file cannot be read at all,
/// or is neither.
int inspect(const std::string& file, bool quiet, const RunContext& context);

} // namespace aureole::app
