#pragma once

#include "map_products.hpp"
#include "predict_inputs.hpp"

#include "aureole/emission/emit.hpp"
#include "aureole/media/media.hpp"
#include "aureole/spectra/source.hpp"

#include <vector>

namespace aureole::app {

/// A galaxy whose emission is seen.
struct Galaxy {
    const grid::Grid& grid;
    const media::Media& media;
    const std::vector<spectra::Source>& sources;
    const emission::Processes& processes;
    const MapSettings& settings;
};

/// The maps of all channels.
struct Evaluation {
    std::vector<MapProduct> products; ///< totals by channel, then Q and U, then each process apart
    emission::EmissionReport report;  ///< without planes
    std::vector<ChannelGroup> groups;
    std::vector<emission::Emitted> tables; ///< [groups] without emissivity
};

/// Emission and maps, one group of channels after another, so that the emissivity of one group alone is held.
/// A group has its own sampling of the pixels: results of one and of several groups agree within the
/// tolerance. alike: of the same channels and spectra on other cells.
Evaluation evaluate(const Galaxy& galaxy,
                    const std::vector<emission::Channel>& channels,
                    const std::vector<ChannelGroup>& groups,
                    const RunContext& context,
                    const Evaluation* alike = nullptr);

/// The same galaxy on cells twice as wide, with half the sectors. sources: on those cells; null: averages of
/// the galaxy's.
Evaluation evaluate_coarser(const Galaxy& galaxy,
                            const std::vector<emission::Channel>& channels,
                            const Evaluation& fine,
                            const std::vector<spectra::Source>* sources,
                            const RunContext& context);

} // namespace aureole::app
