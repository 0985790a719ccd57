#pragma once

#include "aureole/grid/grid_file.hpp"

#include <string>
#include <vector>

namespace aureole::app {

/// The HDUs EMISSIVITY_<label> of a grid file, ready-made emissivities per steradian: AXES 'FREQUENCY,X,Y,Z'
/// in erg s-1 cm-3 Hz-1 sr-1 or 'E_GAMMA,X,Y,Z' in photons, GeV-1 cm-3 s-1 sr-1 (rings: R, Z), finite and not
/// negative.
struct EmissivityFindings {
    std::vector<std::string> lines, problems;
    std::vector<std::string> warnings; ///< those of the file without what says that these HDUs are not known
};

/// warnings  of grid::examine. Checks label, kind of HDU, AXES, NAXISn, BUNIT and every value, a million at a
/// time. HDUs that `file` itself knows as data are passed over. Does not throw for what it finds.
EmissivityFindings examine_emissivities(const grid::GridFile& file, const std::vector<std::string>& warnings);

} // namespace aureole::app
