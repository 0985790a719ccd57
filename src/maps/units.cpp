#include "aureole/maps/units.hpp"

#include "aureole/base/constants.hpp"
#include "aureole/base/error.hpp"

#include <fmt/format.h>

namespace aureole::maps {

double
radio_factor(const std::string& unit, double frequency, const std::optional<Beam>& beam, double pixel_area) {
    using namespace constants;
    if (unit == "Jy/beam") {
        if (!beam) {
            throw Error(
                ErrorKind::scenario,
                "radio.unit: found \"Jy/beam\" without a beam, expected radio.beam_major, or another unit");
        }
        return solid_angle(*beam) / jansky;
    }
    if (unit == "Jy/pixel") {
        return pixel_area / jansky;
    }
    if (unit == "MJy/sr") {
        return 1e-6 / jansky;
    }
    if (unit == "K" && !(frequency > 0)) {
        throw Error(ErrorKind::scenario,
                    fmt::format("found unit \"K\" at {} Hz, expected a frequency above 0", frequency));
    }
    if (unit == "K") {
        return speed_of_light * speed_of_light / (2 * boltzmann * frequency * frequency);
    }
    throw Error(ErrorKind::scenario,
                fmt::format("found unit \"{}\", expected Jy/beam, Jy/pixel, MJy/sr or K", unit));
}

double gamma_factor(const std::string& unit) {
    if (unit == "cm-2 s-1 sr-1 MeV-1") {
        return constants::megaelectronvolt;
    }
    if (unit == "cm-2 s-1 sr-1 GeV-1") {
        return constants::gigaelectronvolt;
    }
    if (unit == "cm-2 s-1 sr-1") {
        return 1;
    }
    throw Error(ErrorKind::scenario,
                fmt::format("found unit \"{}\", expected cm-2 s-1 sr-1 with MeV-1, GeV-1 or neither", unit));
}

} // namespace aureole::maps
