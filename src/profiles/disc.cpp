#include "aureole/profiles/disc.hpp"

#include "aureole/base/error.hpp"
#include "aureole/base/quadrature.hpp"
#include "aureole/profiles/profile.hpp"

#include <fmt/format.h>
#include <gsl/gsl_errno.h>
#include <gsl/gsl_sf_bessel.h>

#include <algorithm>
#include <cmath>
#include <limits>
#include <numbers>

namespace aureole::profiles {

namespace {

constexpr double boundless = std::numeric_limits<double>::infinity();

double above(double x, double s) {
    if (s > 0) {
        return 0.5 * std::erfc(-x / (std::numbers::sqrt2 * s));
    }
    return x > 0 ? 1 : (x < 0 ? 0 : 0.5);
}

/// Nodes and weights of the mean over the strip [low, high] blurred with a Gaussian of width s, |X| <= limit.
WeightedPoints strip_points(double low, double high, double s, double scale, double limit) {
    std::vector<double> edges{low - 6 * s,  low, low + 6 * s, high - 6 * s, high,
                              high + 6 * s, 0,   -limit,      limit};
    for (const double part : {0.003, 0.03, 0.1, 0.3, 1.0, 2.0, 4.0, 8.0, 16.0}) {
        edges.push_back(part * scale);
        edges.push_back(-part * scale);
    }
    const double first = std::max(low - 6 * s, -limit);
    const double last = std::min(high + 6 * s, limit);
    std::erase_if(edges, [&](double edge) { return !(edge >= first && edge <= last); });
    std::sort(edges.begin(), edges.end());
    edges.erase(std::unique(edges.begin(), edges.end()), edges.end());
    WeightedPoints points = composite_points(gauss_legendre(6), edges);
    for (std::size_t k = 0; k < points.x.size(); ++k) {
        points.w[k] *= (above(high - points.x[k], s) - above(low - points.x[k], s)) / (high - low);
    }
    return points;
}

/// Strip mean of the thin disc at y' behind or before the major axis.
double strip_mean(double y, double low, double high, double s, double scale, double edge) {
    if (!(std::abs(y) < edge)) {
        return 0;
    }
    const double limit = std::isfinite(edge) ? std::sqrt(edge * edge - y * y) : boundless;
    const WeightedPoints points = strip_points(low, high, s, scale, limit);
    double sum = 0;
    for (std::size_t k = 0; k < points.x.size(); ++k) {
        sum += points.w[k] * std::exp(-std::hypot(points.x[k], y) / scale);
    }
    return sum;
}

/// Panel edges on [0, end]: at most `step` long up to `inner`, growing by half beyond.
std::vector<double> graded_edges(double end, double inner, double step) {
    std::vector<double> edges{0};
    double length = step;
    while (edges.back() < end) {
        if (edges.back() > inner) {
            length *= 1.5;
        }
        edges.push_back(std::min(end, edges.back() + length));
    }
    return edges;
}

/// integral exp(-sqrt(X^2 + y^2)/hR) dy over the disc.
double column(double x, double scale, double edge) {
    const double u = std::abs(x) / scale;
    if (std::isfinite(edge)) {
        if (!(std::abs(x) < edge)) {
            return 0;
        }
        const double end = std::sqrt(edge * edge - x * x);
        static const QuadratureRule rule = gauss_legendre(6);
        const auto edges = graded_edges(end, 2 * scale, 0.4 * scale);
        return 2 * integrate_pieces(
                       rule, [&](double y) { return std::exp(-std::hypot(x, y) / scale); }, edges);
    }
    if (u < 1e-8) {
        return 2 * scale;
    }
    gsl_sf_result scaled;
    if (u > 600 || gsl_sf_bessel_K1_scaled_e(u, &scaled) != GSL_SUCCESS) {
        return 0;
    }
    return 2 * std::abs(x) * scaled.val * std::exp(-u);
}

struct Columns {
    std::vector<double> low, high, flux;
    double beam = 0;
};

/// Sum of squares about the best amplitude for one scale length.
double misfit(const Columns& columns, double scale, double edge) {
    double model2 = 0;
    double cross = 0;
    double data2 = 0;
    for (std::size_t k = 0; k < columns.flux.size(); ++k) {
        const WeightedPoints points =
            strip_points(columns.low[k], columns.high[k], columns.beam, scale, edge);
        double model = 0;
        for (std::size_t p = 0; p < points.x.size(); ++p) {
            model += points.w[p] * column(points.x[p], scale, edge);
        }
        model2 += model * model;
        cross += model * columns.flux[k];
        data2 += columns.flux[k] * columns.flux[k];
    }
    return cross > 0 ? data2 - cross * cross / model2 : data2;
}

Columns measure_columns(const maps::Image& image, const ProfileSpec& spec) {
    ProfileSpec across = spec;
    const double width = static_cast<double>(spec.strips) * spec.strip_width;
    across.strips = static_cast<std::size_t>(std::max(1.0, std::floor(width / spec.bin_height)));
    across.strip_width = width / static_cast<double>(across.strips);
    across.bin_height = across.half_range = spec.half_range;
    across.noise = NoiseFrom::scatter;
    Columns columns;
    for (const Profile& profile : measure(image, across)) {
        if (profile.strip >= 0 && profile.mean.size() == 2) {
            columns.low.push_back(profile.x_low);
            columns.high.push_back(profile.x_high);
            columns.flux.push_back(profile.flux);
            columns.beam = profile.beam_x;
        }
    }
    return columns;
}

} // namespace

DiscKernel disc_kernel(double inclination,
                       double scale_length,
                       std::optional<double> edge_radius,
                       double x_low,
                       double x_high,
                       double beam_x,
                       double finest) {
    const double tilt = std::min(inclination, std::numbers::pi - inclination);
    if (!(tilt >= 0.1)) {
        throw Error(
            ErrorKind::scenario,
            fmt::format("inclination {} rad is closer than 0.1 rad to face-on: no heights can be seen",
                        inclination));
    }
    if (!(scale_length > 0) || !(x_high > x_low) || !(finest > 0) || (edge_radius && !(*edge_radius > 0))) {
        throw Error(ErrorKind::scenario,
                    fmt::format("disc: scale length {} cm, strip {} to {} cm: expected positive lengths",
                                scale_length, x_low, x_high));
    }
    DiscKernel kernel;
    kernel.sin_inclination = std::sin(tilt);
    const double cosine = std::cos(tilt);
    if (cosine < 1e-6) {
        kernel.sin_inclination = 1;
        return kernel;
    }
    const double edge = edge_radius.value_or(boundless);
    const double end = std::min(edge, 20 * scale_length);
    const double step = std::min({finest / cosine, 0.4 * scale_length, end});
    const auto points =
        composite_points(gauss_legendre(4), graded_edges(end, 4 * scale_length, std::max(step, 1e-4 * end)));
    double total = 0;
    for (std::size_t k = 0; k < points.x.size(); ++k) {
        const double weight =
            points.w[k] * strip_mean(points.x[k], x_low, x_high, beam_x, scale_length, edge);
        for (const double sign : {-1.0, 1.0}) {
            kernel.offset.push_back(sign * points.x[k] * cosine);
            kernel.weight.push_back(weight);
            total += weight;
        }
    }
    if (!(total > 0)) {
        throw Error(ErrorKind::scenario,
                    fmt::format("the strip from {} to {} cm lies outside the disc", x_low, x_high));
    }
    for (double& weight : kernel.weight) {
        weight /= total;
    }
    return kernel;
}

ScaleLength
fit_scale_length(const maps::Image& image, const ProfileSpec& spec, std::optional<double> edge_radius) {
    ScaleLength fit;
    const Columns columns = measure_columns(image, spec);
    if (columns.flux.size() < 4) {
        fit.problem =
            fmt::format("found {} columns along the major axis, expected 4 or more", columns.flux.size());
        return fit;
    }
    const double edge = edge_radius.value_or(boundless);
    const double reach = columns.high.back() - columns.low.front();
    const auto at = [&](double ln_scale) { return misfit(columns, reach * std::exp(ln_scale), edge); };
    // A coarse scan, then golden sections about its lowest point.
    constexpr int steps = 32;
    const double low = std::log(0.01);
    const double step = (std::log(10.0) - low) / steps;
    int best = 0;
    double least = boundless;
    for (int k = 0; k <= steps; ++k) {
        const double value = at(low + k * step);
        if (value < least) {
            least = value;
            best = k;
        }
    }
    if (best == 0 || best == steps) {
        fit.problem = "the fluxes along the major axis do not fall like an exponential disc";
        return fit;
    }
    double a = low + (best - 1) * step;
    double b = low + (best + 1) * step;
    constexpr double golden = 0.6180339887498949;
    for (int round = 0; round < 50 && b - a > 1e-8; ++round) {
        const double left = b - golden * (b - a);
        const double right = a + golden * (b - a);
        if (at(left) < at(right)) {
            b = right;
        } else {
            a = left;
        }
    }
    const double middle = 0.5 * (a + b);
    fit.length = reach * std::exp(middle);
    const double width = 0.02;
    const double curvature = (at(middle + width) - 2 * at(middle) + at(middle - width)) / (width * width);
    const double variance = at(middle) / static_cast<double>(columns.flux.size() - 2);
    fit.error = curvature > 0 ? fit.length * std::sqrt(2 * std::max(0.0, variance) / curvature) : fit.length;
    return fit;
}

} // namespace aureole::profiles
