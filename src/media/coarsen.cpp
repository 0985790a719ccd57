#include "aureole/base/parallel.hpp"
#include "aureole/media/media.hpp"

#include <cstddef>
#include <functional>

namespace aureole::media {

namespace {

/// Volume-weighted averages of `per_cell` numbers a cell.
class Averager {
  public:
    explicit Averager(const grid::Grid& fine)
        : coarse_of_(grid::coarse_cell(fine)), volume_(grid::cell_volumes(fine)),
          total_(grid::coarsened(fine).stored_cells(), 0.0) {
        for (std::size_t cell = 0; cell < volume_.size(); ++cell) {
            total_[coarse_of_[cell]] += volume_[cell];
        }
    }

    std::vector<float> scalar(const std::vector<float>& values, std::size_t per_cell = 1) const {
        if (values.empty()) {
            return {};
        }
        std::vector<double> sum(total_.size() * per_cell, 0.0);
        for (std::size_t cell = 0; cell < volume_.size(); ++cell) {
            for (std::size_t v = 0; v < per_cell; ++v) {
                sum[coarse_of_[cell] * per_cell + v] +=
                    volume_[cell] * static_cast<double>(values[cell * per_cell + v]);
            }
        }
        std::vector<float> result(sum.size());
        for (std::size_t i = 0; i < sum.size(); ++i) {
            result[i] = static_cast<float>(sum[i] / total_[i / per_cell]);
        }
        return result;
    }

    std::vector<std::array<float, 3>> vector(const std::vector<std::array<float, 3>>& values) const {
        if (values.empty()) {
            return {};
        }
        std::vector<float> flat;
        flat.reserve(3 * values.size());
        for (const auto& v : values) {
            flat.insert(flat.end(), v.begin(), v.end());
        }
        const auto mean = scalar(flat, 3);
        std::vector<std::array<float, 3>> result(total_.size());
        for (std::size_t i = 0; i < mean.size(); ++i) {
            result[i / 3][i % 3] = mean[i];
        }
        return result;
    }

  private:
    std::vector<std::size_t> coarse_of_;
    std::vector<double> volume_, total_;
};

} // namespace

Media coarsened(const Media& media, const grid::Grid& fine, const RunContext& context) {
    const Averager average(fine);
    Media coarse;
    coarse.field.parity = media.field.parity;
    std::vector<std::function<void()>> parts{
        [&] { coarse.field.ordered = average.vector(media.field.ordered); },
        [&] { coarse.field.random_rms = average.scalar(media.field.random_rms); },
        [&] { coarse.turbulent_speed = average.scalar(media.turbulent_speed); },
        [&] { coarse.turbulent_scale = average.scalar(media.turbulent_scale); },
        [&] { coarse.velocity = average.vector(media.velocity); }};
    for (auto member : {&Gas::hi, &Gas::h2, &Gas::hii, &Gas::electrons, &Gas::temperature}) {
        parts.emplace_back([&, member] { coarse.gas.*member = average.scalar(media.gas.*member); });
    }
    coarse.radiation.resize(media.radiation.size());
    for (std::size_t r = 0; r < media.radiation.size(); ++r) {
        parts.emplace_back([&, r] {
            const Radiation& field = media.radiation[r];
            coarse.radiation[r] = {field.name,
                                   field.temperature,
                                   field.uniform_density,
                                   average.scalar(field.energy_density),
                                   field.photon_energy,
                                   average.scalar(field.photon_density, field.photon_energy.size())};
        });
    }
    for_each_block(context, parts.size(), [&](std::size_t part) { parts[part](); });
    return coarse;
}

} // namespace aureole::media
