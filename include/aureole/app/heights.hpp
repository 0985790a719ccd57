#pragma once

#include "aureole/base/run_context.hpp"

#include <string>
#include <vector>

namespace CLI {
class App;
}

namespace aureole::app {

/// Options of `aureole heights`, quantities as typed ("10 Mpc"); empty: the default of the help text.
struct HeightsArguments {
    std::vector<std::string> files;
    std::string folder;
    std::string centre, position_angle, inclination, distance, distance_error;
    int strips = 1;
    std::string strip_width, bin, from, to;
    std::vector<std::string> models; ///< empty: exponential and gaussian
    bool naive = false;              ///< only the edge-on model, at any inclination
    std::string disc_radius;
    std::vector<std::string> rms;
    std::string noise, source_free_height, background = "0", calibration_error;
    std::string mask, beam, sides = "both";
    bool force = false;
    bool quiet = false;  ///< print nothing on standard output
    std::string command; ///< as typed, for the provenance of the results
};

/// Defines the options on the verb; `arguments` must outlive it.
void add_heights_options(CLI::App& app, HeightsArguments& arguments);

/// Reads the maps, brings them to one beam and grid, measures scale heights, writes tables and a summary to
/// the folder (if one is given) and prints the heights. Noise is taken to be correlated like the beam unless
/// arguments.noise says otherwise; the rms of smoothed maps is raised so that the power over a beam is right.
/// Accuracy  30 pairs of maps (20 and 12 arcsec, turned against each other, peak 50 rms): heights and
/// exponent
///           miss by 0.9 to 1.1 of their errors in the root mean square.
/// Returns the exit code: 5 if no model could be fitted. Throws Error(usage) for the
/// options, Error(input) for maps, Error(output) for the folder.
int heights(const HeightsArguments& arguments, const RunContext& context);

} // namespace aureole::app
