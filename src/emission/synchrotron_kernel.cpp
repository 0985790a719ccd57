#include "synchrotron_kernel.hpp"

#include "aureole/physics/synchrotron.hpp"

#include <cmath>

namespace aureole::emission {

std::array<double, 2> KernelTable::at(double log_x) const {
    if (log_x < first + step) {
        const double f = std::exp(log_total.front() + (log_x - first) / 3);
        return {f, f * ratio.front()};
    }
    const double place = (log_x - first) / step;
    const auto cell = static_cast<std::size_t>(place);
    if (cell + 2 >= log_total.size()) {
        return {0, 0};
    }
    const double t = place - static_cast<double>(cell);
    const double w0 = -t * (t - 1) * (t - 2) / 6;
    const double w1 = (t + 1) * (t - 1) * (t - 2) / 2;
    const double w2 = -(t + 1) * t * (t - 2) / 2;
    const double w3 = (t + 1) * t * (t - 1) / 6;
    const auto blend = [&](const std::vector<double>& v) {
        return w0 * v[cell - 1] + w1 * v[cell] + w2 * v[cell + 1] + w3 * v[cell + 2];
    };
    const double f = std::exp(blend(log_total));
    return {f, f * blend(ratio)};
}

KernelTable kernel_table(double order) {
    KernelTable table;
    for (double log_x = KernelTable::first; log_x < std::log(KernelTable::largest_x);
         log_x += KernelTable::step) {
        const auto pair = physics::mixed_field(std::exp(log_x), order);
        if (!(pair.total > 0)) {
            break;
        }
        table.log_total.push_back(std::log(pair.total));
        table.ratio.push_back(pair.polarised / pair.total);
    }
    return table;
}

} // namespace aureole::emission
