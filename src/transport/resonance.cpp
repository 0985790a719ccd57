#include "run.hpp"

#include "aureole/base/error.hpp"

#include <algorithm>
#include <cmath>

namespace aureole::transport {
namespace {

using Vector = std::array<double, 2>;

} // namespace

/// Gradients of a function of cells at faces, outer faces, corners and cells.
class LocalResonance::Gradients {
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

namespace {

/// Gradients are taken to be at least this part of pressure over outer radius: where the pressure has a
/// maximum or a plateau waves come from neighbouring places, and logarithms stay finite.
constexpr double flat = 1e-3;

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

LocalResonance::LocalResonance(const Problem& problem, bool at_cells, double width)
    : problem_(problem), at_cells_(at_cells), width_(width), pressure_(problem.mesh.cells()),
      gradients_(std::make_unique<Gradients>(problem)) {}

LocalResonance::~LocalResonance() = default;

void LocalResonance::find(double momentum, std::span<const double> density, PlaceResonance& out) {
    const Mesh& mesh = problem_.mesh;
    const std::size_t cells = mesh.cells();
    const std::size_t places = at_cells_ ? cells : problem_.march_places.size();
    const double size = problem_.media.grid.x.back();
    const Particle particle = particle_of_momentum(momentum, problem_.protons.rest_energy);
    const double factor = momentum * momentum * particle.speed / 3;
    double most = 0;
    for (std::size_t cell = 0; cell < cells; ++cell) {
        pressure_[cell] = factor * std::max(0.0, density[cell]);
        most = std::max(most, pressure_[cell]);
    }
    const double floor = most > 0 ? 1e-30 * most : 1e-100;
    gradients_->set(pressure_);
    out.pressure.resize(places);
    out.gradient.resize(places);
    out.direction.resize(at_cells_ ? 0 : mesh.faces.size() + mesh.boundary.size());
    std::size_t at = 0;
    const auto put = [&](double here, double gradient) {
        const double kept = std::max(here, floor);
        out.pressure[at] = kept;
        out.gradient[at] = std::hypot(gradient, width_ * flat * kept / size);
        ++at;
    };
    if (at_cells_) {
        for (std::size_t cell = 0; cell < cells; ++cell) {
            put(pressure_[cell], size_along(alignment_of(problem_, cell, cell), gradients_->at_cell[cell]));
        }
        return;
    }
    const auto direct = [&](double here, const std::array<double, 3>& alignment, const Vector& g,
                            std::size_t axis, double along) {
        const double softened = std::hypot(along, width_ * turning * std::max(here, floor) / size);
        out.direction[at] = -along_field(alignment, g)[axis] / softened;
    };
    for (std::size_t f = 0; f < mesh.faces.size(); ++f) {
        const Face& face = mesh.faces[f];
        const auto alignment = alignment_of(problem_, face.first, face.second);
        const Vector gradient = gradients_->at_face(f);
        const double here = std::sqrt(pressure_[face.first] * pressure_[face.second]);
        const double along = size_along(alignment, gradient);
        direct(here, alignment, gradient, face.axis, along);
        put(here, along);
    }
    for (const BoundaryFace& face : mesh.boundary) {
        const auto alignment = alignment_of(problem_, face.cell, face.cell);
        const Vector& gradient = gradients_->at_cell[face.cell];
        const double along = size_along(alignment, gradient);
        direct(pressure_[face.cell], alignment, gradient, face.axis, along);
        out.direction[at] *= face.orientation;
        put(pressure_[face.cell], along);
    }
    for (const Corner& corner : problem_.corners) {
        Vector gradient{};
        double mean = 0;
        std::array<double, 3> alignment{};
        for (std::size_t a = 0; a < 4; ++a) {
            const std::uint32_t cell = corner.cell[a];
            gradient[0] += corner.radial[a] * pressure_[cell];
            gradient[1] += corner.vertical[a] * pressure_[cell];
            mean += 0.25 * pressure_[cell];
            for (std::size_t part = 0; part < 3; ++part) {
                alignment[part] += 0.25 * problem_.media.alignment[cell][part];
            }
        }
        put(mean, size_along(alignment, gradient));
    }
}

Resonance resonance_of(const Problem& problem, std::span<const double> density, bool at_cells, double width) {
    const std::size_t cells = problem.mesh.cells();
    const auto& momentum = problem.protons.momentum;
    LocalResonance local(problem, at_cells, width);
    PlaceResonance row;
    Resonance result;
    const auto append_log = [](const std::vector<double>& values, std::vector<double>& to) {
        for (const double value : values) {
            to.push_back(std::log(value));
        }
    };
    for (std::size_t node = 0; node < momentum.size(); ++node) {
        local.find(momentum[node], density.subspan(node * cells, cells), row);
        append_log(row.pressure, result.log_pressure);
        append_log(row.gradient, result.log_gradient);
        result.direction.insert(result.direction.end(), row.direction.begin(), row.direction.end());
    }
    return result;
}

} // namespace aureole::transport
