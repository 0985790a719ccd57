#include "aureole/transport/operator.hpp"

#include <algorithm>
#include <cmath>
#include <limits>

namespace aureole::transport {
namespace {

std::uint32_t entry_of(const Pattern& pattern, std::uint32_t row, std::uint32_t column) {
    const auto begin = pattern.column.begin() + pattern.row_start[row];
    const auto end = pattern.column.begin() + pattern.row_start[row + 1];
    return static_cast<std::uint32_t>(std::lower_bound(begin, end, column) - pattern.column.begin());
}

/// Speed e of the condition F = (max(w, 0) + e) N on the face; infinite where the density there is 0.
double leaving_speed(const Boundary& boundary, const BoundaryFace& face, double diffusion, double speed) {
    switch (boundary.kind) {
    case BoundaryKind::free_escape:
        return std::numeric_limits<double>::infinity();
    case BoundaryKind::marshak:
        return 0.5 * speed;
    case BoundaryKind::inverse_radius:
        return diffusion * (1 + boundary.slope) * face.inverse_radius;
    case BoundaryKind::outflow:
    case BoundaryKind::reflecting:
        break;
    }
    return 0;
}

/// Flux through an outer face per density of its cell [cm s-1]: half a cell in series with the side.
double boundary_speed(
    const Boundary& boundary, const BoundaryFace& face, double diffusion, double flow, double speed) {
    if (boundary.kind == BoundaryKind::reflecting) {
        return 0;
    }
    const double side = std::max(flow, 0.0) + leaving_speed(boundary, face, diffusion, speed);
    const double conductance = diffusion / face.distance;
    if (conductance == 0) {
        return std::max(flow, 0.0);
    }
    const double towards = conductance * bernoulli(-flow / conductance);
    const double back = conductance * bernoulli(flow / conductance);
    return std::isinf(side) ? towards : towards * side / (side + back);
}

void add_corner(const Pattern& pattern,
                std::size_t index,
                const Corner& corner,
                const CornerTensor& tensor,
                std::vector<double>& values) {
    for (std::size_t a = 0; a < 4; ++a) {
        const double flux_r = tensor[0] * corner.radial[a] + tensor[1] * corner.vertical[a];
        const double flux_z = tensor[1] * corner.radial[a] + tensor[2] * corner.vertical[a];
        for (std::size_t b = 0; b < 4; ++b) {
            values[pattern.corner_entry[16 * index + 4 * a + b]] +=
                corner.volume * (flux_r * corner.radial[b] + flux_z * corner.vertical[b]);
        }
    }
}

} // namespace

double bernoulli(double x) {
    if (std::abs(x) < 1e-5) {
        return 1 - 0.5 * x + x * x / 12;
    }
    return x > 700 ? 0.0 : x / std::expm1(x);
}

Pattern make_pattern(const Mesh& mesh, std::span<const Corner> corners) {
    std::vector<std::vector<std::uint32_t>> columns(mesh.cells());
    for (std::uint32_t cell = 0; cell < mesh.cells(); ++cell) {
        columns[cell].push_back(cell);
    }
    for (const Face& face : mesh.faces) {
        columns[face.first].push_back(face.second);
        columns[face.second].push_back(face.first);
    }
    for (const Corner& corner : corners) {
        for (const std::uint32_t a : corner.cell) {
            for (const std::uint32_t b : corner.cell) {
                columns[a].push_back(b);
            }
        }
    }
    Pattern pattern;
    pattern.row_start.push_back(0);
    for (auto& row : columns) {
        std::sort(row.begin(), row.end());
        row.erase(std::unique(row.begin(), row.end()), row.end());
        pattern.column.insert(pattern.column.end(), row.begin(), row.end());
        pattern.row_start.push_back(static_cast<std::uint32_t>(pattern.column.size()));
    }
    for (std::uint32_t cell = 0; cell < mesh.cells(); ++cell) {
        pattern.diagonal.push_back(entry_of(pattern, cell, cell));
    }
    for (const Face& face : mesh.faces) {
        pattern.face_entry.push_back(entry_of(pattern, face.first, face.second));
        pattern.face_entry.push_back(entry_of(pattern, face.second, face.first));
    }
    for (const Corner& corner : corners) {
        for (const std::uint32_t a : corner.cell) {
            for (const std::uint32_t b : corner.cell) {
                pattern.corner_entry.push_back(entry_of(pattern, a, b));
            }
        }
    }
    return pattern;
}

void assemble(const Mesh& mesh,
              const Pattern& pattern,
              std::span<const Corner> corners,
              std::span<const Boundary> sides,
              const SpatialCoefficients& coefficients,
              SpatialOperator& result) {
    auto& values = result.values;
    values.assign(pattern.column.size(), 0.0);
    result.outflow.assign(mesh.boundary.size(), 0.0);
    result.symmetric = coefficients.flow.empty();
    for (std::size_t f = 0; f < mesh.faces.size(); ++f) {
        const Face& face = mesh.faces[f];
        const double conductance =
            coefficients.diffusion[f] * face.area / (face.first_distance + face.second_distance);
        double forth = conductance;
        double back = conductance;
        if (!coefficients.flow.empty()) {
            const double carried = coefficients.flow[f] * face.area;
            if (conductance > 0) {
                const double peclet = carried / conductance;
                back = conductance * bernoulli(peclet);
                forth = back + carried; // B(-x) = B(x) + x
                if (peclet < 0) {
                    forth = conductance * bernoulli(-peclet);
                    back = forth - carried;
                }
            } else {
                forth = std::max(carried, 0.0);
                back = std::max(-carried, 0.0);
            }
        }
        values[pattern.diagonal[face.first]] += forth;
        values[pattern.diagonal[face.second]] += back;
        values[pattern.face_entry[2 * f]] -= back;
        values[pattern.face_entry[2 * f + 1]] -= forth;
    }
    for (std::size_t f = 0; f < mesh.boundary.size(); ++f) {
        const BoundaryFace& face = mesh.boundary[f];
        const double flow = coefficients.boundary_flow.empty() ? 0.0 : coefficients.boundary_flow[f];
        result.outflow[f] =
            face.area * boundary_speed(sides[face.side], face, coefficients.boundary_diffusion[f], flow,
                                       coefficients.speed);
        values[pattern.diagonal[face.cell]] += result.outflow[f];
    }
    if (!coefficients.aligned.empty()) {
        for (std::size_t c = 0; c < corners.size(); ++c) {
            add_corner(pattern, c, corners[c], coefficients.aligned[c], values);
        }
    }
    if (!coefficients.rate.empty()) {
        for (std::size_t cell = 0; cell < mesh.cells(); ++cell) {
            values[pattern.diagonal[cell]] += mesh.volume[cell] * coefficients.rate[cell];
        }
    }
}

void apply(const Pattern& pattern,
           const SpatialOperator& op,
           std::span<const double> density,
           std::span<double> out) {
    for (std::size_t row = 0; row < pattern.rows(); ++row) {
        double sum = 0;
        for (std::uint32_t e = pattern.row_start[row]; e < pattern.row_start[row + 1]; ++e) {
            sum += op.values[e] * density[pattern.column[e]];
        }
        out[row] = sum;
    }
}

} // namespace aureole::transport
