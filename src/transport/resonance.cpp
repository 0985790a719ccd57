#include "run.hpp"

#include "aureole/base/error.hpp"

#include <algorithm>
#include <cmath>

namespace aureole::transport {
namespace {

/// Gradients are taken to be at least this part of pressure over outer radius: where the pressure has a
/// maximum or a plateau waves come from neighbouring places, and logarithms stay finite.
constexpr double flat = 1e-3;
using Vector = std::array<double, 2>;

/// Gradients of a function of cells at faces, outer faces, corners and cells.
class Gradients {
  public:
    explicit Gradients(const Problem& problem) : problem_(problem), at_cell(problem.mesh.cells()) {}

    void set(std::span<const double> values) {
        const Mesh& mesh = problem_.mesh;
        across.resize(mesh.faces.size());
        std::fill(at_cell.begin(), at_cell.end(), Vector{});
        for (std::size_t f = 0; f < mesh.faces.size(); ++f) {
            const Face& face = mesh.faces[f];
            across[f] =
                (values[face.second] - values[face.first]) / (face.first_distance + face.second_distance);
            at_cell[face.first][face.axis] += 0.5 * across[f];
            at_cell[face.second][face.axis] += 0.5 * across[f];
        }
        for (const BoundaryFace& face : mesh.boundary) {
            at_cell[face.cell][face.axis] *= 2; // the inner side alone is known
        }
    }
    Vector at_face(std::size_t f) const {
        const Face& face = problem_.mesh.faces[f];
        Vector gradient{};
        gradient[face.axis] = across[f];
        gradient[1 - face.axis] =
            0.5 * (at_cell[face.first][1 - face.axis] + at_cell[face.second][1 - face.axis]);
        return gradient;
    }

  private:
    const Problem& problem_;

  public:
    std::vector<double> across; ///< [faces]
    std::vector<Vector> at_cell;
};

/// The part of a gradient along the field, b (b.g); all of it where diffusion is isotropic.
Vector along_field(const std::array<double, 3>& alignment, const Vector& g) {
    return {alignment[0] * g[0] + alignment[1] * g[1], alignment[1] * g[0] + alignment[2] * g[1]};
}

constexpr std::array<double, 3> isotropic{1, 0, 1};

std::array<double, 3> alignment_of(const Problem& problem, std::size_t first, std::size_t second) {
    if (problem.corners.empty()) {
        return isotropic;
    }
    std::array<double, 3> mean{};
    for (std::size_t part = 0; part < 3; ++part) {
        mean[part] = 0.5 * (problem.media.alignment[first][part] + problem.media.alignment[second][part]);
    }
    return mean;
}

double size_along(const std::array<double, 3>& alignment, const Vector& g) {
    const Vector along = along_field(alignment, g);
    return std::sqrt(std::max(0.0, along[0] * g[0] + along[1] * g[1]));
}

} // namespace

Resonance resonance_of(const Problem& problem, std::span<const double> density, bool at_cells) {
    const Mesh& mesh = problem.mesh;
    const std::size_t cells = mesh.cells();
    const std::size_t places = at_cells ? cells : problem.march_places.size();
    const auto& momentum = problem.protons.momentum;
    const double size = problem.media.grid.x.back();
    Resonance result;
    result.log_pressure.resize(momentum.size() * places);
    result.log_gradient.resize(momentum.size() * places);
    std::vector<double> pressure(cells);
    Gradients gradients(problem);
    for (std::size_t node = 0; node < momentum.size(); ++node) {
        const Particle particle = particle_of_momentum(momentum[node], problem.protons.rest_energy);
        const double factor = momentum[node] * momentum[node] * particle.speed / 3;
        double most = 0;
        for (std::size_t cell = 0; cell < cells; ++cell) {
            pressure[cell] = factor * std::max(0.0, density[node * cells + cell]);
            most = std::max(most, pressure[cell]);
        }
        const double floor = most > 0 ? 1e-30 * most : 1e-100;
        gradients.set(pressure);
        std::size_t at = node * places;
        const auto put = [&](double here, double gradient) {
            const double kept = std::max(here, floor);
            result.log_pressure[at] = std::log(kept);
            result.log_gradient[at] = std::log(std::max(gradient, flat * kept / size));
            ++at;
        };
        if (at_cells) {
            for (std::size_t cell = 0; cell < cells; ++cell) {
                put(pressure[cell], size_along(alignment_of(problem, cell, cell), gradients.at_cell[cell]));
            }
            continue;
        }
        const auto direct = [&](double here, const std::array<double, 3>& alignment, const Vector& g,
                                std::size_t axis) {
            const double softened =
                std::hypot(size_along(alignment, g), turning * std::max(here, floor) / size);
            result.direction.push_back(-along_field(alignment, g)[axis] / softened);
        };
        for (std::size_t f = 0; f < mesh.faces.size(); ++f) {
            const Face& face = mesh.faces[f];
            direct(std::sqrt(pressure[face.first] * pressure[face.second]),
                   alignment_of(problem, face.first, face.second), gradients.at_face(f), face.axis);
            put(std::sqrt(pressure[face.first] * pressure[face.second]),
                size_along(alignment_of(problem, face.first, face.second), gradients.at_face(f)));
        }
        for (const BoundaryFace& face : mesh.boundary) {
            direct(pressure[face.cell], alignment_of(problem, face.cell, face.cell),
                   gradients.at_cell[face.cell], face.axis);
            result.direction.back() *= face.orientation;
            put(pressure[face.cell],
                size_along(alignment_of(problem, face.cell, face.cell), gradients.at_cell[face.cell]));
        }
        for (const Corner& corner : problem.corners) {
            Vector gradient{};
            double mean = 0;
            std::array<double, 3> alignment{};
            for (std::size_t a = 0; a < 4; ++a) {
                const std::uint32_t cell = corner.cell[a];
                gradient[0] += corner.radial[a] * pressure[cell];
                gradient[1] += corner.vertical[a] * pressure[cell];
                mean += 0.25 * pressure[cell];
                for (std::size_t part = 0; part < 3; ++part) {
                    alignment[part] += 0.25 * problem.media.alignment[cell][part];
                }
            }
            put(mean, size_along(alignment, gradient));
        }
    }
    return result;
}

} // namespace aureole::transport
