#pragma once

#include "aureole/base/error.hpp"

#include <fmt/format.h>

#include <algorithm>
#include <cmath>
#include <functional>
#include <string>

namespace aureole::transport {

/// The factor > 0 at which a rising function of it has a value, to `tolerance` in the logarithm. Secants in
/// both logarithms, kept inside a bracket once there is one. Throws Error(scenario) where the function
/// levels off on this side of the value.
inline double factor_for(const std::function<double(double)>& quantity,
                         double value,
                         const std::string& name,
                         double tolerance = 1e-7) {
    constexpr double longest = 7; // e-folds of the factor in a step
    constexpr double farthest = 60;
    constexpr double level = 0.01; // slope of the logarithms that counts as none
    constexpr int most_level_steps = 3;
    constexpr int most_steps = 60;
    struct Point {
        double x, y;
    };
    double least = 0;
    double most = 0;
    const auto at = [&](double x) {
        const double found = quantity(std::exp(x));
        least = least == 0 ? found : std::min(least, found);
        most = std::max(most, found);
        if (!(found > 0) || !std::isfinite(found)) {
            throw Error(ErrorKind::scenario,
                        fmt::format("anchor: found {:g} for the {} with the law times {:g}, expected a "
                                    "number > 0",
                                    found, name, std::exp(x)));
        }
        return Point{x, std::log(found / value)};
    };
    const auto give_up = [&] {
        throw Error(ErrorKind::scenario,
                    fmt::format("anchor: found no factor of the law that gives the {} {:g} (CGS): scaled "
                                "solutions have {:g} to {:g}; expected a value between those",
                                name, value, least, most));
    };
    Point before = at(0);
    if (std::abs(before.y) <= tolerance) {
        return 1;
    }
    Point last = at(std::clamp(-before.y, -longest, longest));
    bool bracketed = false;
    int level_steps = 0;
    Point other = before; // the far end of the bracket
    for (int step = 0; step < most_steps; ++step) {
        if (std::abs(last.y) <= tolerance) {
            return std::exp(last.x);
        }
        if (!bracketed && before.y * last.y < 0) {
            bracketed = true;
            other = before;
        }
        const double slope = (last.y - before.y) / (last.x - before.x);
        double next = last.x - last.y / slope;
        if (!bracketed && !(slope > level)) {
            next = last.y > 0 ? last.x - longest : last.x + longest;
            ++level_steps;
        }
        if (!bracketed && (level_steps > most_level_steps || std::abs(last.x) > farthest)) {
            give_up();
        }
        if (bracketed) {
            const double low = std::min(last.x, other.x);
            const double high = std::max(last.x, other.x);
            if (!(next > low && next < high)) {
                next = 0.5 * (low + high);
            }
            if (high - low < 1e-13 * (1 + std::abs(low))) {
                give_up();
            }
        } else {
            next = last.x + std::clamp(next - last.x, -longest, longest);
        }
        const Point found = at(next);
        if (bracketed && found.y * last.y < 0) {
            other = last;
        }
        before = last;
        last = found;
    }
    give_up();
    return 0;
}

} // namespace aureole::transport
