#pragma once

#include "maps/camera.hpp"

#include "aureole/base/run_context.hpp"
#include "aureole/emission/emissivity.hpp"

#include <cstdint>
#include <vector>

namespace aureole::maps {

/// What a map should hold, summed over the cells. All [plane].
struct FluxBudget {
    std::vector<double> expected; ///< integral of the emissivity over the galaxy / distance^2
    std::vector<double> outside;  ///< the part of it seen beyond the map's border
    std::vector<double> scale;    ///< integral of |emissivity| / distance^2
    std::vector<float> brightest; ///< largest |emissivity|
};

/// Accuracy of `outside`: cells that the border cuts are counted by 512 points, 8 along each edge (rings: 2
/// along R and z, 128 around).
FluxBudget
flux_budget(const emission::Emissivity& emissivity, const Camera& camera, const RunContext& context);

/// Distance of the farthest corner of the cells from the galaxy's centre, cm.
double half_diagonal(const grid::Cells& cells);

/// [pixel] Level of subdivision at which no bright cell (over 1 percent of its plane's brightest) is narrower
/// on the sky than the distance of neighbouring rays; at most `max_level`.
std::vector<std::uint8_t> first_levels(const emission::Emissivity& emissivity,
                                       const Camera& camera,
                                       const std::vector<float>& brightest,
                                       int max_level,
                                       const RunContext& context);

} // namespace aureole::maps
