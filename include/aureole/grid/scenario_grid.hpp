#pragma once

#include "aureole/grid/grid.hpp"
#include "aureole/grid/grid_file.hpp"
#include "aureole/scenario/scenario.hpp"

#include <optional>

namespace aureole::grid {

/// The grid of the scenario's [grid] part.
Grid scenario_grid(const scenario::Scenario& scenario);

/// The grid file a scenario names; nothing where it names none.
std::optional<GridFile> scenario_grid_file(const scenario::Scenario& scenario);

} // namespace aureole::grid
