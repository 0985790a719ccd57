#include "aureole/base/constants.hpp"
#include "aureole/base/error.hpp"
#include "aureole/maps/regrid.hpp"

#include <algorithm>
#include <array>
#include <cmath>

namespace aureole::maps {

namespace {

/// Symmetric 2 x 2 matrix [[a, b], [b, c]].
struct Symmetric {
    double a = 0, b = 0, c = 0;
    double determinant() const { return a * c - b * b; }
    bool positive() const { return a > 0 && c > 0 && determinant() > 0; }
};

Symmetric operator-(const Symmetric& x, const Symmetric& y) {
    return {x.a - y.a, x.b - y.b, x.c - y.c};
}

Symmetric inverse(const Symmetric& m) {
    const double d = m.determinant();
    return {m.c / d, -m.b / d, m.a / d};
}

/// Squares of the full widths in place of variances; a along East, c along North.
Symmetric matrix_of(const Beam& beam) {
    const double s = std::sin(beam.position_angle);
    const double c = std::cos(beam.position_angle);
    const double major = beam.major * beam.major;
    const double minor = beam.minor * beam.minor;
    return {major * s * s + minor * c * c, (major - minor) * s * c, major * c * c + minor * s * s};
}

Beam beam_of(const Symmetric& m) {
    const double middle = 0.5 * (m.a + m.c);
    const double half = std::hypot(0.5 * (m.a - m.c), m.b);
    const bool round = half <= 1e-9 * middle;
    return {std::sqrt(middle + half), std::sqrt(std::max(middle - half, 0.0)),
            round ? 0.0 : 0.5 * std::atan2(2 * m.b, m.c - m.a)};
}

/// Whether `outer` holds `inner`, to rounding.
bool holds(const Symmetric& outer, const Symmetric& inner) {
    const Symmetric rest = outer - inner;
    const double middle = 0.5 * (rest.a + rest.c);
    const double half = std::hypot(0.5 * (rest.a - rest.c), rest.b);
    return middle - half >= -1e-9 * (outer.a + outer.c);
}

using Triple = std::array<double, 3>;

/// Gradient and minus the second derivatives of weight * ln det, added up.
struct Curvature {
    Triple gradient{};
    std::array<Triple, 3> matrix{};
    /// sign: of the unknown in m
    void add(const Symmetric& m, double weight, double sign) {
        const double d = m.determinant();
        const Triple g{m.c / d, -2 * m.b / d, m.a / d};
        const std::array<Triple, 3> bend{{{0, 0, 1 / d}, {0, -2 / d, 0}, {1 / d, 0, 0}}};
        for (std::size_t r = 0; r < 3; ++r) {
            gradient[r] += weight * sign * g[r];
            for (std::size_t s = 0; s < 3; ++s) {
                matrix[r][s] += weight * (g[r] * g[s] - bend[r][s]);
            }
        }
    }
    /// matrix^-1 gradient by elimination (the matrix is positive).
    Triple step() const {
        auto m = matrix;
        Triple x = gradient;
        for (std::size_t k = 0; k < 3; ++k) {
            for (std::size_t r = k + 1; r < 3; ++r) {
                const double ratio = m[r][k] / m[k][k];
                for (std::size_t s = k; s < 3; ++s) {
                    m[r][s] -= ratio * m[k][s];
                }
                x[r] -= ratio * x[k];
            }
        }
        for (std::size_t k = 3; k-- > 0;) {
            for (std::size_t s = k + 1; s < 3; ++s) {
                x[k] -= m[k][s] * x[s];
            }
            x[k] /= m[k][k];
        }
        return x;
    }
};

/// weight ln det p + sum ln det (bound - p); minus infinity outside.
double barrier(const Symmetric& p, const std::vector<Symmetric>& bounds, double weight) {
    if (!p.positive()) {
        return -HUGE_VAL;
    }
    double value = weight * std::log(p.determinant());
    for (const Symmetric& bound : bounds) {
        const Symmetric rest = bound - p;
        if (!rest.positive()) {
            return -HUGE_VAL;
        }
        value += std::log(rest.determinant());
    }
    return value;
}

void climb(Symmetric& p, const std::vector<Symmetric>& bounds, double weight) {
    for (int iteration = 0; iteration < 60; ++iteration) {
        Curvature curvature;
        curvature.add(p, weight, 1);
        for (const Symmetric& bound : bounds) {
            curvature.add(bound - p, 1, -1);
        }
        const Triple step = curvature.step();
        const double rise = step[0] * curvature.gradient[0] + step[1] * curvature.gradient[1] +
                            step[2] * curvature.gradient[2];
        if (!(rise > 1e-10)) {
            return;
        }
        const double before = barrier(p, bounds, weight);
        double part = 1;
        Symmetric next = p;
        do {
            next = {p.a + part * step[0], p.b + part * step[1], p.c + part * step[2]};
            part *= 0.5;
        } while (part > 1e-12 && !(barrier(next, bounds, weight) >= before + 0.1 * part * rise));
        if (part <= 1e-12) {
            return;
        }
        p = next;
    }
}

} // namespace

Beam smallest_common_beam(std::span<const Beam> beams) {
    double widest = 0;
    std::vector<Symmetric> matrices;
    for (const Beam& beam : beams) {
        if (!(beam.minor > 0) || !(beam.major > 0) || !std::isfinite(beam.major + beam.minor)) {
            throw Error(ErrorKind::input, "found a beam of no width, expected widths > 0");
        }
        widest = std::max({widest, beam.major, beam.minor});
        matrices.push_back(matrix_of(beam));
    }
    if (beams.empty()) {
        throw Error(ErrorKind::input, "found no beam, expected one or more");
    }
    for (std::size_t k = 0; k < beams.size(); ++k) {
        bool all = true;
        for (const Symmetric& other : matrices) {
            all = all && holds(matrices[k], other);
        }
        if (all) {
            return beams[k];
        }
    }
    // Greatest ln det of P = C^-1 under P <= C_k^-1, in units of the widest beam.
    std::vector<Symmetric> bounds;
    for (const Symmetric& m : matrices) {
        const double scale = 1 / (widest * widest);
        bounds.push_back(inverse({m.a * scale, m.b * scale, m.c * scale}));
    }
    Symmetric p{0.5, 0, 0.5};
    const double last = 4e7 * static_cast<double>(bounds.size());
    for (double weight = 1; weight < last; weight *= 8) {
        climb(p, bounds, weight);
    }
    climb(p, bounds, last);
    Beam beam = beam_of(inverse(p));
    beam.major *= widest;
    beam.minor *= widest;
    return beam;
}

} // namespace aureole::maps
