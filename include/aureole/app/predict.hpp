#pragma once

#include "aureole/base/run_context.hpp"
#include "aureole/scenario/scenario.hpp"

#include <cstddef>
#include <filesystem>
#include <string>
#include <vector>

namespace aureole::app {

struct PredictOptions {
    std::filesystem::path folder;
    bool force = false;
    std::string command; ///< as typed, for the provenance of the results
};

/// What a run is going to be: sizes, memory and an estimate of its duration, without reading spectra.
struct Plan {
    std::size_t stored_cells = 0, cells = 0;
    std::size_t planes = 0;
    std::size_t pixels_x = 0, pixels_y = 0;
    double pixel_arcsec = 0;
    std::size_t emissivity_bytes = 0, total_bytes = 0; ///< the emissivity of one pass
    std::size_t room_for_emissivity = 0;               ///< bytes
    std::size_t passes = 1; ///< the spectra are read so many times, for a part of the channels each
    std::size_t laws = 0;   ///< scattering laws to solve for
    double seconds = 0;
    std::vector<std::string> files;         ///< that would be written, relative to the folder
    std::vector<std::string> lines() const; ///< for the terminal
};

Plan plan(const scenario::Scenario& scenario, const RunContext& context);

struct PredictResult {
    std::vector<std::string> summary; ///< lines for the terminal
    std::vector<std::string> warnings;
    std::vector<std::string> files; ///< relative to the folder
    bool accuracy_missed = false;   ///< a conservation check failed: exit code 5, results written and flagged
};

/// The main job: from a scenario to maps, tables and a summary in a folder. Re-entrant.
PredictResult
predict(const scenario::Scenario& scenario, const PredictOptions& options, const RunContext& context);

} // namespace aureole::app
