#pragma once

#include "aureole/scenario/scenario.hpp"
#include "aureole/transport/spec.hpp"

namespace aureole::transport {

/// What the scenario asks of the solver. Throws Error(scenario) listing every problem, one a line, as
/// FILE:LINE:COLUMN: KEY: what was found, what was expected: no sources, sources or anchors outside the grid,
/// powers that are infinite, unknown parameters of laws, names of laws that are not there, laws made of
/// themselves; Error(input) for a grid file or a table of rates that cannot be read, and for a grid file that
/// holds spectra that the scenario solves for without saying so.
/// Sources without a power of their own get that of their supernovae, of those of the stars formed, or of the
/// electron share: electrons over protons of all populations, per momentum, at equal rigidity 10 GV.
TransportSpec read_transport(const scenario::Scenario& scenario);

} // namespace aureole::transport
