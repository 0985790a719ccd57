#include "aureole/emission/channels.hpp"
#include "aureole/emission/emit.hpp"

namespace aureole::emission {

std::vector<Channel> channels(const scenario::Scenario& scenario) {
    std::vector<Channel> result;
    const double half_band = 0.5 * scenario.quantity("radio.bandwidth");
    for (const double frequency : scenario.quantities("radio.frequencies")) {
        result.push_back({Band::radio, frequency - half_band, frequency + half_band});
    }
    for (const double energy : scenario.quantities("gamma.energies")) {
        result.push_back({Band::gamma, energy, energy});
    }
    const auto edges = scenario.quantities("gamma.band_edges");
    for (std::size_t i = 1; i < edges.size(); ++i) {
        result.push_back({Band::gamma, edges[i - 1], edges[i]});
    }
    return result;
}

Processes processes(const scenario::Scenario& scenario) {
    Processes result;
    result.synchrotron = scenario.boolean("emission.synchrotron");
    result.inverse_compton = scenario.boolean("emission.inverse_compton");
    result.bremsstrahlung = scenario.boolean("emission.bremsstrahlung");
    result.pion_decay = scenario.boolean("emission.pion_decay");
    result.pion_model = scenario.text("emission.pion_model");
    result.nuclear_enhancement = scenario.number("emission.nuclear_enhancement");
    result.helium_fraction = scenario.number("emission.helium_fraction");
    result.separate = scenario.boolean("map.separate");
    result.polarisation = scenario.boolean("map.polarisation");
    result.sectors = static_cast<std::size_t>(scenario.integer("grid.sectors"));
    return result;
}

} // namespace aureole::emission
