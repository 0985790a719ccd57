#include "predict_inputs.hpp"

#include "aureole/base/constants.hpp"
#include "aureole/base/error.hpp"
#include "aureole/grid/scenario_grid.hpp"
#include "aureole/physics/synchrotron.hpp"
#include "aureole/transport/read_scenario.hpp"

#include <fmt/format.h>

#include <algorithm>
#include <cmath>

namespace aureole::app {

using emission::Band;
using emission::Channel;

Inputs read_inputs(const scenario::Scenario& scenario) {
    Inputs inputs;
    inputs.file = grid::scenario_grid_file(scenario);
    inputs.grid = inputs.file ? inputs.file->grid : grid::scenario_grid(scenario);
    inputs.channels = emission::channels(scenario);
    if (inputs.channels.empty()) {
        throw Error(
            ErrorKind::scenario,
            fmt::format(
                "{}: found no channels, expected radio.frequencies, gamma.energies or gamma.band_edges",
                scenario.file().string()));
    }
    for (std::size_t c = 1; c < inputs.channels.size(); ++c) {
        if (file_label(inputs.channels[c]) == file_label(inputs.channels[c - 1])) {
            throw Error(
                ErrorKind::scenario,
                fmt::format("{}: found two channels at {}, expected channels that differ in four digits",
                            scenario.file().string(), emission::label(inputs.channels[c])));
        }
    }
    inputs.processes = emission::processes(scenario);
    inputs.settings = map_settings(scenario, inputs.grid);
    return inputs;
}

transport::TransportSpec read_transport(const scenario::Scenario& scenario, const Inputs& inputs) {
    auto spec = transport::read_transport(scenario);
    const auto needed = [](const Channel& channel) {
        constexpr double field = 1e-6; // G
        const double gamma = std::sqrt(channel.to / (physics::synchrotron_critical_constant * field));
        return channel.band == Band::radio ? gamma * constants::electron_rest_energy : channel.to;
    };
    const Channel& top =
        *std::max_element(inputs.channels.begin(), inputs.channels.end(),
                          [&](const Channel& a, const Channel& b) { return needed(a) < needed(b); });
    constexpr double reserve = 10;
    if (spec.energy_to < reserve * needed(top)) {
        throw Error(
            ErrorKind::scenario,
            fmt::format("{}: transport.energy_to: found {:.3g} GeV, expected at least {:.3g} GeV, ten times "
                        "the energy of particles that emit at {}",
                        scenario.file().string(), spec.energy_to / constants::gigaelectronvolt,
                        reserve * needed(top) / constants::gigaelectronvolt, emission::label(top)));
    }
    return spec;
}

std::size_t plane_count(const Inputs& inputs, const scenario::Scenario& scenario, const ChannelGroup& group) {
    const std::size_t processes =
        inputs.processes.separate
            ? scenario.names("radiation.component").size() + (scenario.boolean("radiation.cmb") ? 1 : 0) + 4
            : 0;
    std::size_t planes = 0;
    for (std::size_t c = group.first; c < group.first + group.count; ++c) {
        const bool radio = inputs.channels[c].band == Band::radio;
        planes += 1 + (radio ? (inputs.processes.polarisation ? 2 : 0) : processes);
    }
    return planes;
}

std::vector<ChannelGroup> channel_groups(const Inputs& inputs,
                                         const scenario::Scenario& scenario,
                                         std::size_t cells,
                                         std::size_t bytes) {
    std::vector<ChannelGroup> groups{{0, 1}};
    for (std::size_t c = 1; c < inputs.channels.size(); ++c) {
        const ChannelGroup longer{groups.back().first, groups.back().count + 1};
        if (cells * plane_count(inputs, scenario, longer) * sizeof(float) <= bytes) {
            groups.back() = longer;
        } else {
            groups.push_back({c, 1});
        }
    }
    return groups;
}

} // namespace aureole::app
