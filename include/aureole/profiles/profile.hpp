#pragma once

#include "aureole/maps/image.hpp"
#include "aureole/profiles/geometry.hpp"

#include <Eigen/Core>

#include <cmath>
#include <cstddef>
#include <string>
#include <vector>

namespace aureole::profiles {

/// How the covariance of a profile came about.
enum class ErrorSource { beam, autocorrelation, scatter, noiseless };
std::string to_string(ErrorSource source);

/// Box means of one strip against height.
struct Profile {
    std::size_t image = 0;         ///< index of the map
    int strip = -1;                ///< 0 ... strips-1; -1: all strips as one
    double x_low = 0, x_high = 0;  ///< cm along the major axis
    std::vector<double> height;    ///< cm; mean height of what went into the box
    std::vector<double> width;     ///< cm; of the top hat with the same scatter of heights
    std::vector<double> low, high; ///< cm; edges of the box
    std::vector<double> mean;      ///< map unit, background taken away
    std::vector<double> coverage;  ///< fraction of the box on good pixels
    Eigen::MatrixXd covariance;    ///< of the means, map unit squared
    ErrorSource errors = ErrorSource::beam;
    double rms = 0, background = 0; ///< map unit
    double flux = 0;                ///< sum of mean x box area, map unit cm2
    double beam_x = 0, beam_y = 0;  ///< Gaussian widths (sigma) along X and Y, cm; 0 without a beam
    double frequency = 0;           ///< Hz
    std::string unit;
    double error(std::size_t bin) const {
        const auto b = static_cast<Eigen::Index>(bin);
        return covariance(b, b) > 0 ? std::sqrt(covariance(b, b)) : 0;
    }
};

/// Profiles of all strips, then of all of them as one (strip -1; only that one if there is a single strip). A
/// pixel counts with the part of its area inside the box; blanks count nothing; boxes covered less than
/// least_coverage are left out. Pixel values being samples at the pixel centres, `height` and `width` are
/// mean and sqrt(12 variance) of those centres (plus the pixel's own variance for averages), so that the mean
/// of a smooth model over that top hat meets the box mean up to fourth order in the pixel. Noiseless maps
/// (rms 0) get the uniform variance (1e-3 peak)^2. Throws Error(scenario) for the spec, Error(input) naming
/// the image where no pixel can be used or a beam is needed and missing.
std::vector<Profile> measure(const maps::Image& image, const ProfileSpec& spec);

/// As above with the areas and unit covariances worked out before, for many maps on one grid with the same
/// blanks: `plan` of the first map.
struct Plan {
    std::vector<Strip> strips;               ///< the whole last
    std::vector<Eigen::MatrixXd> covariance; ///< for unit rms; empty where the errors come from scatter
};
Plan plan(const maps::Image& image, const ProfileSpec& spec);
std::vector<Profile> measure(const maps::Image& image, const ProfileSpec& spec, const Plan& plan);

} // namespace aureole::profiles
