#include "aureole/profiles/models.hpp"

#include "aureole/base/error.hpp"
#include "aureole/base/quadrature.hpp"

#include <fmt/format.h>
#include <gsl/gsl_errno.h>
#include <gsl/gsl_sf_erf.h>

#include <array>
#include <cmath>
#include <numbers>
#include <utility>

namespace aureole::profiles {

namespace {

constexpr double root2 = std::numbers::sqrt2;

constexpr std::array<std::pair<Model, std::string_view>, 5> model_names{
    {{Model::exponential, "exponential"},
     {Model::gaussian, "gaussian"},
     {Model::sech2, "sech2"},
     {Model::two_exponential, "two_exponential"},
     {Model::two_gaussian, "two_gaussian"}}};

/// exp(v^2) erfc(v) for v >= 0.
double scaled_erfc(double v) {
    gsl_sf_result hazard;
    if (gsl_sf_hazard_e(root2 * v, &hazard) != GSL_SUCCESS || !(hazard.val > 0)) {
        return 1 / (v * std::sqrt(std::numbers::pi));
    }
    return std::sqrt(2 / std::numbers::pi) / hazard.val;
}

double normal_density(double z, double s) {
    return std::exp(-0.5 * (z / s) * (z / s)) / (s * std::sqrt(2 * std::numbers::pi));
}

/// The two halves of a convolved exponential at z >= 0, W = near + far, and s^2 g(z) with g the normal
/// density.
struct Halves {
    double near = 0, far = 0, edge = 0, tail = 0; ///< tail: 2 Phi(-z/s)
};

Halves halves(double h, double s, double z) {
    if (s == 0) {
        return {std::exp(-z / h), 0, 0, 0};
    }
    const double gauss = std::exp(-0.5 * (z / s) * (z / s));
    const double u = (s * s - z * h) / (root2 * s * h);
    const double v = (s * s + z * h) / (root2 * s * h);
    Halves half;
    half.near =
        u > 0 ? 0.5 * gauss * scaled_erfc(u) : 0.5 * std::exp(0.5 * (s / h) * (s / h) - z / h) * std::erfc(u);
    half.far = 0.5 * gauss * scaled_erfc(v);
    half.edge = s * s * normal_density(z, s);
    half.tail = std::erfc(z / (root2 * s));
    return half;
}

/// Derivatives of the halves by ln h.
std::array<double, 2> halves_by_ln_h(const Halves& half, double h, double s, double z) {
    const double ratio = s / h;
    const double edge = half.edge / h;
    return {half.near * (z / h - ratio * ratio) + edge, edge - half.far * (z / h + ratio * ratio)};
}

Shape exponential_point(double h, double s, double z) {
    const double height = std::abs(z);
    const Halves half = halves(h, s, height);
    const auto slope = halves_by_ln_h(half, h, s, height);
    const double sign = z < 0 ? -1 : 1;
    return {half.near + half.far, slope[0] + slope[1], sign * (half.far - half.near) / h};
}

/// Integral from z >= 0 to infinity, and its derivative by ln h.
std::array<double, 2> exponential_above(double h, double s, double z) {
    const Halves half = halves(h, s, z);
    const auto slope = halves_by_ln_h(half, h, s, z);
    const double value = h * (half.tail + half.near - half.far);
    return {value, value + h * (slope[0] - slope[1])};
}

/// Integral from 0 to z >= 0, and its derivative by ln h.
std::array<double, 2> exponential_below(double h, double s, double z) {
    const Halves half = halves(h, s, z);
    const auto slope = halves_by_ln_h(half, h, s, z);
    const double value = s == 0 ? -h * std::expm1(-z / h) : h * (1 - half.tail - half.near + half.far);
    return {value, value - h * (slope[0] - slope[1])};
}

Shape exponential_bin(double h, double s, double low, double high) {
    const double width = high - low;
    std::array<double, 2> integral{};
    if (low >= 0 || high <= 0) {
        const double from = std::min(std::abs(low), std::abs(high));
        const auto near = exponential_above(h, s, from);
        const auto far = exponential_above(h, s, from + width);
        integral = {near[0] - far[0], near[1] - far[1]};
    } else {
        const auto down = exponential_below(h, s, -low);
        const auto up = exponential_below(h, s, high);
        integral = {down[0] + up[0], down[1] + up[1]};
    }
    const double slope = exponential_point(h, s, high).value - exponential_point(h, s, low).value;
    return {integral[0] / width, integral[1] / width, slope / width};
}

Shape gaussian_point(double h, double s, double z) {
    const double q2 = 2 * s * s + h * h;
    const double value = h / std::sqrt(q2) * std::exp(-z * z / q2);
    return {value, value * (1 - h * h / q2 + 2 * z * z * h * h / (q2 * q2)), -2 * z / q2 * value};
}

Shape gaussian_bin(double h, double s, double low, double high) {
    const double width = high - low;
    const double q2 = 2 * s * s + h * h;
    const double q = std::sqrt(q2);
    const double from = low >= 0 || high <= 0 ? std::min(std::abs(low), std::abs(high)) : 0;
    const double part = low >= 0 || high <= 0 ? std::erfc(from / q) - std::erfc((from + width) / q)
                                              : std::erf(high / q) - std::erf(low / q);
    const double value = h * 0.5 * std::sqrt(std::numbers::pi) * part / width;
    const double moved = high * std::exp(-high * high / q2) - low * std::exp(-low * low / q2);
    const double slope = gaussian_point(h, s, high).value - gaussian_point(h, s, low).value;
    return {value, value - h * h * h / (q2 * q) * moved / width, slope / width};
}

/// sech2 without a beam: mean over [low, high].
Shape sech2_bare(double h, double low, double high) {
    const auto square = [&](double z) {
        const double e = std::exp(-2 * std::abs(z) / h);
        return 4 * e / ((1 + e) * (1 + e));
    };
    if (low == high) {
        const double value = square(low);
        const double slope = -2 / h * std::tanh(low / h) * value;
        return {value, -low * slope, slope};
    }
    const double width = high - low;
    // tanh b - tanh a = sinh(b - a)/(cosh a cosh b): no digits lost in the wings.
    const double a = std::abs(low / h);
    const double b = std::abs(high / h);
    const double step = width / h;
    const double value = h / width * 2 * (std::exp(step - a - b) - std::exp(-step - a - b)) /
                         ((1 + std::exp(-2 * a)) * (1 + std::exp(-2 * b)));
    const double at_low = square(low);
    const double at_high = square(high);
    return {value, value - (high * at_high - low * at_low) / width, (at_high - at_low) / width};
}

/// Mean over [low, high] of the normal density of width s about `centre`, and its derivative by the centre
/// taken with a minus sign.
std::array<double, 2> density_bin(double low, double high, double s) {
    if (low == high) {
        const double value = normal_density(low, s);
        return {value, -low / (s * s) * value};
    }
    const double from = low >= 0 || high <= 0 ? std::min(std::abs(low), std::abs(high)) : 0;
    const double inside =
        low >= 0 || high <= 0
            ? 0.5 * (std::erfc(from / (root2 * s)) - std::erfc((from + high - low) / (root2 * s)))
            : 0.5 * (std::erf(high / (root2 * s)) - std::erf(low / (root2 * s)));
    return {inside / (high - low), (normal_density(high, s) - normal_density(low, s)) / (high - low)};
}

Shape sech2_bin(double h, double s, double low, double high) {
    if (s == 0) {
        return sech2_bare(h, low, high);
    }
    static const QuadratureRule rule = gauss_legendre(10);
    Shape sum;
    const bool narrow_beam = s <= h;
    // Panels of the narrower function's width: the poles of sech2 then lie 1.6 panel half-lengths or more
    // away.
    const int panels = narrow_beam ? 10 : 18;
    const double end = narrow_beam ? 8 * s : 18 * h;
    const double half = end / panels;
    for (int panel = 0; panel < panels; ++panel) {
        for (std::size_t k = 0; k < rule.node.size(); ++k) {
            const double t = -end + (2 * panel + 1 + rule.node[k]) * half;
            const double weight = half * rule.weight[k];
            if (narrow_beam) {
                const Shape bare = sech2_bare(h, low - t, high - t);
                const double beam = weight * normal_density(t, s);
                sum.value += beam * bare.value;
                sum.by_ln_h += beam * bare.by_ln_h;
                sum.by_z += beam * bare.by_z;
            } else {
                const auto beam = density_bin(low - t, high - t, s);
                const double bare = weight * sech2_bare(h, t, t).value;
                sum.value += bare * beam[0];
                sum.by_ln_h += bare * (beam[0] - t * beam[1]);
                sum.by_z += bare * beam[1];
            }
        }
    }
    return sum;
}

} // namespace

std::string to_string(Model model) {
    for (const auto& [known, name] : model_names) {
        if (known == model) {
            return std::string(name);
        }
    }
    return "unknown";
}

Model parse_model(std::string_view name) {
    std::string known;
    for (const auto& [model, text] : model_names) {
        if (text == name) {
            return model;
        }
        known += (known.empty() ? "" : ", ") + std::string(text);
    }
    throw Error(ErrorKind::scenario, fmt::format("found model '{}', expected one of {}", name, known));
}

std::size_t components(Model model) {
    return model == Model::two_exponential || model == Model::two_gaussian ? 2 : 1;
}

Model kind(Model model) {
    switch (model) {
    case Model::two_exponential:
        return Model::exponential;
    case Model::two_gaussian:
        return Model::gaussian;
    default:
        return model;
    }
}

Shape convolved(Model single, double h, double s, double z) {
    switch (kind(single)) {
    case Model::exponential:
        return exponential_point(h, s, z);
    case Model::gaussian:
        return gaussian_point(h, s, z);
    default:
        return sech2_bin(h, s, z, z);
    }
}

Shape bin_mean(Model single, double h, double s, double z, double width) {
    // The differences of integrals lose digits in thin bins, where three points are as good as exact. A thin
    // bin on the kink of an exponential without beam is not smooth, but loses nothing there either.
    const bool kink = single == Model::exponential && s < width && std::abs(z) < width;
    if (width <= 1e-4 * std::hypot(h, s) && !kink) {
        Shape mean = convolved(single, h, s, z);
        if (width > 0) {
            const double step = 0.5 * width * std::sqrt(0.6);
            const Shape low = convolved(single, h, s, z - step);
            const Shape high = convolved(single, h, s, z + step);
            mean = {(8 * mean.value + 5 * (low.value + high.value)) / 18,
                    (8 * mean.by_ln_h + 5 * (low.by_ln_h + high.by_ln_h)) / 18,
                    (8 * mean.by_z + 5 * (low.by_z + high.by_z)) / 18};
        }
        return mean;
    }
    const double low = z - 0.5 * width;
    const double high = z + 0.5 * width;
    switch (kind(single)) {
    case Model::exponential:
        return exponential_bin(h, s, low, high);
    case Model::gaussian:
        return gaussian_bin(h, s, low, high);
    default:
        return sech2_bin(h, s, low, high);
    }
}

Shape bin_mean(Model single, double h, double s, double z, double width, const DiscKernel& disc) {
    const double seen = h * disc.sin_inclination;
    Shape sum;
    if (disc.offset.empty()) {
        sum = bin_mean(single, seen, s, z, width);
    }
    for (std::size_t k = 0; k < disc.offset.size(); ++k) {
        const Shape part = bin_mean(single, seen, s, z - disc.offset[k], width);
        sum.value += disc.weight[k] * part.value;
        sum.by_ln_h += disc.weight[k] * part.by_ln_h;
        sum.by_z += disc.weight[k] * part.by_z;
    }
    return {sum.value / disc.sin_inclination, sum.by_ln_h / disc.sin_inclination,
            sum.by_z / disc.sin_inclination};
}

} // namespace aureole::profiles
