#include "aureole/spectra/basis.hpp"

#include "aureole/base/error.hpp"
#include "aureole/spectra/unpack.hpp"

#include <fmt/format.h>

#include <algorithm>
#include <cmath>

namespace aureole::spectra {

namespace {
constexpr std::size_t sample_points = 7;
}

Basis::Basis(std::vector<double> kinetic_energy) : energy_(std::move(kinetic_energy)) {
    if (energy_.size() < 2) {
        throw Error(ErrorKind::input,
                    fmt::format("found {} energy nodes, expected at least 2", energy_.size()));
    }
    for (std::size_t i = 0; i < energy_.size(); ++i) {
        if (!(energy_[i] > 0) || !std::isfinite(energy_[i]) || (i > 0 && !(energy_[i] > energy_[i - 1]))) {
            throw Error(ErrorKind::input,
                        fmt::format("energy node {} is not above the one before it", i + 1));
        }
        log_energy_.push_back(std::log(energy_[i]));
    }
    stencil_ = std::min<std::size_t>(4, energy_.size());
    left_ratio_.assign(intervals(), 0);
    right_ratio_.assign(intervals(), 0);
    samples_.assign(intervals() * sample_points, {});
    for (std::size_t j = 0; j < intervals(); ++j) {
        const std::size_t inner = j - stencil_start(j);
        const double width = log_energy_[j + 1] - log_energy_[j];
        for (std::size_t p = 0; p < sample_points; ++p) {
            const double place = log_energy_[j] + width * static_cast<double>(p + 1) / (sample_points + 1);
            const auto weight = cubic(j, place);
            for (std::size_t s = 0; s < 4; ++s) {
                samples_[j * sample_points + p][s] = static_cast<float>(weight[s]);
            }
        }
        // The ratios are monotonic over the interval: the largest |left/inner| is reached at the right node,
        // as a limit.
        if (stencil_ == 4 && inner == 1) {
            const auto at_right = cubic(j, log_energy_[j + 1] - 1e-6 * width);
            const auto at_left = cubic(j, log_energy_[j] + 1e-6 * width);
            left_ratio_[j] = static_cast<float>(1.0001 * std::abs(at_right[0] / at_right[1]));
            right_ratio_[j] = static_cast<float>(1.0001 * std::abs(at_left[3] / at_left[2]));
        } else {
            left_ratio_[j] = right_ratio_[j] = -1;
        }
    }
    // At an end one weight is negative, that of the node across the next interval's; against that of the node
    // between them it is largest, as a limit, where both vanish.
    if (stencil_ == 4) {
        const std::size_t last = intervals() - 1;
        const double width = log_energy_[1] - log_energy_[0];
        const auto first_weight = cubic(0, log_energy_[0] + 1e-6 * width);
        const auto last_weight =
            cubic(last, log_energy_[last + 1] - 1e-6 * (log_energy_[last + 1] - log_energy_[last]));
        end_ratio_ = {static_cast<float>(1.0001 * std::abs(first_weight[2] / first_weight[1])),
                      static_cast<float>(1.0001 * std::abs(last_weight[1] / last_weight[2]))};
    }
}

std::size_t Basis::stencil_start(std::size_t interval) const {
    const std::size_t wanted = interval == 0 ? 0 : interval - 1;
    return std::min(wanted, energy_.size() - stencil_);
}

std::array<double, 4> Basis::cubic(std::size_t interval, double log_energy) const {
    std::array<double, 4> weight{};
    const double* node = log_energy_.data() + stencil_start(interval);
    for (std::size_t a = 0; a < stencil_; ++a) {
        double product = 1;
        for (std::size_t b = 0; b < stencil_; ++b) {
            if (b != a) {
                product *= (log_energy - node[b]) / (node[a] - node[b]);
            }
        }
        weight[a] = product;
    }
    return weight;
}

std::array<double, 2> Basis::hats(std::size_t interval, double log_energy) const {
    const double t =
        (log_energy - log_energy_[interval]) / (log_energy_[interval + 1] - log_energy_[interval]);
    return {1 - t, t};
}

double Basis::value(std::span<const float> weighted, double kinetic_energy) const {
    if (!(kinetic_energy >= energy_.front()) || kinetic_energy > energy_.back()) {
        return 0;
    }
    const auto above = std::upper_bound(energy_.begin(), energy_.end(), kinetic_energy);
    const auto interval = std::min(static_cast<std::size_t>(above - energy_.begin()) - 1, intervals() - 1);
    const double place = std::log(kinetic_energy);
    const std::size_t start = stencil_start(interval);
    bool negative = false;
    for (std::size_t p = 0; p < sample_points; ++p) {
        const auto& weight = samples_[interval * sample_points + p];
        float sum = 0;
        for (std::size_t s = 0; s < stencil_; ++s) {
            sum += weight[s] * weighted[start + s];
        }
        negative = negative || sum < 0;
    }
    double sum = 0;
    if (negative) {
        const auto weight = hats(interval, place);
        return weight[0] * weighted[interval] + weight[1] * weighted[interval + 1];
    }
    const auto weight = cubic(interval, place);
    for (std::size_t s = 0; s < stencil_; ++s) {
        sum += weight[s] * weighted[start + s];
    }
    return std::max(sum, 0.0);
}

std::size_t Basis::negative_intervals(const float* weighted, std::size_t* found) const {
    std::size_t count = 0;
    const std::size_t last = intervals();
    const bool suspects =
        last > 2 && any_below_ratio(weighted + 1, left_ratio_.data() + 1, right_ratio_.data() + 1, last - 2);
    for (std::size_t j = 0; j < last; ++j) {
        const bool one_sided = left_ratio_[j] < 0;
        if (one_sided && stencil_ == 4) {
            if (j == 0 ? weighted[1] >= end_ratio_[0] * weighted[2]
                       : weighted[last - 1] >= end_ratio_[1] * weighted[last - 2]) {
                continue;
            }
        }
        if (!one_sided) {
            if (!suspects) {
                j = last - 2;
                continue;
            }
            if (weighted[j] >= left_ratio_[j] * weighted[j - 1] &&
                weighted[j + 1] >= right_ratio_[j] * weighted[j + 2]) {
                continue;
            }
        }
        const float* node = weighted + stencil_start(j);
        bool negative = false;
        for (std::size_t p = 0; p < sample_points; ++p) {
            const auto& weight = samples_[j * sample_points + p];
            float sum = 0;
            for (std::size_t s = 0; s < stencil_; ++s) {
                sum += weight[s] * node[s];
            }
            negative = negative || sum < 0;
        }
        if (negative) {
            found[count++] = j;
        }
    }
    return count;
}

} // namespace aureole::spectra
