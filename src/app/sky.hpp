#pragma once

#include "evaluate.hpp"
#include "predict_heights.hpp"
#include "predict_inputs.hpp"

#include "aureole/files/run_folder.hpp"
#include "aureole/media/media.hpp"
#include "aureole/scenario/scenario.hpp"
#include "aureole/spectra/source.hpp"

#include <string>
#include <vector>

namespace aureole::app {

/// What one set of spectra looks like: maps and heights.
struct Sky {
    Evaluation fine;
    PredictedHeights heights;
    std::vector<std::string> warnings;
    bool accuracy_missed = false; ///< a conservation check failed
};

/// coarse: spectra on grid::coarsened(inputs.grid) for the estimate of numerical errors, on the same
/// energies; null: averages of the sources.
Sky make_sky(const scenario::Scenario& scenario,
             const Inputs& inputs,
             const media::Media& media,
             const std::vector<spectra::Source>& sources,
             const std::vector<spectra::Source>* coarse,
             const std::vector<ChannelGroup>& groups,
             const RunContext& context);

/// How a run is named in what it writes.
struct RunName {
    std::string hash;    ///< of the effective scenario
    std::string command; ///< as typed
    std::string prefix;  ///< of file names in the folder, empty or ending in '/'
    std::string law;     ///< scattering law behind the spectra; empty without
};

/// Maps, tables and summary.json below the prefix.
void write_sky(const Sky& sky,
               const scenario::Scenario& scenario,
               const Inputs& inputs,
               const RunName& name,
               files::RunFolder& folder,
               const RunContext& context);

} // namespace aureole::app
