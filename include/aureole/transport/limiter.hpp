#pragma once

#include "aureole/transport/operator.hpp"

#include <span>
#include <vector>

namespace aureole::transport {

/// How the diffusive flux F = -kappa L(X) grad N, X = kappa |grad N|/(v N), is kept below v N.
enum class Limiter {
    none,                ///< L = 1
    square_root,         ///< L = 1/sqrt(1 + X^2)
    levermore_pomraning, ///< L = 3 (coth R - 1/R)/R, R = 3 X (Levermore & Pomraning 1981, ApJ 248, 321)
    sum,                 ///< L = 1/(1 + X)
};

/// L(X), X >= 0: falls from 1 at 0 to 1/X.
double limited_fraction(Limiter limiter, double x);

/// L on all faces, and on all corners where the diffusivity has an aligned part.
struct LimitedFaces {
    std::vector<double> face, boundary, corner;
};

/// L for a density [cells]; only its shape matters. |grad N| on a face is made of the difference across it
/// and the means of the derivatives of both cells along it; N there is the logarithmic mean of both cells. In
/// the half cell of an outer side the density on the side follows from `result.boundary` of the call before.
/// On corners the derivative along the field counts.
/// unlimited  coefficients with the diffusivities of L = 1, and the particles' speed
void limit(const Mesh& mesh,
           std::span<const Corner> corners,
           std::span<const Boundary> sides,
           Limiter limiter,
           const SpatialCoefficients& unlimited,
           std::span<const double> density,
           LimitedFaces& result);

/// Smallest L over the faces of each cell.
std::vector<float> smallest_fraction(const Mesh& mesh, const LimitedFaces& fractions);

} // namespace aureole::transport
