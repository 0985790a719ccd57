#pragma once

#include "aureole/maps/image.hpp"

#include <optional>
#include <string>

namespace aureole::maps {

/// Factor from radio surface brightness in erg s-1 cm-2 Hz-1 sr-1 to a unit of maps: "Jy/beam", "Jy/pixel",
/// "MJy/sr", or "K" (Rayleigh-Jeans brightness temperature c^2 I/(2 k nu^2)). Throws Error(scenario) for
/// "Jy/beam" without a beam or another unit.
double
radio_factor(const std::string& unit, double frequency, const std::optional<Beam>& beam, double pixel_area);

/// Factor from s-1 cm-2 sr-1 erg-1 to "cm-2 s-1 sr-1 MeV-1" or "... GeV-1"; 1 for "cm-2 s-1 sr-1".
double gamma_factor(const std::string& unit);

} // namespace aureole::maps
