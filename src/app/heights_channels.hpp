#pragma once

#include "aureole/emission/channels.hpp"

#include <string>
#include <vector>

namespace aureole::app {

/// Photon energies of the planes of a gamma-ray cube, in their order; empty where the file does not tell.
/// From the table that BANDSHDU names, or EBOUNDS (E_MIN, E_MAX) or ENERGIES (ENERGY), if it has a row for
/// every plane; else from the energy axis: logarithmic where CTYPE is ENER-LOG, else linear (Greisen et al.
/// 2006, A&A 446, 747, eq. 5), in the unit of CUNIT. A table in a file packed as a whole is not read.
/// Throws Error(input) where the file is no FITS file.
std::vector<emission::Channel> channel_energies(const std::string& path);

} // namespace aureole::app
