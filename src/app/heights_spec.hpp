#pragma once

#include "aureole/app/heights.hpp"
#include "aureole/maps/image.hpp"
#include "aureole/maps/read_fits.hpp"
#include "aureole/profiles/heights.hpp"

#include <optional>
#include <span>
#include <string>
#include <vector>

namespace aureole::app {

/// What was said of the galaxy by options and headers, and notes on what was assumed.
struct HeightsRequest {
    profiles::HeightsSpec spec;
    std::vector<std::string> notes;
};

/// "15 arcsec", or "15 arcsec, 12 arcsec, 30 deg". Nothing for "". Throws Error(usage).
std::optional<maps::Beam> read_beam_option(const std::string& text);

/// originals: the maps as read; images: after bringing them to one beam and grid; facts: of the first map.
/// Throws Error(usage) naming the option.
HeightsRequest read_request(const HeightsArguments& arguments,
                            std::span<const maps::Image> originals,
                            std::span<const maps::Image> images,
                            const maps::MapFacts& facts);

} // namespace aureole::app
