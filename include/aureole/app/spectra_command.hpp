#pragma once

#include "aureole/base/run_context.hpp"
#include "aureole/scenario/scenario.hpp"

#include <filesystem>
#include <string>
#include <vector>

namespace aureole::app {

struct SpectraOptions {
    std::filesystem::path file; ///< to write
    std::string law;            ///< name of the law to solve for; may be empty where the scenario has one
    bool force = false;         ///< replace a file that is there
    std::string command;        ///< as typed, for the provenance of the file
};

struct SpectraResult {
    std::vector<std::string> summary; ///< lines for the terminal, 80 columns
    std::vector<std::string> warnings;
};

/// `aureole spectra`: solves the transport of a scenario under one scattering law and writes its spectra and
/// media as a HALO-GRID file (docs/grid_file.md), from which `aureole predict` makes the same maps. The file
/// has the scenario's grid; species that are not solved for are written as the scenario gives them.
/// Accuracy   spectra and media of the file are those of the solver to the 1.2e-7 of 32-bit floats; densities
///            below 1.2e-38 cm-3 GeV-1 are written as 0.
/// Throws     Error(usage) for a law that the scenario does not solve for, or none where it has several;
///            Error(scenario) and Error(input) as read_transport() and load_media(); Error(output) for a file
///            that exists without force, is an input of the run, or cannot be written; Error(accuracy), and
///            no file, where the law did not settle or a budget of energy does not close to 1e-6.
SpectraResult
write_spectra(const scenario::Scenario& scenario, const SpectraOptions& options, const RunContext& context);

} // namespace aureole::app
