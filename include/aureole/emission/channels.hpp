#pragma once

#include "aureole/emission/emissivity.hpp"
#include "aureole/scenario/scenario.hpp"

#include <string>
#include <vector>

namespace aureole::emission {

/// A place in the spectrum where maps are made: one frequency or photon energy (from == to), or a band.
struct Channel {
    Band band = Band::radio;
    double from = 0, to = 0; ///< Hz, or erg
    bool is_band() const { return to > from; }
    double centre() const; ///< middle of a radio band; logarithmic middle of a gamma band
};

/// Radio channels are averages over their band; gamma channels that are bands are integrals over energy.
std::vector<Channel> channels(const scenario::Scenario& scenario);

/// "1.4 GHz", "1 GeV", "1 - 10 GeV": for tables and messages.
std::string label(const Channel& channel);

} // namespace aureole::emission
