#include "aureole/profiles/fit.hpp"

#include "refit.hpp"
#include "whitened.hpp"

#include <Eigen/Eigenvalues>
#include <fmt/format.h>
#include <gsl/gsl_errno.h>

#include <algorithm>
#include <cmath>
#include <numbers>

namespace aureole::profiles {

namespace {

constexpr double nothing = std::numeric_limits<double>::quiet_NaN();

Eigen::Index index(std::size_t i) {
    return static_cast<Eigen::Index>(i);
}

std::vector<std::size_t> fitted_bins(const Profile& profile, const FitSpec& spec) {
    std::vector<std::size_t> bins;
    for (std::size_t b = 0; b < profile.height.size(); ++b) {
        const double z = profile.height[b];
        const bool side = spec.side == Side::both || (spec.side == Side::above ? z > 0 : z < 0);
        const double tolerance = 1e-9 * std::abs(z);
        if (side && std::abs(z) >= spec.least_height - tolerance &&
            std::abs(z) <= spec.greatest_height + tolerance && std::isfinite(profile.mean[b])) {
            bins.push_back(b);
        }
    }
    return bins;
}

Problem
problem_of(const Profile& profile, Model model, const FitSpec& spec, const std::vector<std::size_t>& bins) {
    Problem problem;
    problem.model = model;
    problem.fit_centre = spec.fit_centre && spec.side == Side::both;
    problem.fit_background = spec.fit_background;
    double far = 0;
    double thin = std::numeric_limits<double>::infinity();
    double peak = 0;
    for (const std::size_t b : bins) {
        far = std::max(far, std::abs(profile.height[b]));
        thin = std::min(thin, profile.high[b] - profile.low[b]);
        peak = std::max(peak, std::abs(profile.mean[b]));
    }
    problem.length = far > 0 ? far : 1;
    problem.peak = peak > 0 ? peak : 1;
    BinGeometry& geometry = problem.geometry;
    geometry.beam = profile.beam_y / problem.length;
    // e-folds over a hundredth of a bin or beam, or a hundred times the range, leave no trace in the data.
    geometry.least = 0.01 * std::max(geometry.beam, std::min(thin / problem.length, 1.0));
    problem.ln_low = std::log(geometry.least);
    problem.ln_high = std::log(100.0);
    problem.data.resize(index(bins.size()));
    problem.covariance.resize(index(bins.size()), index(bins.size()));
    for (std::size_t a = 0; a < bins.size(); ++a) {
        problem.rows.push_back(index(bins[a]));
        problem.data(index(a)) = profile.mean[bins[a]] / problem.peak;
        for (std::size_t b = 0; b < bins.size(); ++b) {
            problem.covariance(index(a), index(b)) =
                profile.covariance(index(bins[a]), index(bins[b])) / (problem.peak * problem.peak);
        }
    }
    for (std::size_t b = 0; b < profile.height.size(); ++b) {
        geometry.z.push_back(profile.height[b] / problem.length);
        geometry.width.push_back(profile.width[b] / problem.length);
    }
    if (spec.disc) {
        geometry.disc = *spec.disc;
        for (double& offset : geometry.disc.offset) {
            offset /= problem.length;
        }
    }
    return problem;
}

double independent_bins(const Eigen::MatrixXd& covariance) {
    const Eigen::VectorXd scale = covariance.diagonal().cwiseSqrt().cwiseInverse();
    const Eigen::MatrixXd correlation = scale.asDiagonal() * covariance * scale.asDiagonal();
    return correlation.trace() * correlation.trace() / correlation.squaredNorm();
}

double corrected_criterion(double chi2, std::size_t parameters, double independent) {
    const auto k = static_cast<double>(parameters);
    const double room = independent - k - 1;
    return room > 0 ? chi2 + 2 * k + 2 * k * (k + 1) / room : std::numeric_limits<double>::infinity();
}

Solution best_solution(const Problem& problem, const Eigen::MatrixXd& white) {
    // One height: one peak in the scan, so a second start that meets the first settles it. Two: a third.
    const int enough = problem.parts() == 1 ? 2 : 3;
    Solution best;
    int agreeing = 0;
    for (const Eigen::VectorXd& start : starting_points(problem, white, 8)) {
        const Solution solution = solve(problem, white, start);
        const double tolerance = 1e-8 * (1 + best.chi2);
        const bool meets =
            best.converged && solution.converged && std::abs(solution.chi2 - best.chi2) <= tolerance;
        const bool lower = solution.valid && (!best.valid || solution.chi2 < best.chi2);
        if (meets) {
            agreeing += 1;
        } else if (lower) {
            agreeing = solution.converged ? 1 : 0;
        }
        if (lower) {
            best = solution;
        }
        if (agreeing >= enough) {
            break;
        }
    }
    return best;
}

/// Parameters of an earlier fit in the units of the problem.
Eigen::VectorXd start_from(const HeightResult& earlier, const Problem& problem) {
    Eigen::VectorXd start = Eigen::VectorXd::Zero(problem.parameters());
    double below = 0;
    for (std::size_t c = 0; c < problem.parts(); ++c) {
        const Component& part = earlier.component[c];
        start(index(2 * c)) = std::log(part.amplitude / problem.peak);
        start(index(2 * c + 1)) = std::log(part.h / problem.length - below);
        below = part.h / problem.length;
    }
    if (problem.fit_centre) {
        start(index(2 * problem.parts())) = earlier.centre / problem.length;
    }
    if (problem.fit_background) {
        start(problem.parameters() - 1) = earlier.background / problem.peak;
    }
    return start;
}

/// The fit from an earlier one's parameters; not converged where that one is of no use.
Solution solution_near(const Problem& problem, const Eigen::MatrixXd& white, const HeightResult& earlier) {
    if (!usable(earlier.status) || earlier.component.size() != problem.parts()) {
        return {};
    }
    const Eigen::VectorXd start = start_from(earlier, problem);
    return start.allFinite() ? solve(problem, white, start) : Solution{};
}

/// d h_c / d parameters, for errors of the heights.
Eigen::VectorXd height_slope(const Problem& problem, const std::vector<double>& heights, std::size_t c) {
    Eigen::VectorXd slope = Eigen::VectorXd::Zero(problem.parameters());
    slope(1) = heights[0];
    if (c == 1) {
        slope(3) = heights[1] - heights[0];
    }
    return slope;
}

double height_error(const Problem& problem, const Solution& solution, std::size_t c) {
    if (!solution.covariance.allFinite()) {
        return std::numeric_limits<double>::infinity();
    }
    const auto heights = heights_of(problem, solution.parameters);
    const Eigen::VectorXd slope = height_slope(problem, heights, c);
    return std::sqrt(std::max(0.0, slope.dot(solution.covariance * slope))) * problem.length;
}

/// x.(1 + s T)^-1.x for a symmetric positive semidefinite tridiagonal matrix T, by elimination.
double tridiagonal_form(const Eigen::VectorXd& diagonal,
                        const Eigen::VectorXd& beside,
                        double s,
                        const Eigen::VectorXd& x) {
    double pivot = 1 + s * diagonal(0);
    double reduced = x(0);
    double sum = reduced * reduced / pivot;
    for (Eigen::Index k = 1; k < x.size(); ++k) {
        const double factor = s * beside(k - 1) / pivot;
        pivot = 1 + s * diagonal(k) - factor * s * beside(k - 1);
        reduced = x(k) - factor * reduced;
        sum += reduced * reduced / pivot;
    }
    return sum;
}

/// Scatter, as a fraction of the model, that makes the residuals of the fixed curve as large as expected:
/// r.(C + f^2 D)^-1.r = dof with D = diag(curve^2). With white.C.white^T = 1 and white.D.white^T brought to
/// tridiagonal form once, every f tried costs one elimination.
double
scatter_for(const Problem& problem, const Eigen::MatrixXd& white, const Eigen::VectorXd& curve, double dof) {
    const Eigen::MatrixXd scaled = white * curve.cwiseAbs().asDiagonal();
    const Eigen::Tridiagonalization<Eigen::MatrixXd> form(scaled * scaled.transpose());
    const Eigen::VectorXd diagonal = form.diagonal();
    const Eigen::VectorXd beside = form.subDiagonal();
    const Eigen::VectorXd residual = form.matrixQ().transpose() * (white * (curve - problem.data)).eval();
    const auto excess = [&](double ln_fraction) {
        return tridiagonal_form(diagonal, beside, std::exp(2 * ln_fraction), residual) - dof;
    };
    double low = -14;
    double high = 2;
    if (excess(low) <= 0) {
        return 0;
    }
    for (int round = 0; round < 30; ++round) {
        const double middle = 0.5 * (low + high);
        (excess(middle) > 0 ? low : high) = middle;
    }
    return std::exp(high);
}

struct Scattered {
    Solution solution;
    double fraction = 0;
};

/// Fit with fractional scatter in the weights; weights and curve settle in a few rounds.
Scattered
with_scatter(const Problem& problem, const Eigen::MatrixXd& white, const Solution& first, double dof) {
    Scattered result{first, 0};
    for (int round = 0; round < 4; ++round) {
        const double before = result.fraction;
        const Eigen::VectorXd curve = curve_at(problem, result.solution.parameters, false).value;
        result.fraction = scatter_for(problem, white, curve, dof);
        if (result.fraction == 0 || std::abs(result.fraction - before) < 1e-6 * before) {
            return result;
        }
        Eigen::MatrixXd covariance = problem.covariance;
        covariance.diagonal() += result.fraction * result.fraction * curve.cwiseAbs2();
        const Solution next = solve(problem, whitener(covariance), result.solution.parameters);
        if (!next.converged) {
            return result;
        }
        result.solution = next;
    }
    return result;
}

HeightResult blank_result(const Profile& profile, Model model, const FitSpec& spec) {
    HeightResult result;
    result.model = model;
    result.forward = spec.disc.has_value();
    result.side = spec.side;
    result.component.assign(components(model),
                            Component{nothing, nothing, nothing, nothing, nothing, nothing, nothing, {}, {}});
    result.centre = result.background = result.chi2 = nothing;
    result.aicc = std::numeric_limits<double>::infinity();
    result.curve.assign(profile.height.size(), nothing);
    return result;
}

HeightResult failed(HeightResult result, Status status, std::string problem) {
    result.status = status;
    result.problem = std::move(problem);
    return result;
}

void set_status(HeightResult& result,
                const Problem& problem,
                const Solution& solution,
                const Profile& profile) {
    const double half_beam = profile.beam_y * std::sqrt(2 * std::numbers::ln2);
    const auto heights = heights_of(problem, solution.parameters);
    result.status = Status::ok;
    if (!solution.converged) {
        result.status = Status::not_converged;
        result.problem = "the fit did not settle";
        return;
    }
    double total = 0;
    for (std::size_t c = 0; c < heights.size(); ++c) {
        total += std::exp(solution.parameters(index(2 * c))) * heights[c];
    }
    for (std::size_t c = 0; c < heights.size(); ++c) {
        const double ln_h = solution.parameters(index(2 * c + 1));
        const double share = std::exp(solution.parameters(index(2 * c))) * heights[c] / total;
        if (ln_h > problem.ln_high - 0.1 || (c == 1 && ln_h < problem.ln_low + 0.1) || !(share > 1e-6)) {
            result.status = Status::at_bound;
            result.problem = share > 1e-6
                                 ? "a scale height ran to the limit of what the range of heights can tell"
                                 : "a component holds no flux";
            return;
        }
    }
    Component& thin = result.component.front();
    const bool low = solution.parameters(1) < problem.ln_low + 0.1;
    const bool vague = !(thin.h_err_noise < 0.5 * thin.h);
    if ((low || vague) && thin.h < half_beam) {
        result.status = Status::unresolved;
        result.problem = "the thin component is not resolved by the beam";
        thin.upper_limit = half_beam;
        if (low) {
            thin.h_err_noise = thin.h_err_scatter = half_beam;
        }
    }
    if ((low && !thin.upper_limit) || !std::isfinite(result.halo().h_err_noise)) {
        result.status = Status::at_bound;
        result.problem = low ? "a scale height ran to the limit of what the bins can tell"
                             : "the profile does not fix all parameters";
    }
}

} // namespace

std::string to_string(Side side) {
    switch (side) {
    case Side::both:
        return "both";
    case Side::above:
        return "above";
    case Side::below:
        break;
    }
    return "below";
}

std::string to_string(Status status) {
    switch (status) {
    case Status::ok:
        return "ok";
    case Status::unresolved:
        return "unresolved";
    case Status::at_bound:
        return "at bound";
    case Status::not_converged:
        return "not converged";
    case Status::too_few_bins:
        return "too few bins";
    case Status::no_signal:
        return "no signal";
    case Status::too_inclined:
        break;
    }
    return "too inclined";
}

bool usable(Status status) {
    return status == Status::ok || status == Status::unresolved;
}

HeightResult fit_height(const Profile& profile, Model model, const FitSpec& spec) {
    CurveCache cache;
    return fit_height(profile, model, spec, cache, nullptr);
}

HeightResult fit_height(
    const Profile& profile, Model model, const FitSpec& spec, CurveCache& cache, const HeightResult* start) {
    gsl_set_error_handler_off();
    HeightResult result = blank_result(profile, model, spec);
    const auto bins = fitted_bins(profile, spec);
    Problem problem = problem_of(profile, model, spec, bins);
    result.bins = bins.size();
    result.parameters = static_cast<std::size_t>(problem.parameters());
    result.dof = static_cast<double>(result.bins) - static_cast<double>(result.parameters);
    if (result.bins <= result.parameters) {
        return failed(std::move(result), Status::too_few_bins,
                      fmt::format("{} bins for {} parameters", bins.size(), problem.parameters()));
    }
    if (!(problem.data.sum() > 0) || !(problem.covariance.diagonal().minCoeff() > 0) ||
        !problem.covariance.allFinite()) {
        return failed(std::move(result), Status::no_signal,
                      "nothing positive to fit, or no errors to fit with");
    }
    const Eigen::MatrixXd white = whitener(problem.covariance);
    if (!problem.fit_centre) {
        problem.table = &cache.table(model, problem.geometry);
    }
    Solution solution = start != nullptr ? solution_near(problem, white, *start) : Solution{};
    const bool followed = solution.converged;
    if (!followed) {
        solution = best_solution(problem, white);
    }
    if (!solution.valid) {
        return failed(std::move(result), Status::not_converged, "no start led to a fit");
    }
    result.chi2 = solution.chi2;
    result.independent = independent_bins(problem.covariance);
    result.aicc = corrected_criterion(result.chi2, result.parameters, result.independent);
    Scattered scattered{solution, 0};
    if (profile.errors == ErrorSource::noiseless) {
        // The weights of a noiseless profile have no scale of their own: the residuals give it.
        solution.covariance *= solution.chi2 / result.dof;
        scattered.solution = solution;
    } else if (!followed && solution.converged && solution.chi2 > result.dof) {
        scattered = with_scatter(problem, white, solution, result.dof);
    }
    result.fractional_scatter = scattered.fraction;
    const auto heights = heights_of(problem, solution.parameters);
    const auto scattered_heights = heights_of(problem, scattered.solution.parameters);
    for (std::size_t c = 0; c < problem.parts(); ++c) {
        Component& part = result.component[c];
        part.amplitude = problem.peak * std::exp(solution.parameters(index(2 * c)));
        const double relative = std::sqrt(std::max(0.0, solution.covariance(index(2 * c), index(2 * c))));
        part.amplitude_error = part.amplitude * std::hypot(relative, spec.calibration_error);
        part.h = heights[c] * problem.length;
        part.h_err_noise = height_error(problem, solution, c);
        part.h_err_scatter = std::max(part.h_err_noise, height_error(problem, scattered.solution, c));
        part.h_with_scatter = scattered_heights[c] * problem.length;
        part.h_err_distance = part.h * spec.distance_fraction;
    }
    const Eigen::Index after = index(2 * problem.parts());
    result.centre = problem.fit_centre ? solution.parameters(after) * problem.length : 0;
    result.background =
        problem.fit_background ? solution.parameters(problem.parameters() - 1) * problem.peak : 0;
    Eigen::VectorXd unit = Eigen::VectorXd::Ones(problem.parameters());
    if (problem.fit_centre) {
        unit(after) = problem.length;
    }
    if (problem.fit_background) {
        unit(problem.parameters() - 1) = problem.peak;
    }
    result.covariance = unit.asDiagonal() * solution.covariance * unit.asDiagonal();
    const Eigen::VectorXd curve = full_curve(problem, solution.parameters);
    for (std::size_t b = 0; b < result.curve.size(); ++b) {
        result.curve[b] = curve(index(b)) * problem.peak;
    }
    set_status(result, problem, solution, profile);
    return result;
}

} // namespace aureole::profiles
