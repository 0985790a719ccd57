#pragma once

#include "map_products.hpp"

#include "aureole/profiles/heights.hpp"
#include "aureole/scenario/scenario.hpp"

#include <optional>
#include <string>
#include <vector>

namespace aureole::app {

/// Heights of the maps of one band, which share beam, pixels and unit.
struct BandHeights {
    std::vector<std::string> labels; ///< of the maps, as in HeightRow::image
    profiles::HeightsSpec spec;
    profiles::HeightsReport report;
    std::string problem; ///< why there are none; empty otherwise
};

struct PredictedHeights {
    std::optional<BandHeights> radio, gamma;
};

/// Profiles and heights of the total maps of each band; their numerical errors from the same fits to the
/// coarser maps (none where `coarse` is empty).
PredictedHeights measure_heights(const scenario::Scenario& scenario,
                                 const MapSettings& settings,
                                 const std::vector<MapProduct>& products,
                                 const std::vector<MapProduct>& coarse,
                                 const RunContext& context);

} // namespace aureole::app
