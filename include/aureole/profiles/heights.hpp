#pragma once

#include "aureole/base/run_context.hpp"
#include "aureole/maps/image.hpp"
#include "aureole/profiles/fit.hpp"

#include <cstddef>
#include <optional>
#include <span>
#include <string>
#include <vector>

namespace aureole::profiles {

enum class Sides { together, each };

struct HeightsSpec {
    ProfileSpec profile;
    std::vector<double> rms;   ///< map unit, one per map, in place of profile.rms; empty: profile.rms for all
    std::vector<Model> models; ///< tried; at least one
    double least_height = 0;   ///< cm; range of |height| fitted, the same for all maps
    double greatest_height = std::numeric_limits<double>::infinity();
    Sides sides = Sides::together;
    bool fit_centre = false;
    std::optional<DiscSpec> disc;   ///< also fit the inclined disc
    bool force_inclination = false; ///< fit the edge-on model even below 75 deg
};

/// Fit of one model to one profile.
struct HeightRow {
    std::size_t image = 0;
    int strip = -1;          ///< -1: all strips as one
    std::size_t profile = 0; ///< index in HeightsReport::profiles
    bool chosen = false;     ///< the jointly chosen model
    HeightResult fit;
};

/// Mean of the strips of one map, weighted by flux: sum F h / sum F, error sqrt(sum F^2 e^2)/sum F.
struct CombinedHeight {
    std::size_t image = 0;
    Model model = Model::exponential;
    bool forward = false;
    Side side = Side::both;
    std::size_t component = 0;
    std::size_t strips = 0;   ///< that could be used
    double h = 0;             ///< cm; NaN with no strip
    double error = 0;         ///< cm; from h_err_noise
    double error_scatter = 0; ///< cm; from h_err_scatter
    double strip_scatter =
        0; ///< cm; flux-weighted standard deviation of the strips about their mean (two or more), else NaN
    double error_distance = 0;             ///< cm; common
    std::optional<double> numerical_error; ///< cm
};

/// Sum over the maps of AICc of the profile of all strips as one.
struct ModelScore {
    Model model = Model::exponential;
    bool forward = false;
    std::size_t parameters = 0; ///< per profile
    double aicc = 0;            ///< infinite if a map could not be fitted
    bool chosen = false;
};

/// h = h0 (nu/nu0)^eta, weighted straight line in ln h against ln nu; nu0 makes the two errors independent.
struct HeightExponent {
    Model model = Model::exponential;
    bool forward = false;
    Side side = Side::both;
    std::size_t component = 0;
    int strip = -1; ///< -1: profile of all strips as one; -2: flux-weighted mean of the strips
    std::size_t maps = 0;
    double frequency = 0;        ///< nu0, Hz
    double h0 = 0, h0_error = 0; ///< cm; without the distance error
    double h0_error_distance = 0;
    double eta = 0, eta_error = 0;
    double chi2 = 0, dof = 0;
    std::string problem; ///< empty if the numbers can be used
};

struct HeightsReport {
    std::vector<Profile> profiles;
    std::vector<HeightRow> rows; ///< every image, strip, side, model, edge-on and forward
    std::vector<CombinedHeight> combined;
    std::vector<ModelScore> scores;
    std::optional<std::size_t> chosen;       ///< index in scores; empty if nothing could be fitted
    std::vector<HeightExponent> exponents;   ///< of the chosen model; empty for fewer than two frequencies
    std::optional<ScaleLength> scale_length; ///< where it was fitted (first map)
    std::vector<std::string> notes;          ///< what a reader must know, full sentences
};

/// Profiles, fits, joint choice of the model, means of the strips, exponent.
/// Model choice: the simplest model unless a richer one lowers the summed AICc by more than 6; among equally
/// rich ones the lowest. Below 75 deg inclination the edge-on model is refused unless forced; from 75 to 85
/// deg it carries a note (a naive fit of a disc with hR = 4 h errs by 73, 40 and 11 % at 75, 80, 85 deg).
/// start  report of nearly the same maps (other cells, say) for the same spec: every fit that has a usable
///        counterpart there starts from it alone and goes without the scatter (h_err_scatter = h_err_noise);
///        the others are done as without it. Null: none.
/// Throws Error(input) if the maps differ in pixels, beam or unit; Error(scenario) for the spec.
HeightsReport measure_heights(std::span<const maps::Image> images,
                              const HeightsSpec& spec,
                              const RunContext& context,
                              const HeightsReport* start = nullptr);

/// The parts of the above.
CombinedHeight
combine(std::span<const HeightResult* const> fits, std::span<const double> fluxes, std::size_t component);
HeightExponent
fit_exponent(std::span<const double> frequency, std::span<const double> h, std::span<const double> error);
std::optional<std::size_t> choose(std::span<const ModelScore> scores);

} // namespace aureole::profiles
