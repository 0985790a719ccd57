#pragma once

#include "predict_heights.hpp"

#include "aureole/files/ecsv.hpp"
#include "aureole/files/run_folder.hpp"

#include <string>
#include <vector>

namespace aureole::app {

/// channels.ecsv, profiles.ecsv, heights.ecsv, exponents.ecsv and summary.json (docs/results.md), below the
/// prefix in the folder.
void write_tables(files::RunFolder& folder,
                  const std::string& prefix,
                  const scenario::Scenario& scenario,
                  const MapSettings& settings,
                  const std::vector<MapProduct>& products,
                  const PredictedHeights& heights,
                  const std::vector<std::string>& warnings,
                  const std::string& hash,
                  const std::string& command);

/// The rows of heights.ecsv, both bands; empty where nothing was measured.
std::vector<files::EcsvColumn> heights_columns(const PredictedHeights& heights);

/// Appends the rows of the second table to the first; both have the same columns.
std::vector<files::EcsvColumn> stacked(std::vector<files::EcsvColumn> first,
                                       const std::vector<files::EcsvColumn>& second);

/// What ends every summary.
inline constexpr const char* leaves_out_line =
    "Model output. It leaves out thermal emission, Faraday effects, noise and more: see 'leaves_out' in "
    "summary.json.";

/// Title and view of a run, and an empty line.
std::vector<std::string> title_lines(const scenario::Scenario& scenario, const MapSettings& settings);

/// What a person wants to see at the end of a run.
std::vector<std::string> summary_lines(const scenario::Scenario& scenario,
                                       const MapSettings& settings,
                                       const std::vector<MapProduct>& products,
                                       const emission::EmissionReport& report,
                                       const PredictedHeights& heights,
                                       const std::string& folder);

/// What the predictions leave out, for the summary and the documentation. solved: the spectra come from the
/// transport solver.
std::vector<std::string> left_out(bool solved);

} // namespace aureole::app
