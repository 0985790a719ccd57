#pragma once

#include "aureole/maps/image.hpp"
#include "aureole/profiles/geometry.hpp"

#include <Eigen/Core>

#include <cstddef>
#include <span>
#include <vector>

namespace aureole::profiles {

/// Correlation of the noise of two pixels by their lag: at(di, dj), 1 at lag 0, 0 beyond `reach` pixels.
struct LagTable {
    std::ptrdiff_t reach_x = 0, reach_y = 0;
    std::vector<double> value;   ///< [(2 reach_y + 1) x (2 reach_x + 1)], di fastest
    double least_eigenvalue = 0; ///< of a covariance of boxes, over its greatest: what lies below is not
                                 ///< known; 0 where the correlation is exact
    double at(std::ptrdiff_t di, std::ptrdiff_t dj) const {
        if (di < -reach_x || di > reach_x || dj < -reach_y || dj > reach_y) {
            return 0;
        }
        return value[static_cast<std::size_t>((dj + reach_y) * (2 * reach_x + 1) + di + reach_x)];
    }
};

/// Noise correlated like the beam, rho(d) = exp(-d.C^-1.d/2) with C the beam's covariance: natural weighting
/// of an interferometer.
LagTable beam_correlation(const maps::PixelGrid& pixels, const maps::Beam& beam);

struct MeasuredNoise {
    double rms = 0, level = 0; ///< map unit; level: median
    std::size_t pixels = 0;    ///< used
};

/// Robust noise of the source-free pixels: median and 1.4826 x median absolute deviation, clipped at 4 sigma
/// until nothing changes. `source_free` [pixels] non-zero: use. Throws Error(input) with fewer than 30 finite
/// pixels.
MeasuredNoise measure_noise(const maps::Image& image, std::span<const unsigned char> source_free);

/// Pixels that hold no source by the spec: |Y| > source_free_height, or the outer tenth of the map; never
/// masked ones.
std::vector<unsigned char> source_free_pixels(const maps::PixelGrid& pixels, const ProfileSpec& spec);

/// Autocorrelation of the source-free pixels up to 3 beams (10 pixels without a beam): sums over pairs, whole
/// up to half that lag and tapered from there; of its power spectrum what is negative is set to 0, and the
/// root of the rest, cut at half the reach as well, is folded with itself. A correlation made this way is
/// positive semidefinite. Not known better than to the relative variance of the measured variance,
/// 2 sum rho^2/pixels (Bartlett 1946, Suppl. J. R. Stat. Soc. 8, 27; cited from memory), which becomes
/// `least_eigenvalue`.
/// noise     of the same pixels; what lies beyond 5 rms of its level is left out
/// Accuracy  of heights of an exponential layer under smoothed noise with 200 noise beams without sources and
///           bins of 0.25 to 1 beam: scatter within 1 % of that with the exact correlation, errors 3 to 4 %
///           low
LagTable measured_correlation(const maps::Image& image,
                              std::span<const unsigned char> source_free,
                              const MeasuredNoise& noise);

/// Covariance of the box means for noise of unit rms: w_a.R.w_b over the pixels that `good` marks, with w the
/// areas over their sum. Exact for the map as sampled, blanks included, up to eigenvalues lifted to
/// `least_eigenvalue`. Boxes without good pixels have zero rows.
Eigen::MatrixXd unit_covariance(const maps::PixelGrid& pixels,
                                const Strip& strip,
                                std::span<const unsigned char> good,
                                const LagTable& correlation);

/// Covariance of the means of unit-rms noise over two a x b boxes whose centres are (d, e) apart, for noise
/// correlated like a Gaussian beam: K(d;a) K(e;b) for a beam along the axes,
///   K(d;a) = [H(d+a) - 2H(d) + H(d-a)]/a^2,  H(u) = s sqrt(pi/2) u erf(u/(s sqrt2)) + s^2 exp(-u^2/2s^2),
/// else the double integral of the overlap triangles times the correlation by quadrature (1e-10). a, b > 0;
/// cm.
double box_covariance(double d, double e, double a, double b, const BeamCovariance& beam);

} // namespace aureole::profiles
