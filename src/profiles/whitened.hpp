#pragma once

#include "curves.hpp"

#include "aureole/profiles/fit.hpp"

#include <Eigen/Core>

#include <vector>

namespace aureole::profiles {

/// A profile's fitted bins in units of order one: heights over `length`, means over `peak`.
struct Problem {
    Model model = Model::exponential;
    double length = 1, peak = 1;
    BinGeometry geometry;           ///< of all bins of the profile
    std::vector<Eigen::Index> rows; ///< the fitted bins among them
    Eigen::VectorXd data;           ///< [fitted bins]
    Eigen::MatrixXd covariance;     ///< [fitted bins x fitted bins]
    CurveTable* table = nullptr;    ///< of the geometry; null where the centre is fitted
    double ln_low = 0, ln_high = 0; ///< bounds of ln h
    bool fit_centre = false, fit_background = false;

    std::size_t parts() const { return components(model); }
    Eigen::Index parameters() const {
        return static_cast<Eigen::Index>(2 * parts()) + (fit_centre ? 1 : 0) + (fit_background ? 1 : 0);
    }
};

/// Bounds of ln w in units of the peak.
inline constexpr double ln_amplitude_bound = 25;

/// Model and, where wanted, its derivatives at the parameters: ln w0, ln h (second component: ln(h2 - h1))
/// for each component, then centre, then background. Logarithms are held within their bounds.
struct Curve {
    Eigen::VectorXd value;
    Eigen::MatrixXd slope;
};
Curve curve_at(const Problem& problem, const Eigen::VectorXd& parameters, bool slopes);

/// The model in all bins of the profile.
Eigen::VectorXd full_curve(const Problem& problem, const Eigen::VectorXd& parameters);

/// Heights of the components, within bounds.
std::vector<double> heights_of(const Problem& problem, const Eigen::VectorXd& parameters);

/// Inverse of the lower Cholesky factor of the covariance. Where bins are so correlated that rounding and
/// pixels would decide, eigenvalues are raised to 1e-7 of the largest.
Eigen::MatrixXd whitener(const Eigen::MatrixXd& covariance);

/// Parameters to start from, best first: linear amplitudes on a scan over the heights.
std::vector<Eigen::VectorXd>
starting_points(const Problem& problem, const Eigen::MatrixXd& white, std::size_t count);

struct Solution {
    Eigen::VectorXd parameters;
    Eigen::MatrixXd covariance;
    double chi2 = 0;
    bool converged = false, valid = false;
};

/// Trust region from one start.
Solution solve(const Problem& problem, const Eigen::MatrixXd& white, const Eigen::VectorXd& start);

} // namespace aureole::profiles
