#include "aureole/transport/limiter.hpp"

#include <algorithm>
#include <array>
#include <cmath>

namespace aureole::transport {
namespace {

double logarithmic_mean(double a, double b) {
    if (!(a > 0) || !(b > 0)) {
        return std::max(0.5 * (a + b), 0.0);
    }
    const double step = (a - b) / (a + b);
    if (std::abs(step) < 1e-4) {
        return 0.5 * (a + b) * (1 - step * step / 3);
    }
    return (a - b) / std::log(a / b);
}

/// Density on an outer side per density of its cell, without flow.
double side_ratio(const Boundary& boundary, const BoundaryFace& face, double diffusion, double speed) {
    const double conductance = diffusion / face.distance;
    switch (boundary.kind) {
    case BoundaryKind::free_escape:
        return 0;
    case BoundaryKind::marshak:
        return conductance / (conductance + 0.5 * speed);
    case BoundaryKind::inverse_radius:
        return 1 / (1 + face.distance * (1 + boundary.slope) * face.inverse_radius);
    case BoundaryKind::outflow:
    case BoundaryKind::reflecting:
        break;
    }
    return 1;
}

double fraction_of(Limiter limiter, double flux_without_limit, double speed, double density) {
    if (flux_without_limit == 0) {
        return 1;
    }
    if (density <= 0) {
        return 0;
    }
    return limited_fraction(limiter, flux_without_limit / (speed * density));
}

double corner_fraction(Limiter limiter,
                       const Corner& corner,
                       const CornerTensor& tensor,
                       double speed,
                       std::span<const double> density) {
    double radial = 0;
    double vertical = 0;
    double mean = 0;
    for (std::size_t a = 0; a < 4; ++a) {
        const double at = density[corner.cell[a]];
        radial += corner.radial[a] * at;
        vertical += corner.vertical[a] * at;
        mean += 0.25 * at;
    }
    // For K = k b b the form below is (k b.grad N)^2.
    const double form =
        tensor[0] * radial * radial + 2 * tensor[1] * radial * vertical + tensor[2] * vertical * vertical;
    return fraction_of(limiter, std::sqrt(std::max(0.0, (tensor[0] + tensor[2]) * form)), speed, mean);
}

} // namespace

double limited_fraction(Limiter limiter, double x) {
    switch (limiter) {
    case Limiter::square_root:
        return 1 / std::sqrt(1 + x * x);
    case Limiter::sum:
        return 1 / (1 + x);
    case Limiter::levermore_pomraning: {
        const double r = 3 * x;
        if (r < 0.01) {
            return 1 - r * r / 15 + 2 * r * r * r * r / 315;
        }
        return 3 * (1 / std::tanh(r) - 1 / r) / r;
    }
    case Limiter::none:
        break;
    }
    return 1;
}

void limit(const Mesh& mesh,
           std::span<const Corner> corners,
           std::span<const Boundary> sides,
           Limiter limiter,
           const SpatialCoefficients& unlimited,
           std::span<const double> density,
           LimitedFaces& result) {
    result.face.resize(mesh.faces.size(), 1.0);
    result.boundary.resize(mesh.boundary.size(), 1.0);
    std::vector<std::array<double, 2>> gradient(mesh.cells(), {0.0, 0.0});
    std::vector<double> across(mesh.faces.size());
    std::vector<double> side_density(mesh.boundary.size());
    for (std::size_t f = 0; f < mesh.faces.size(); ++f) {
        const Face& face = mesh.faces[f];
        across[f] =
            (density[face.second] - density[face.first]) / (face.first_distance + face.second_distance);
        gradient[face.first][face.axis] += 0.5 * across[f];
        gradient[face.second][face.axis] += 0.5 * across[f];
    }
    for (std::size_t f = 0; f < mesh.boundary.size(); ++f) {
        const BoundaryFace& face = mesh.boundary[f];
        side_density[f] = density[face.cell] *
                          side_ratio(sides[face.side], face,
                                     result.boundary[f] * unlimited.boundary_diffusion[f], unlimited.speed);
        gradient[face.cell][face.axis] +=
            0.5 * face.orientation * (side_density[f] - density[face.cell]) / face.distance;
    }
    for (std::size_t f = 0; f < mesh.faces.size(); ++f) {
        const Face& face = mesh.faces[f];
        const std::size_t other = 1 - face.axis;
        const double along = 0.5 * (gradient[face.first][other] + gradient[face.second][other]);
        result.face[f] =
            fraction_of(limiter, unlimited.diffusion[f] * std::hypot(across[f], along), unlimited.speed,
                        logarithmic_mean(density[face.first], density[face.second]));
    }
    for (std::size_t f = 0; f < mesh.boundary.size(); ++f) {
        const BoundaryFace& face = mesh.boundary[f];
        const double normal = (density[face.cell] - side_density[f]) / face.distance;
        const double mean = side_density[f] > 0 ? logarithmic_mean(density[face.cell], side_density[f])
                                                : 0.5 * std::max(density[face.cell], 0.0);
        result.boundary[f] = fraction_of(
            limiter, unlimited.boundary_diffusion[f] * std::hypot(normal, gradient[face.cell][1 - face.axis]),
            unlimited.speed, mean);
    }
    result.corner.resize(unlimited.aligned.size());
    for (std::size_t c = 0; c < unlimited.aligned.size(); ++c) {
        result.corner[c] =
            corner_fraction(limiter, corners[c], unlimited.aligned[c], unlimited.speed, density);
    }
}

std::vector<float> smallest_fraction(const Mesh& mesh, const LimitedFaces& fractions) {
    std::vector<float> smallest(mesh.cells(), 1.0F);
    const auto take = [&](std::uint32_t cell, double fraction) {
        smallest[cell] = std::min(smallest[cell], static_cast<float>(fraction));
    };
    for (std::size_t f = 0; f < mesh.faces.size(); ++f) {
        take(mesh.faces[f].first, fractions.face[f]);
        take(mesh.faces[f].second, fractions.face[f]);
    }
    for (std::size_t f = 0; f < mesh.boundary.size(); ++f) {
        take(mesh.boundary[f].cell, fractions.boundary[f]);
    }
    return smallest;
}

} // namespace aureole::transport
