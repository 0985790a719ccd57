#pragma once

#include "aureole/transport/corner_tensor.hpp"
#include "aureole/transport/mesh.hpp"

#include <cstddef>
#include <cstdint>
#include <span>
#include <vector>

namespace aureole::transport {

/// What particles meet at an outer side of the mesh.
enum class BoundaryKind {
    reflecting,     ///< nothing passes
    free_escape,    ///< density 0 on the face
    marshak,        ///< diffusive flux v N/2 on the face (extrapolation length 2 kappa/v)
    inverse_radius, ///< diffusive flux kappa N (1 + slope)/r, r from the origin: the tail N ~ r^-(1+slope)
    outflow,        ///< no diffusive flux: only the flow carries particles out
};

struct Boundary {
    BoundaryKind kind = BoundaryKind::free_escape;
    double slope = 0; ///< of inverse_radius
};

/// div(K grad N - w N) - rate N at one momentum: coefficients on faces and in cells.
struct SpatialCoefficients {
    std::vector<double> diffusion;          ///< [faces] cm2 s-1, across the face
    std::vector<double> boundary_diffusion; ///< [boundary faces] cm2 s-1
    std::vector<double> flow;               ///< [faces] w.n from first to second, cm s-1; empty: at rest
    std::vector<double> boundary_flow;      ///< [boundary faces] w.n outwards, cm s-1; empty: at rest
    std::vector<double> rate;               ///< [cells] catastrophic losses, s-1; empty: none
    std::vector<CornerTensor> aligned;      ///< [corners] (k_par - k_perp) b b, cm2 s-1; empty: none
    double speed = 0;                       ///< of the particles, cm s-1: marshak sides and the limiter
};

/// Places of the entries of a sparse matrix whose pattern is symmetric, by rows, columns ascending.
struct Pattern {
    std::vector<std::uint32_t> row_start;    ///< [cells + 1]
    std::vector<std::uint32_t> column;       ///< [entries]
    std::vector<std::uint32_t> diagonal;     ///< [cells] entry (i, i)
    std::vector<std::uint32_t> face_entry;   ///< [2 faces] entries (first, second) and (second, first)
    std::vector<std::uint32_t> corner_entry; ///< [16 corners] entry (cell a, cell b) at 4 a + b

    std::size_t rows() const { return diagonal.size(); }
};

/// Pattern of the operator of a mesh; with corners it holds the diagonal neighbours too.
Pattern make_pattern(const Mesh& mesh, std::span<const Corner> corners);

/// The operator integrated over cells, with its sign turned: row i of A N is what leaves cell i per second.
struct SpatialOperator {
    std::vector<double> values;  ///< [entries of the pattern] cm3 s-1
    std::vector<double> outflow; ///< [boundary faces] particles leaving per density of the cell, cm3 s-1
    bool symmetric = true;       ///< no flow anywhere
};

/// Finite volumes: central differences across faces; where gas flows, fluxes that solve the
/// one-dimensional equation between two cell centres (Scharfetter & Gummel 1969, IEEE Trans. El. Dev. 16,
/// 64), upwind for fast flows; a half cell in series with every outer side. Without the aligned part an
/// M-matrix for any flow; the aligned part is positive semi-definite and keeps constants and particle number.
/// sides      [mesh.sides] what is met there
/// Second order on smooth meshes while the flow is slower than diffusion across one cell, else first.
void assemble(const Mesh& mesh,
              const Pattern& pattern,
              std::span<const Corner> corners,
              std::span<const Boundary> sides,
              const SpatialCoefficients& coefficients,
              SpatialOperator& result);

/// out = A density.
void apply(const Pattern& pattern,
           const SpatialOperator& op,
           std::span<const double> density,
           std::span<double> out);

/// x/(exp(x) - 1).
double bernoulli(double x);

} // namespace aureole::transport
