#pragma once

#include "aureole/base/run_context.hpp"
#include "aureole/grid/grid_file.hpp"
#include "aureole/grid/write_grid_file.hpp"
#include "aureole/media/media.hpp"
#include "aureole/scenario/scenario.hpp"
#include "aureole/transport/solve.hpp"
#include "aureole/transport/spec.hpp"

#include <cstddef>
#include <string>

namespace aureole::app {

/// What `aureole spectra` starts from and what came of it.
struct SolvedGalaxy {
    const scenario::Scenario& scenario;
    const grid::Grid& grid;
    const grid::GridFile* file; ///< may be null
    const media::Media& media;
    const transport::TransportSpec& spec;
    const transport::NamedLaw& law;
    const transport::Solution& solution;
};

/// All of it as a HALO-GRID file.
struct SpectraFile {
    grid::GridFileOutput output;
    std::size_t too_small = 0; ///< densities below the least normal float, written as 0
};
SpectraFile spectra_file(const SolvedGalaxy& galaxy, const std::string& command, const RunContext& context);

/// Largest part of the injected energy of a kind that its budget does not account for.
double worst_defect(const transport::Solution& solution);

/// absolute, rate, energy_density, grammage, gamma_luminosity.
std::string anchor_text(transport::AnchorSpec::Kind kind);

} // namespace aureole::app
