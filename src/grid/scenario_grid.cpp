#include "aureole/grid/scenario_grid.hpp"

namespace aureole::grid {

Grid scenario_grid(const scenario::Scenario& scenario) {
    Grid grid;
    grid.mirrored = scenario.boolean("grid.mirror");
    const auto cells = [&](const char* key) { return static_cast<std::size_t>(scenario.integer(key)); };
    if (scenario.text("grid.geometry") == "RZ") {
        grid.geometry = Geometry::rz;
        grid.x = stretched_edges(scenario.quantity("grid.radius"), cells("grid.cells_r"),
                                 scenario.quantity("grid.smallest_r"), false);
    } else {
        grid.x = stretched_edges(scenario.quantity("grid.half_width"), cells("grid.cells_xy"),
                                 scenario.quantity("grid.smallest_r"), true);
        grid.y = grid.x;
    }
    const std::size_t layers = cells("grid.cells_z") * (grid.mirrored ? 1 : 2);
    grid.z = stretched_edges(scenario.quantity("grid.height"), layers, scenario.quantity("grid.smallest_z"),
                             !grid.mirrored);
    validate(grid);
    return grid;
}

std::optional<GridFile> scenario_grid_file(const scenario::Scenario& scenario) {
    const auto path = scenario.path("input.grid");
    if (path.empty()) {
        return std::nullopt;
    }
    return open_grid_file(path.string());
}

} // namespace aureole::grid
