#pragma once

#include "aureole/grid/grid.hpp"
#include "aureole/maps/image.hpp"
#include "aureole/scenario/scenario.hpp"
#include "aureole/sight/view.hpp"

#include <optional>

namespace aureole::app {

sight::View scenario_view(const scenario::Scenario& scenario);

/// Beams of the scenario; nothing where the major axis is 0.
std::optional<maps::Beam> radio_beam(const scenario::Scenario& scenario);
std::optional<maps::Beam> gamma_beam(const scenario::Scenario& scenario);

/// The pixels all maps of a run share: as the scenario says, or a quarter of the radio beam, and wide enough
/// for the whole grid and a margin of one and a half beams.
maps::PixelGrid
scenario_pixels(const scenario::Scenario& scenario, const grid::Grid& grid, const sight::View& view);

} // namespace aureole::app
