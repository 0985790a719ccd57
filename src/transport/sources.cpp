#include "aureole/transport/sources.hpp"

#include "aureole/base/constants.hpp"
#include "aureole/base/error.hpp"
#include "aureole/base/quadrature.hpp"
#include "aureole/physics/gyration.hpp"
#include "aureole/physics/star_formation.hpp"
#include "aureole/transport/particle.hpp"

#include <fmt/format.h>

#include <algorithm>
#include <cmath>
#include <functional>
#include <limits>

namespace aureole::transport {
namespace {

using constants::pi;

void expect_positive(const SourceShape& shape, double value, const char* name) {
    if (!(value > 0) || !std::isfinite(value)) {
        throw Error(ErrorKind::scenario, fmt::format("sources '{}': {}: found {:g} cm, expected a length > 0",
                                                     shape.kind, name, value));
    }
}

/// Integral of exp(-|z|/h) from `a` to `b` (a < b).
double exponential_layer(double a, double b, double h) {
    if (a < 0 && b > 0) {
        return exponential_layer(0, -a, h) + exponential_layer(0, b, h);
    }
    const double low = std::min(std::abs(a), std::abs(b));
    return -h * std::exp(-low / h) * std::expm1(-(b - a) / h);
}

/// Integral of exp(-z^2/(2 w^2)) from a to b, also far out in the tail.
double gaussian_layer(double a, double b, double w) {
    const double scale = w * std::sqrt(pi / 2);
    const double x = a / (w * std::sqrt(2.0));
    const double y = b / (w * std::sqrt(2.0));
    if (x >= 0) {
        return scale * (std::erfc(x) - std::erfc(y));
    }
    return y <= 0 ? scale * (std::erfc(-y) - std::erfc(-x)) : scale * (std::erf(y) - std::erf(x));
}

/// Integral of exp(-R/a) 2 pi R from inner to outer.
double exponential_ring(double inner, double outer, double a) {
    const double x = inner / a;
    const double step = (outer - inner) / a;
    // (1 + x) - (1 + x + step) exp(-step) without cancellation for thin rings
    const double bracket = step < 1e-3
                               ? x * step * (1 - step / 2 + step * step / 6) + step * step * (0.5 - step / 3)
                               : -(1 + x) * std::expm1(-step) - step * std::exp(-step);
    return 2 * pi * a * a * std::exp(-x) * bracket;
}

/// Integral of f(R) 2 pi R; a power of R at 0 is smooth in R^(1/3).
double ring_by_quadrature(const std::function<double(double)>& f, double inner, double outer, double scale) {
    static const QuadratureRule rule = gauss_legendre(16);
    const auto integrand = [&](double t) {
        const double radius = t * t * t;
        return 2 * pi * radius * f(radius) * 3 * t * t;
    };
    const int panels = std::clamp(static_cast<int>(std::ceil((outer - inner) / scale)), 1, 400);
    double sum = 0;
    for (int p = 0; p < panels; ++p) {
        const double width = (outer - inner) / panels;
        sum += integrate(rule, integrand, std::cbrt(inner + p * width), std::cbrt(inner + (p + 1) * width));
    }
    return sum;
}

using RingIntegral = std::function<double(double inner, double outer)>;

/// Integral over rings of the radial profile, and how far out all of it lies.
std::pair<RingIntegral, double> radial_profile(const SourceShape& shape) {
    using constants::kiloparsec;
    const auto fitted = [](double (*f)(double)) {
        return std::pair<RingIntegral, double>{
            [f](double inner, double outer) { return ring_by_quadrature(f, inner, outer, kiloparsec); },
            120 * kiloparsec};
    };
    if (shape.kind == "green_2015") {
        return fitted(physics::sources_green_2015);
    }
    if (shape.kind == "case_bhattacharya_1996") {
        return fitted(physics::sources_case_bhattacharya_1996);
    }
    if (shape.kind == "case_bhattacharya_1998") {
        return fitted(physics::sources_case_bhattacharya_1998);
    }
    if (shape.kind == "lorimer_2006") {
        return fitted(physics::sources_lorimer_2006);
    }
    if (shape.kind == "yusifov_kucuk_2004") {
        return fitted(physics::sources_yusifov_kucuk_2004);
    }
    if (shape.kind == "exponential") {
        expect_positive(shape, shape.radius, "radius");
        return {[a = shape.radius](double inner, double outer) { return exponential_ring(inner, outer, a); },
                60 * shape.radius};
    }
    if (shape.kind == "ring") {
        expect_positive(shape, shape.width, "width");
        const double middle = shape.radius;
        const double w = shape.width;
        return {[middle, w](double inner, double outer) {
                    // R = (R - middle) + middle
                    const double a = inner - middle;
                    const double b = outer - middle;
                    const double s = 2 * w * w;
                    const double moment = -w * w * std::exp(-a * a / s) * std::expm1(-(b * b - a * a) / s);
                    return 2 * pi * (moment + middle * gaussian_layer(a, b, w));
                },
                middle + 40 * w};
    }
    if (shape.kind == "nucleus") {
        expect_positive(shape, shape.width, "width");
        const double s = 2 * shape.width * shape.width;
        return {[s](double inner, double outer) {
                    return -pi * s * std::exp(-inner * inner / s) *
                           std::expm1(-(outer * outer - inner * inner) / s);
                },
                40 * shape.width};
    }
    throw Error(ErrorKind::scenario,
                fmt::format("sources: found the shape '{}', expected exponential, green_2015, "
                            "case_bhattacharya_1996, case_bhattacharya_1998, lorimer_2006, "
                            "yusifov_kucuk_2004, ring, nucleus or shell",
                            shape.kind));
}

/// Integrals over cells and over all space.
struct CellIntegrals {
    std::vector<double> cell;
    double everywhere = 0;
};

CellIntegrals layered(const SourceShape& shape, const grid::Grid& grid) {
    const auto [ring, reach] = radial_profile(shape);
    const bool nucleus = shape.kind == "nucleus";
    if (!nucleus) {
        expect_positive(shape, shape.height, "height");
    }
    const auto layer = [&](double a, double b) {
        return nucleus ? gaussian_layer(a, b, shape.width) : exponential_layer(a, b, shape.height);
    };
    std::vector<double> across;
    for (std::size_t i = 0; i < grid.nx(); ++i) {
        across.push_back(ring(grid.x[i], grid.x[i + 1]));
    }
    CellIntegrals result;
    for (std::size_t k = 0; k < grid.nz(); ++k) {
        const double along = layer(grid.z[k], grid.z[k + 1]);
        for (const double part : across) {
            result.cell.push_back(part * along);
        }
    }
    result.everywhere = ring(0, reach) * (nucleus ? std::sqrt(2 * pi) * shape.width : 2 * shape.height);
    return result;
}

CellIntegrals shell(const SourceShape& shape, const grid::Grid& grid) {
    static const QuadratureRule rule = gauss_legendre(8);
    expect_positive(shape, shape.width, "width");
    const double w = shape.width;
    const double s = 2 * w * w;
    const double reach = shape.radius + 9 * w;
    CellIntegrals result;
    for (std::size_t k = 0; k < grid.nz(); ++k) {
        for (std::size_t i = 0; i < grid.nx(); ++i) {
            const double low = std::max(grid.z[k], -reach);
            const double high = std::min(grid.z[k + 1], reach);
            const double outer = std::min(grid.x[i + 1], reach);
            double sum = 0;
            if (low < high && grid.x[i] < outer) {
                const auto panels = [&](double length) {
                    return static_cast<int>(std::ceil(length / (2 * w)));
                };
                sum = integrate_panels(
                    rule,
                    [&](double z) {
                        return integrate_panels(
                            rule,
                            [&](double radius) {
                                const double away = std::hypot(radius, z) - shape.radius;
                                return 2 * pi * radius * std::exp(-away * away / s);
                            },
                            grid.x[i], outer, panels(outer - grid.x[i]));
                    },
                    low, high, panels(high - low));
            }
            result.cell.push_back(sum);
        }
    }
    result.everywhere = integrate_panels(
        rule,
        [&](double r) { return 4 * pi * r * r * std::exp(-(r - shape.radius) * (r - shape.radius) / s); },
        std::max(0.0, shape.radius - 9 * w), reach, 40);
    return result;
}

/// Exponent of the rise at the least rigidity times the step in ln p: 12 for 16 nodes per decade.
constexpr double steepness = 1.73;

/// The spectrum's shape at a rigidity.
double shape_of(const SourceSpectrum& spectrum, double rigidity, double step_ln) {
    double logarithm = -spectrum.slope * std::log(rigidity / physics::gigavolt);
    if (spectrum.break_rigidity) {
        const double u = std::log(rigidity / *spectrum.break_rigidity) / spectrum.break_smoothness;
        const double bend = u > 0 ? u + std::log1p(std::exp(-u)) : std::log1p(std::exp(u));
        logarithm -= (spectrum.slope_above - spectrum.slope) * spectrum.break_smoothness * bend;
    }
    if (spectrum.least_rigidity > 0) {
        logarithm -= std::log1p(std::pow(spectrum.least_rigidity / rigidity, steepness / step_ln));
    }
    return std::exp(logarithm - (spectrum.cutoff_rigidity ? rigidity / *spectrum.cutoff_rigidity : 0.0));
}

double momentum_of(double rigidity) {
    return rigidity * constants::elementary_charge / constants::speed_of_light;
}

double rigidity_of(double momentum) {
    return momentum * constants::speed_of_light / constants::elementary_charge;
}

void check(const SourceSpectrum& spectrum) {
    const auto refuse = [](const std::string& what) {
        throw Error(ErrorKind::scenario, "source spectrum: " + what);
    };
    const auto bad = [](const std::optional<double>& value) { return value && !(*value > 0); };
    if (bad(spectrum.break_rigidity) || bad(spectrum.cutoff_rigidity) || !(spectrum.least_rigidity >= 0) ||
        !(spectrum.break_smoothness > 0)) {
        refuse("found a rigidity or smoothness that is not positive, expected numbers > 0");
    }
    const double steepest = spectrum.break_rigidity ? spectrum.slope_above : spectrum.slope;
    if (!spectrum.cutoff_rigidity && !(steepest > 2)) {
        refuse(fmt::format("found the slope {:g} without a cut-off, whose energy is infinite; expected a "
                           "cut-off or a slope above 2",
                           steepest));
    }
    if (spectrum.least_rigidity == 0 && !(spectrum.slope < 3)) {
        refuse(fmt::format("found the slope {:g} down to zero rigidity, whose energy is infinite; expected a "
                           "least rigidity or a slope below 3",
                           spectrum.slope));
    }
}

/// int T shape dp [erg g cm s-1].
double energy_integral(const SourceSpectrum& spectrum, double rest_energy, double step_ln) {
    static const QuadratureRule rule = gauss_legendre(12);
    const double rest_momentum = rest_energy / constants::speed_of_light;
    const double low = spectrum.least_rigidity > 0
                           ? std::exp(-20 * step_ln) * momentum_of(spectrum.least_rigidity)
                           : 1e-6 * rest_momentum;
    double high = 1e4 * std::max({low, rest_momentum, momentum_of(spectrum.break_rigidity.value_or(0))});
    if (spectrum.cutoff_rigidity) {
        high = std::max(40 * momentum_of(*spectrum.cutoff_rigidity), 2 * low);
    }
    const auto energy = [&](double p) {
        return particle_of_momentum(p, rest_energy).kinetic_energy *
               shape_of(spectrum, rigidity_of(p), step_ln);
    };
    const double decades = std::log10(high / low);
    double sum = integrate_panels(
        rule,
        [&](double x) {
            const double p = std::exp(x);
            return p * energy(p);
        },
        std::log(low), std::log(high), static_cast<int>(std::ceil(12 * decades)));
    if (spectrum.least_rigidity == 0) {
        sum += low * energy(low) / (3 - spectrum.slope); // T ~ p^2
    }
    if (!spectrum.cutoff_rigidity) {
        const double slope = spectrum.break_rigidity ? spectrum.slope_above : spectrum.slope;
        sum += high * energy(high) / (slope - 2); // T ~ p
    }
    return sum;
}

} // namespace

SourceDensity source_density(const SourceShape& shape, const grid::Grid& grid) {
    if (grid.geometry != grid::Geometry::rz) {
        throw Error(ErrorKind::input, "sources: found an XYZ grid, expected an RZ grid");
    }
    CellIntegrals integrals = shape.kind == "shell" ? shell(shape, grid) : layered(shape, grid);
    double total = 0;
    for (const double part : integrals.cell) {
        total += grid.mirrored ? 2 * part : part;
    }
    SourceDensity result;
    result.inside = total / integrals.everywhere;
    if (!(result.inside > 1e-3)) {
        throw Error(ErrorKind::scenario,
                    fmt::format("sources '{}': found {:.3g} of them inside the grid, expected sources that "
                                "lie in it",
                                shape.kind, std::isfinite(result.inside) ? result.inside : 0.0));
    }
    const auto volume = grid::cell_volumes(grid);
    for (std::size_t cell = 0; cell < volume.size(); ++cell) {
        result.density.push_back(integrals.cell[cell] / total / volume[cell]);
    }
    return result;
}

SourceTerm source_term(const SourceSpec& spec, const grid::Grid& grid, double rest_energy, double step_ln) {
    if (!(spec.power > 0) || !std::isfinite(spec.power)) {
        throw Error(ErrorKind::scenario,
                    fmt::format("sources '{}': power: found {:g} erg/s, expected a power > 0",
                                spec.shape.kind, spec.power));
    }
    check(spec.spectrum);
    SourceTerm term{source_density(spec.shape, grid), spec.spectrum, rest_energy, 0};
    term.norm = spec.power / energy_integral(spec.spectrum, rest_energy, step_ln);
    return term;
}

double injected(const SourceTerm& term, double momentum, double step_ln) {
    return term.norm * shape_of(term.spectrum, rigidity_of(momentum), step_ln);
}

} // namespace aureole::transport
