#include "whitened.hpp"

#include <Eigen/Cholesky>
#include <Eigen/Eigenvalues>
#include <Eigen/LU>
#include <Eigen/QR>
#include <gsl/gsl_blas.h>
#include <gsl/gsl_errno.h>
#include <gsl/gsl_multifit_nlinear.h>

#include <algorithm>
#include <cmath>
#include <limits>
#include <memory>

namespace aureole::profiles {

namespace {

Eigen::Index index(std::size_t i) {
    return static_cast<Eigen::Index>(i);
}

struct Fitted {
    const Problem* problem;
    const Eigen::MatrixXd* white;
};

Eigen::VectorXd copy(const gsl_vector* from) {
    Eigen::VectorXd to(index(from->size));
    for (std::size_t k = 0; k < from->size; ++k) {
        to(index(k)) = gsl_vector_get(from, k);
    }
    return to;
}

int residuals(const gsl_vector* x, void* data, gsl_vector* f) {
    const auto& fitted = *static_cast<const Fitted*>(data);
    const Problem& problem = *fitted.problem;
    const Curve curve = curve_at(problem, copy(x), false);
    const Eigen::VectorXd residual = *fitted.white * (curve.value - problem.data);
    for (std::size_t k = 0; k < f->size; ++k) {
        gsl_vector_set(f, k, residual(index(k)));
    }
    return residual.allFinite() ? GSL_SUCCESS : GSL_EDOM;
}

int slopes(const gsl_vector* x, void* data, gsl_matrix* jacobian) {
    const auto& fitted = *static_cast<const Fitted*>(data);
    const Problem& problem = *fitted.problem;
    const Curve curve = curve_at(problem, copy(x), true);
    const Eigen::MatrixXd slope = *fitted.white * curve.slope;
    for (std::size_t i = 0; i < jacobian->size1; ++i) {
        for (std::size_t k = 0; k < jacobian->size2; ++k) {
            gsl_matrix_set(jacobian, i, k, slope(index(i), index(k)));
        }
    }
    return slope.allFinite() ? GSL_SUCCESS : GSL_EDOM;
}

/// Whether the residuals are at right angles to every column of the Jacobian, or nothing.
bool at_minimum(const Eigen::VectorXd& residual, const Eigen::MatrixXd& jacobian) {
    const double size = residual.norm();
    if (size < 1e-9 * std::sqrt(static_cast<double>(residual.size()))) {
        return true;
    }
    for (Eigen::Index k = 0; k < jacobian.cols(); ++k) {
        const double length = jacobian.col(k).norm();
        if (length > 0 && std::abs(jacobian.col(k).dot(residual)) > 1e-4 * length * std::max(size, 1e-3)) {
            return false;
        }
    }
    return true;
}

/// (J^T J)^-1. Parameters held at a bound have no column and count as known; infinite where the others are
/// degenerate.
Eigen::MatrixXd covariance_of(const Eigen::MatrixXd& jacobian) {
    std::vector<Eigen::Index> moved;
    for (Eigen::Index k = 0; k < jacobian.cols(); ++k) {
        if (jacobian.col(k).squaredNorm() > 0) {
            moved.push_back(k);
        }
    }
    Eigen::MatrixXd covariance = Eigen::MatrixXd::Zero(jacobian.cols(), jacobian.cols());
    if (moved.empty()) {
        return covariance;
    }
    // Columns are scaled to unit length first, or the inversion would lose small parameters.
    const Eigen::MatrixXd free = jacobian(Eigen::all, moved);
    const Eigen::VectorXd scale = free.colwise().norm().cwiseInverse().transpose();
    const Eigen::MatrixXd unit = free * scale.asDiagonal();
    const Eigen::FullPivLU<Eigen::MatrixXd> normal(unit.transpose() * unit);
    if (!normal.isInvertible()) {
        return covariance.setConstant(std::numeric_limits<double>::infinity());
    }
    covariance(moved, moved) = scale.asDiagonal() * normal.inverse() * scale.asDiagonal();
    return covariance;
}

/// Curves of one component of unit amplitude in all bins, with derivatives.
struct UnitCurve {
    Eigen::VectorXd value, by_ln_h, by_z;
};

UnitCurve unit_curve(const Problem& problem, double ln_h, double shift, bool slopes) {
    if (problem.table != nullptr) {
        if (!slopes) {
            return {problem.table->value(ln_h), {}, {}};
        }
        CurveTable::Pair pair = problem.table->value_and_slope(ln_h);
        return {std::move(pair.value), std::move(pair.by_ln_h), {}};
    }
    const BinGeometry& geometry = problem.geometry;
    const double h = std::exp(ln_h);
    const auto bins = index(geometry.z.size());
    UnitCurve curve{Eigen::VectorXd(bins), Eigen::VectorXd(bins), Eigen::VectorXd(bins)};
    for (std::size_t b = 0; b < geometry.z.size(); ++b) {
        const Shape shape = bin_mean(problem.model, h, geometry.beam, geometry.z[b] - shift,
                                     geometry.width[b], geometry.disc);
        curve.value(index(b)) = shape.value;
        curve.by_ln_h(index(b)) = shape.by_ln_h;
        curve.by_z(index(b)) = shape.by_z;
    }
    return curve;
}

/// Unit-amplitude curves of the scan, whitened.
std::vector<Eigen::VectorXd>
scan_curves(const Problem& problem, const Eigen::MatrixXd& white, const std::vector<double>& ln_h) {
    std::vector<Eigen::VectorXd> curves;
    for (const double value : ln_h) {
        curves.push_back(white * unit_curve(problem, value, 0, false).value(problem.rows));
    }
    return curves;
}

struct Candidate {
    double chi2 = 0;
    Eigen::VectorXd parameters;
};

/// Least squares for amplitudes (and background); negative amplitudes are set to a trace.
Candidate candidate(const Problem& problem,
                    const Eigen::MatrixXd& white,
                    const Eigen::VectorXd& data,
                    const std::vector<const Eigen::VectorXd*>& curves,
                    const std::vector<double>& ln_h) {
    const auto parts = index(curves.size());
    Eigen::MatrixXd matrix(data.size(), parts + (problem.fit_background ? 1 : 0));
    for (Eigen::Index c = 0; c < parts; ++c) {
        matrix.col(c) = *curves[static_cast<std::size_t>(c)];
    }
    if (problem.fit_background) {
        matrix.col(parts) = white * Eigen::VectorXd::Ones(data.size());
    }
    Eigen::VectorXd amplitude = matrix.colPivHouseholderQr().solve(data);
    for (Eigen::Index c = 0; c < parts; ++c) {
        amplitude(c) = std::isfinite(amplitude(c)) ? std::max(amplitude(c), 1e-3) : 1e-3;
    }
    Candidate made{(matrix * amplitude - data).squaredNorm(), Eigen::VectorXd::Zero(problem.parameters())};
    for (Eigen::Index c = 0; c < parts; ++c) {
        made.parameters(2 * c) = std::log(amplitude(c));
    }
    made.parameters(1) = ln_h[0];
    if (parts == 2) {
        made.parameters(3) = std::log(std::exp(ln_h[1]) - std::exp(ln_h[0]));
    }
    if (problem.fit_background) {
        made.parameters(problem.parameters() - 1) = amplitude(parts);
    }
    return made;
}

} // namespace

std::vector<double> heights_of(const Problem& problem, const Eigen::VectorXd& parameters) {
    std::vector<double> heights;
    for (std::size_t c = 0; c < problem.parts(); ++c) {
        const double h = std::exp(std::clamp(parameters(index(2 * c + 1)), problem.ln_low, problem.ln_high));
        heights.push_back(c == 0 ? h : heights.front() + h);
    }
    return heights;
}

namespace {

/// The model in all bins.
Curve curve_everywhere(const Problem& problem, const Eigen::VectorXd& parameters, bool slopes) {
    const auto parts = problem.parts();
    const auto heights = heights_of(problem, parameters);
    const auto within = [&](std::size_t k, double low, double high) {
        return parameters(index(k)) > low && parameters(index(k)) < high ? 1.0 : 0.0;
    };
    const Eigen::Index centre = index(2 * parts);
    const double shift = problem.fit_centre ? parameters(centre) : 0;
    const auto bins = index(problem.geometry.z.size());
    Curve curve;
    curve.value = Eigen::VectorXd::Zero(bins);
    curve.slope = Eigen::MatrixXd::Zero(slopes ? bins : 0, problem.parameters());
    for (std::size_t c = 0; c < parts; ++c) {
        const double ln_w = std::clamp(parameters(index(2 * c)), -ln_amplitude_bound, ln_amplitude_bound);
        const double amplitude = std::exp(ln_w);
        const UnitCurve unit = unit_curve(problem, std::log(heights[c]), shift, slopes);
        curve.value += amplitude * unit.value;
        if (!slopes) {
            continue;
        }
        const double free_w = within(2 * c, -ln_amplitude_bound, ln_amplitude_bound);
        const double free_h = within(2 * c + 1, problem.ln_low, problem.ln_high);
        curve.slope.col(index(2 * c)) = free_w * amplitude * unit.value;
        if (c == 0) {
            curve.slope.col(1) = free_h * amplitude * unit.by_ln_h;
        } else {
            // h2 = h1 + difference: both parameters move it.
            const double first_free = within(1, problem.ln_low, problem.ln_high);
            const double by_h = amplitude / heights[c];
            curve.slope.col(1) += (first_free * by_h * heights[0]) * unit.by_ln_h;
            curve.slope.col(3) = (free_h * by_h * (heights[1] - heights[0])) * unit.by_ln_h;
        }
        if (problem.fit_centre) {
            curve.slope.col(centre) -= amplitude * unit.by_z;
        }
    }
    if (problem.fit_background) {
        curve.value.array() += parameters(problem.parameters() - 1);
        if (slopes) {
            curve.slope.col(problem.parameters() - 1).setOnes();
        }
    }
    return curve;
}

} // namespace

Curve curve_at(const Problem& problem, const Eigen::VectorXd& parameters, bool slopes) {
    Curve curve = curve_everywhere(problem, parameters, slopes);
    if (problem.rows.size() < problem.geometry.z.size()) {
        curve.value = curve.value(problem.rows).eval();
        if (slopes) {
            curve.slope = curve.slope(problem.rows, Eigen::all).eval();
        }
    }
    return curve;
}

Eigen::VectorXd full_curve(const Problem& problem, const Eigen::VectorXd& parameters) {
    return curve_everywhere(problem, parameters, false).value;
}

Eigen::MatrixXd whitener(const Eigen::MatrixXd& covariance) {
    constexpr double floor = 1e-7;
    const Eigen::MatrixXd identity = Eigen::MatrixXd::Identity(covariance.rows(), covariance.cols());
    const Eigen::LLT<Eigen::MatrixXd> factor(covariance);
    if (factor.info() == Eigen::Success) {
        const Eigen::MatrixXd lower = factor.matrixL();
        const Eigen::ArrayXd relative = lower.diagonal().array().square() / covariance.diagonal().array();
        if (relative.minCoeff() > floor) {
            return lower.triangularView<Eigen::Lower>().solve(identity);
        }
    }
    const Eigen::SelfAdjointEigenSolver<Eigen::MatrixXd> eigen(covariance);
    const Eigen::VectorXd values = eigen.eigenvalues().cwiseMax(floor * eigen.eigenvalues().maxCoeff());
    return values.cwiseSqrt().cwiseInverse().asDiagonal() * eigen.eigenvectors().transpose();
}

std::vector<Eigen::VectorXd>
starting_points(const Problem& problem, const Eigen::MatrixXd& white, std::size_t count) {
    const std::size_t steps = problem.parts() == 1 ? 20 : 14;
    // The scan stays inside the bounds by a margin.
    const double low = problem.ln_low + 2.5;
    const double high = problem.ln_high - 1.2;
    std::vector<double> ln_h;
    for (std::size_t k = 0; k < steps; ++k) {
        // At nodes of the table, where curves cost nothing more.
        const double even = low + (high - low) * static_cast<double>(k) / static_cast<double>(steps - 1);
        ln_h.push_back(CurveTable::step * std::round(even / CurveTable::step));
    }
    const auto curves = scan_curves(problem, white, ln_h);
    const Eigen::VectorXd data = white * problem.data;
    std::vector<Candidate> candidates;
    for (std::size_t a = 0; a < steps; ++a) {
        if (problem.parts() == 1) {
            candidates.push_back(candidate(problem, white, data, {&curves[a]}, {ln_h[a]}));
            continue;
        }
        for (std::size_t b = a + 1; b < steps; ++b) {
            candidates.push_back(
                candidate(problem, white, data, {&curves[a], &curves[b]}, {ln_h[a], ln_h[b]}));
        }
    }
    std::stable_sort(candidates.begin(), candidates.end(),
                     [](const Candidate& a, const Candidate& b) { return a.chi2 < b.chi2; });
    std::vector<Eigen::VectorXd> starts;
    for (std::size_t k = 0; k < std::min(count, candidates.size()); ++k) {
        starts.push_back(candidates[k].parameters);
    }
    return starts;
}

Solution solve(const Problem& problem, const Eigen::MatrixXd& white, const Eigen::VectorXd& start) {
    Solution solution;
    const auto bins = static_cast<std::size_t>(problem.data.size());
    const auto count = static_cast<std::size_t>(problem.parameters());
    gsl_multifit_nlinear_parameters options = gsl_multifit_nlinear_default_parameters();
    options.scale = gsl_multifit_nlinear_scale_more;
    const std::unique_ptr<gsl_multifit_nlinear_workspace, decltype(&gsl_multifit_nlinear_free)> workspace(
        gsl_multifit_nlinear_alloc(gsl_multifit_nlinear_trust, &options, bins, count),
        gsl_multifit_nlinear_free);
    const std::unique_ptr<gsl_vector, decltype(&gsl_vector_free)> x(gsl_vector_alloc(count), gsl_vector_free);
    if (!workspace || !x) {
        return solution;
    }
    for (std::size_t k = 0; k < count; ++k) {
        gsl_vector_set(x.get(), k, start(index(k)));
    }
    Fitted fitted{&problem, &white};
    gsl_multifit_nlinear_fdf system{};
    system.f = residuals;
    system.df = slopes;
    system.n = bins;
    system.p = count;
    system.params = &fitted;
    if (gsl_multifit_nlinear_init(x.get(), &system, workspace.get()) != GSL_SUCCESS) {
        return solution;
    }
    int info = 0;
    gsl_multifit_nlinear_driver(80, 1e-11, 1e-11, 0, nullptr, nullptr, &info, workspace.get());
    solution.parameters = copy(gsl_multifit_nlinear_position(workspace.get()));
    const Curve curve = curve_at(problem, solution.parameters, true);
    const Eigen::VectorXd residual = white * (curve.value - problem.data);
    const Eigen::MatrixXd jacobian = white * curve.slope;
    solution.chi2 = residual.squaredNorm();
    solution.valid = std::isfinite(solution.chi2) && solution.parameters.allFinite();
    solution.converged = solution.valid && at_minimum(residual, jacobian);
    solution.covariance = covariance_of(jacobian);
    return solution;
}

} // namespace aureole::profiles
