#include "aureole/base/constants.hpp"
#include "aureole/emission/channels.hpp"

#include <fmt/format.h>

#include <cmath>

namespace aureole::emission {

namespace {

std::string with_prefix(double value, const char* unit) {
    struct Prefix {
        double size;
        const char* name;
    };
    for (const Prefix& prefix : {Prefix{1e12, "T"}, {1e9, "G"}, {1e6, "M"}, {1e3, "k"}}) {
        if (value >= 0.9999999 * prefix.size) {
            return fmt::format("{:.4g} {}{}", value / prefix.size, prefix.name, unit);
        }
    }
    return fmt::format("{:.4g} {}", value, unit);
}

} // namespace

double Channel::centre() const {
    return band == Band::radio ? 0.5 * (from + to) : std::sqrt(from * to);
}

std::string label(const Channel& channel) {
    const auto one = [&](double value) {
        return channel.band == Band::radio ? with_prefix(value, "Hz")
                                           : with_prefix(value / constants::electronvolt, "eV");
    };
    if (channel.band == Band::radio) {
        return one(channel.centre());
    }
    return channel.is_band() ? one(channel.from) + " - " + one(channel.to) : one(channel.from);
}

} // namespace aureole::emission
