#pragma once

#include "aureole/files/ecsv.hpp"
#include "aureole/files/json.hpp"
#include "aureole/profiles/heights.hpp"

#include <span>
#include <string>
#include <vector>

namespace aureole::report {

// All take one label per map, indexed like HeightsReport's `image`, such as "144 MHz". They throw
// Error(runtime) if labels are missing.

/// One row per bin of every profile: map, frequency (Hz), strip (-1: all as one), height, width (kpc), mean,
/// error, model (curve of the chosen model; NaN without one), unit of the last three, fitted.
std::vector<files::EcsvColumn> profiles_table(const profiles::HeightsReport& report,
                                              std::span<const std::string> labels,
                                              const profiles::HeightsSpec& spec);

/// One row per map, strip, side, model and component; strip -2 is the flux-weighted mean of the strips.
/// Heights and errors in kpc; NaN where there is none.
std::vector<files::EcsvColumn> heights_table(const profiles::HeightsReport& report,
                                             std::span<const std::string> labels);

/// One row per exponent h = h0 (nu/nu0)^eta.
std::vector<files::EcsvColumn> exponents_table(const profiles::HeightsReport& report);

/// Rows of the chosen model of the profiles of all strips as one, as objects named like the table's columns.
files::Json heights_json(const profiles::HeightsReport& report, std::span<const std::string> labels);

/// The exponent of the thickest component of the profile of all strips as one; null without one.
files::Json exponent_json(const profiles::HeightsReport& report);

/// For the terminal: heights of the chosen model (and, with each_strip, of every strip), exponents, notes.
/// All lines fit 100 columns except notes.
std::vector<std::string> terminal_lines(const profiles::HeightsReport& report,
                                        std::span<const std::string> labels,
                                        bool each_strip = true);

} // namespace aureole::report
