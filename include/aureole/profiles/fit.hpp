#pragma once

#include "aureole/profiles/disc.hpp"
#include "aureole/profiles/models.hpp"
#include "aureole/profiles/profile.hpp"

#include <Eigen/Core>

#include <cstddef>
#include <limits>
#include <optional>
#include <string>
#include <vector>

namespace aureole::profiles {

/// Which bins are fitted: both sides of the plane with one model, or one of them (Y > 0, Y < 0).
enum class Side { both, above, below };
std::string to_string(Side side);

enum class Status {
    ok,
    unresolved, ///< fit good; the thinner (or only) component is below the beam: see upper_limit
    at_bound,   ///< a height ran to the edge of what the data can tell
    not_converged,
    too_few_bins, ///< not more independent bins than parameters
    no_signal,    ///< nothing positive to fit
    too_inclined, ///< edge-on model below 75 deg inclination, refused
};
std::string to_string(Status status);
/// Whether the numbers of the fit may be used.
bool usable(Status status);

struct FitSpec {
    double least_height = 0; ///< cm, of |height|
    double greatest_height = std::numeric_limits<double>::infinity();
    Side side = Side::both;
    bool fit_centre = false; ///< height of the plane as a parameter (both sides only)
    bool fit_background = false;
    double calibration_error = 0;   ///< fraction
    double distance_fraction = 0;   ///< distance error / distance
    std::optional<DiscKernel> disc; ///< forward model of an inclined disc; empty: edge-on model
};

struct Component {
    double amplitude = 0, amplitude_error = 0; ///< map unit; error with the calibration error
    double h = 0;                              ///< cm
    double h_err_noise = 0;                    ///< cm; from the covariance of the bins, not rescaled
    double h_err_scatter = 0;  ///< cm; with the scatter that makes chi2/dof 1 (never below h_err_noise)
    double h_with_scatter = 0; ///< cm; best fit with that scatter in the weights
    double h_err_distance = 0; ///< cm; common to all heights of the galaxy
    std::optional<double> upper_limit; ///< cm; half the beam's FWHM where unresolved
    std::optional<double>
        numerical_error; ///< cm; of the map the profile came from, filled in by whoever knows it
};

/// A fit of one model to one profile. Where status is not usable the numbers are NaN and `problem` says why.
struct HeightResult {
    Model model = Model::exponential;
    bool forward = false; ///< fitted with the inclined disc
    Side side = Side::both;
    Status status = Status::no_signal;
    std::string problem;
    std::vector<Component> component; ///< by ascending height, components(model) of them
    double centre = 0;                ///< cm
    double background = 0;            ///< map unit
    double chi2 = 0;
    double dof = 0; ///< bins - parameters
    std::size_t bins = 0, parameters = 0;
    double independent =
        0;           ///< (tr R)^2 / tr R^2 of the correlation matrix R of the bins: beams rather than bins
    double aicc = 0; ///< chi2 + 2k + 2k(k+1)/(n-k-1), n = independent; infinite where n <= k+1
    double fractional_scatter = 0; ///< of the model, added to the covariance to make chi2/dof 1
    Eigen::MatrixXd
        covariance; ///< of ln w0, ln h per component (second: ln(h2 - h1)), then centre, background
    std::vector<double> curve;                                 ///< the model in all bins of the profile
    const Component& halo() const { return component.back(); } ///< the thickest
};

/// Generalised least squares: residuals whitened by the Cholesky factor of the covariance, trust region (GSL
/// multifit_nlinear, scale "more") from the best points of a scan over the heights (20 points, 91 pairs for
/// two components; amplitudes solved linearly): eight of them, or until two (two components: three) have met
/// at the lowest chi2 so far. Curves come from a table in ln h, good to 2e-9 of their peak, except where the
/// centre is fitted. Noiseless profiles: errors from the residuals. Never throws for the data: see Status.
/// Accuracy  heights of noiseless profiles to 1e-6; noisy ones agree with SciPy's curve_fit to 3e-6 of their
/// errors (tests/outside/scipy_heights.py).
/// Source    AICc: Hurvich & Tsai 1989, Biometrika 76, 297.
HeightResult fit_height(const Profile& profile, Model model, const FitSpec& spec);

} // namespace aureole::profiles
