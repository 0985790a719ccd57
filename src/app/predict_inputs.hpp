#pragma once

#include "map_products.hpp"

#include "aureole/emission/emit.hpp"
#include "aureole/grid/grid_file.hpp"
#include "aureole/scenario/scenario.hpp"
#include "aureole/transport/spec.hpp"

#include <cstddef>
#include <optional>
#include <vector>

namespace aureole::app {

/// Everything a run starts from.
struct Inputs {
    std::optional<grid::GridFile> file;
    grid::Grid grid;
    std::vector<emission::Channel> channels;
    emission::Processes processes;
    MapSettings settings;
};

/// Throws Error(scenario) without channels, and for two of one label.
Inputs read_inputs(const scenario::Scenario& scenario);

/// Neighbouring channels of a scenario that are emitted and mapped together.
struct ChannelGroup {
    std::size_t first = 0, count = 0;
};

/// What the scenario asks of the transport solver. Throws as transport::read_transport(), and Error(scenario)
/// where transport.energy_to is less than ten times the energy that a channel needs: the photon's own, or
/// that of electrons whose critical frequency in 1 uG is the channel's.
transport::TransportSpec read_transport(const scenario::Scenario& scenario, const Inputs& inputs);

/// Number of planes that a group of channels makes, before the media are known: an upper bound where
/// processes are kept apart.
std::size_t plane_count(const Inputs& inputs, const scenario::Scenario& scenario, const ChannelGroup& group);

/// All channels in one group if the emissivity of that many `cells` fits into `bytes`, else the longest
/// groups that do; a channel that does not fit stands alone.
std::vector<ChannelGroup> channel_groups(const Inputs& inputs,
                                         const scenario::Scenario& scenario,
                                         std::size_t cells,
                                         std::size_t bytes);

} // namespace aureole::app
