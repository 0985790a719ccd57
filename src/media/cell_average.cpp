#include "aureole/media/cell_average.hpp"

#include "aureole/base/constants.hpp"
#include "aureole/base/error.hpp"
#include "aureole/base/parallel.hpp"
#include "aureole/base/quadrature.hpp"
#include "aureole/scenario/formula.hpp"

#include <fmt/format.h>

#include <algorithm>
#include <cmath>
#include <optional>

namespace aureole::media {

namespace {

using grid::Geometry;
using grid::Grid;
using scenario::ProfileKind;
using scenario::ProfileSpec;

struct Sample {
    double place, weight; // weights sum to the length of the axis
};

/// Gauss-Legendre points on [from, to], which has 0 on its rim or outside, in panels of at most `panel` at
/// the end nearest to 0, each 1.25 times the one before: shapes fall away from 0, so that far panels weigh
/// little.
void add_one_side(double from, double to, double panel, std::vector<Sample>& samples) {
    static const auto rule = gauss_legendre(3);
    constexpr double growth = 1.25;
    std::vector<double> widths;
    double sum = 0;
    for (double width = panel; sum < to - from; width *= growth) {
        widths.push_back(width);
        sum += width;
    }
    const bool falling = from >= 0;
    const double shrink = (to - from) / sum;
    double place = falling ? from : to;
    for (const double width : widths) {
        const double half = 0.5 * shrink * width * (falling ? 1 : -1);
        for (std::size_t q = 0; q < rule.node.size(); ++q) {
            samples.push_back({place + half * (1 + rule.node[q]), std::abs(half) * rule.weight[q]});
        }
        place += 2 * half;
    }
}

/// The same with a break at 0.
std::vector<Sample> axis_samples(double from, double to, double panel) {
    std::vector<Sample> samples;
    if (from < 0 && to > 0) {
        add_one_side(from, 0, panel, samples);
        add_one_side(0, to, panel, samples);
    } else {
        add_one_side(from, to, panel, samples);
    }
    return samples;
}

/// Average of f(x, y, z) over a cell from samples of its axes; on an RZ grid x counts R and is weighted by
/// it.
template <class F>
double average(const F& f,
               Geometry geometry,
               const std::vector<Sample>& xs,
               const std::vector<Sample>& ys,
               const std::vector<Sample>& zs) {
    double sum = 0;
    double volume = 0;
    for (const Sample& z : zs) {
        for (const Sample& y : ys) {
            for (const Sample& x : xs) {
                const double weight =
                    z.weight * y.weight * x.weight * (geometry == Geometry::rz ? x.place : 1.0);
                sum += weight * f(x.place, y.place, z.place);
                volume += weight;
            }
        }
    }
    return sum / volume;
}

struct Scales {
    double radial, vertical;
};

Scales scales_of(const ProfileSpec& profile) {
    constexpr double everywhere = 1e30;
    switch (profile.kind) {
    case ProfileKind::double_exponential:
    case ProfileKind::sech2:
    case ProfileKind::gaussian:
        return {profile.radius, profile.height};
    case ProfileKind::beta: {
        const double scale = profile.core / std::max(1.0, 1.5 * profile.slope);
        return {scale, scale};
    }
    case ProfileKind::power_law: {
        const double scale = profile.core / std::max(1.0, profile.slope);
        return {scale, scale};
    }
    default:
        return {everywhere, everywhere};
    }
}

const std::vector<Sample> one_sample{{0.0, 1.0}};

template <class F>
std::vector<double> plane_averages(
    const F& f, const Grid& grid, std::size_t first_plane, std::size_t last_plane, const Scales& scales) {
    const bool rz = grid.geometry == Geometry::rz;
    std::vector<std::vector<Sample>> xs;
    std::vector<std::vector<Sample>> ys;
    for (std::size_t i = 0; i < grid.nx(); ++i) {
        xs.push_back(axis_samples(grid.x[i], grid.x[i + 1], 0.5 * scales.radial));
    }
    for (std::size_t j = 0; j < grid.ny(); ++j) {
        ys.push_back(rz ? one_sample : axis_samples(grid.y[j], grid.y[j + 1], 0.5 * scales.radial));
    }
    std::vector<double> result;
    result.reserve((last_plane - first_plane) * grid.plane_cells());
    for (std::size_t k = first_plane; k < last_plane; ++k) {
        const auto zs = axis_samples(grid.z[k], grid.z[k + 1], 0.5 * scales.vertical);
        for (std::size_t j = 0; j < grid.ny(); ++j) {
            for (std::size_t i = 0; i < grid.nx(); ++i) {
                result.push_back(average(f, grid.geometry, xs[i], ys[j], zs));
            }
        }
    }
    return result;
}

/// Average of a formula over one box, halved where 2 and 3 points per axis disagree.
template <class F>
double refined_average(const F& f,
                       Geometry geometry,
                       const std::array<double, 2>& x,
                       const std::array<double, 2>& y,
                       const std::array<double, 2>& z,
                       int depth) {
    static const auto two = gauss_legendre(2);
    const auto with_two = [](const std::array<double, 2>& ends) {
        std::vector<Sample> samples;
        const double half = 0.5 * (ends[1] - ends[0]);
        for (std::size_t q = 0; q < 2; ++q) {
            samples.push_back({0.5 * (ends[0] + ends[1]) + half * two.node[q], half * two.weight[q]});
        }
        return samples;
    };
    const bool rz = geometry == Geometry::rz;
    const auto ys3 = rz ? one_sample : axis_samples(y[0], y[1], 1e30);
    const auto ys2 = rz ? one_sample : with_two(y);
    const double fine =
        average(f, geometry, axis_samples(x[0], x[1], 1e30), ys3, axis_samples(z[0], z[1], 1e30));
    const double coarse = average(f, geometry, with_two(x), ys2, with_two(z));
    if (depth == 0 || std::abs(fine - coarse) <= 1e-4 * std::abs(fine)) {
        return fine;
    }
    const double mx = 0.5 * (x[0] + x[1]);
    const double my = 0.5 * (y[0] + y[1]);
    const double mz = 0.5 * (z[0] + z[1]);
    double sum = 0;
    double volume = 0;
    for (int c = 0; c < (rz ? 4 : 8); ++c) {
        const std::array<double, 2> cx = (c & 1) != 0 ? std::array{mx, x[1]} : std::array{x[0], mx};
        const std::array<double, 2> cz = (c & 2) != 0 ? std::array{mz, z[1]} : std::array{z[0], mz};
        const std::array<double, 2> cy = rz ? y : (c & 4) != 0 ? std::array{my, y[1]} : std::array{y[0], my};
        const double part = rz ? cx[1] * cx[1] - cx[0] * cx[0] : 1.0;
        sum += part * refined_average(f, geometry, cx, cy, cz, depth - 1);
        volume += part;
    }
    return sum / volume;
}

std::vector<double> formula_averages(const ProfileSpec& profile,
                                     const Grid& grid,
                                     std::size_t first_plane,
                                     std::size_t last_plane,
                                     bool allow_negative) {
    const std::vector<std::string> names{"R", "z", "x", "y", "r"};
    scenario::Formula formula(profile.formula, names);
    const auto f = [&](double x, double y, double z) {
        const double kpc = 1 / constants::kiloparsec;
        const double radius = std::hypot(x, y);
        const std::array<double, 5> at{radius * kpc, z * kpc, x * kpc, y * kpc, std::hypot(radius, z) * kpc};
        const double value = formula.eval(at);
        if (!std::isfinite(value) || (value < 0 && !allow_negative)) {
            throw Error(
                ErrorKind::scenario,
                fmt::format(
                    "formula \"{}\": found {} at x = {:.4g}, y = {:.4g}, z = {:.4g} kpc, expected a finite "
                    "value{}",
                    profile.formula, value, at[2], at[3], at[1],
                    allow_negative ? "" : " that is not negative"))
                .in(profile.key);
        }
        return value;
    };
    constexpr int deepest = 4;
    std::vector<double> result;
    for (std::size_t k = first_plane; k < last_plane; ++k) {
        for (std::size_t j = 0; j < grid.ny(); ++j) {
            for (std::size_t i = 0; i < grid.nx(); ++i) {
                const std::array<double, 2> y = grid.geometry == Geometry::rz
                                                    ? std::array{0.0, 0.0}
                                                    : std::array{grid.y[j], grid.y[j + 1]};
                result.push_back(refined_average(f, grid.geometry, {grid.x[i], grid.x[i + 1]}, y,
                                                 {grid.z[k], grid.z[k + 1]}, deepest));
            }
        }
    }
    return result;
}

} // namespace

double profile_shape(const ProfileSpec& profile, double radius, double height) {
    const double scale_height =
        profile.flare > 0 ? profile.height * std::exp(radius / profile.flare) : profile.height;
    const double away = std::abs(height);
    switch (profile.kind) {
    case ProfileKind::none:
        return 0;
    case ProfileKind::double_exponential:
        return std::exp(-radius / profile.radius - away / scale_height);
    case ProfileKind::sech2: {
        const double e = std::exp(-2 * away / scale_height); // sech^2 u = 4 e^-2u / (1 + e^-2u)^2
        return std::exp(-radius / profile.radius) * 4 * e / ((1 + e) * (1 + e));
    }
    case ProfileKind::gaussian: {
        const double a = radius / profile.radius;
        const double b = away / scale_height;
        return std::exp(-a * a - b * b);
    }
    case ProfileKind::beta: {
        const double r2 = (radius * radius + height * height) / (profile.core * profile.core);
        return std::pow(1 + r2, -1.5 * profile.slope);
    }
    case ProfileKind::power_law:
        return std::pow(1 + std::hypot(radius, height) / profile.core, -profile.slope);
    default:
        return 1;
    }
}

std::vector<double> cell_averages(const ProfileSpec& profile,
                                  const Grid& grid,
                                  std::size_t first_plane,
                                  std::size_t last_plane,
                                  bool allow_negative) {
    if (profile.kind == ProfileKind::constant || profile.kind == ProfileKind::none) {
        const double value = profile.kind == ProfileKind::constant ? profile.value : 0;
        return std::vector<double>((last_plane - first_plane) * grid.plane_cells(), value);
    }
    std::vector<double> result;
    if (profile.kind == ProfileKind::file) {
        throw Error(ErrorKind::scenario,
                    fmt::format("{}.profile: found \"file\", but no HDU holds it; expected a "
                                "shape or a formula",
                                profile.key));
    }
    if (profile.kind == ProfileKind::formula) {
        result = formula_averages(profile, grid, first_plane, last_plane, allow_negative);
    } else {
        const auto shape = [&](double x, double y, double z) {
            return profile_shape(profile, std::hypot(x, y), z);
        };
        result = plane_averages(shape, grid, first_plane, last_plane, scales_of(profile));
    }
    for (double& value : result) {
        value *= profile.value;
    }
    return result;
}

std::optional<AverageFactors> average_factors(const ProfileSpec& profile, const Grid& grid) {
    const bool separable = profile.kind == ProfileKind::double_exponential ||
                           profile.kind == ProfileKind::sech2 || profile.kind == ProfileKind::gaussian;
    if (!separable || profile.flare > 0) {
        return std::nullopt;
    }
    const bool rz = grid.geometry == Geometry::rz;
    const Scales scales = scales_of(profile);
    AverageFactors factors;
    const auto radial = [&](double x, double y, double) {
        return profile_shape(profile, std::hypot(x, y), 0);
    };
    for (std::size_t j = 0; j < grid.ny(); ++j) {
        const auto ys = rz ? one_sample : axis_samples(grid.y[j], grid.y[j + 1], 0.5 * scales.radial);
        for (std::size_t i = 0; i < grid.nx(); ++i) {
            const auto xs = axis_samples(grid.x[i], grid.x[i + 1], 0.5 * scales.radial);
            factors.across.push_back(profile.value * average(radial, grid.geometry, xs, ys, one_sample));
        }
    }
    const auto vertical = [&](double, double, double z) { return profile_shape(profile, 0, z); };
    for (std::size_t k = 0; k < grid.nz(); ++k) {
        const auto zs = axis_samples(grid.z[k], grid.z[k + 1], 0.5 * scales.vertical);
        factors.along.push_back(average(vertical, Geometry::xyz, one_sample, one_sample, zs));
    }
    return factors;
}

std::vector<float>
cell_averages(const ProfileSpec& profile, const Grid& grid, bool allow_negative, const RunContext& context) {
    std::vector<float> result(grid.stored_cells());
    if (const auto factors = average_factors(profile, grid)) {
        for (std::size_t cell = 0; cell < result.size(); ++cell) {
            result[cell] = static_cast<float>(factors->across[cell % grid.plane_cells()] *
                                              factors->along[cell / grid.plane_cells()]);
        }
        return result;
    }
    for_each_block(context, grid.nz(), [&](std::size_t plane) {
        const auto values = cell_averages(profile, grid, plane, plane + 1, allow_negative);
        std::transform(values.begin(), values.end(),
                       result.begin() + static_cast<std::ptrdiff_t>(plane * grid.plane_cells()),
                       [](double value) { return static_cast<float>(value); });
    });
    return result;
}

} // namespace aureole::media
