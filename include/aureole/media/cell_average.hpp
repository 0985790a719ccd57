#pragma once

#include "aureole/base/run_context.hpp"
#include "aureole/grid/grid.hpp"
#include "aureole/scenario/scenario.hpp"

#include <cstddef>
#include <functional>
#include <optional>
#include <vector>

namespace aureole::media {

/// Shape of a spatial profile, without its amplitude, at cylindrical radius R and height z, both cm. Only for
/// the closed kinds (not `file`, `formula`).
///   constant 1;  double_exponential exp(-R/radius - |z|/h);  sech2 exp(-R/radius) / cosh^2(z/h);
///   gaussian exp(-R^2/radius^2 - z^2/h^2);  beta (1 + r^2/core^2)^(-1.5 slope);  power_law (1 +
///   r/core)^(-slope),
/// with h = height exp(R/flare) where a flare is given, and r^2 = R^2 + z^2.
/// Sources: exponential and sech2 discs, van der Kruit & Searle 1981, A&A 95, 105; beta model, Cavaliere &
/// Fusco-Femiano 1976, A&A 49, 137.
double profile_shape(const scenario::ProfileSpec& profile, double radius, double height);

/// Averages over stored cells `first_plane` .. `last_plane` - 1 (z planes) of amplitude x shape, integrals
/// over the cell and not centre samples: Gauss-Legendre with 3 points per axis in panels that start at half
/// the scale length at the end nearest to the centre and grow by a quarter each, split at 0; for the steep
/// ends of beta and power_law the scale is the core over the logarithmic slope. Accuracy 1e-8 (exponentials),
/// 1e-6 (sech2, gaussian, beta) however thick the cell. A formula is refined by halving until its average is
/// stable to 1e-4 (at most 4 times). Result [cells of these planes], in CGS of the profile's value. Throws
/// Error(scenario) naming the key and the place where a formula is not finite, or negative where
/// `allow_negative` is false, and for a profile of kind `file`.
std::vector<double> cell_averages(const scenario::ProfileSpec& profile,
                                  const grid::Grid& grid,
                                  std::size_t first_plane,
                                  std::size_t last_plane,
                                  bool allow_negative);

/// A profile that is a function of R times one of z: averages over the columns, amplitude included, and over
/// the layers. The average over a cell is across[i + nx j] x along[k].
struct AverageFactors {
    std::vector<double> across; ///< [plane_cells]
    std::vector<double> along;  ///< [nz]
};

/// Nothing unless the kind is double_exponential, sech2 or gaussian, without a flare. Accuracy as
/// cell_averages.
std::optional<AverageFactors> average_factors(const scenario::ProfileSpec& profile, const grid::Grid& grid);

/// The whole grid; in parallel over planes, or from the factors where there are such.
std::vector<float> cell_averages(const scenario::ProfileSpec& profile,
                                 const grid::Grid& grid,
                                 bool allow_negative,
                                 const RunContext& context);

} // namespace aureole::media
