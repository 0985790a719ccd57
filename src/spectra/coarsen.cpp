#include "aureole/spectra/source.hpp"

#include <algorithm>

namespace aureole::spectra {

namespace {

/// What a coarse cell is made of: runs of neighbouring fine cells, so that they are read together.
struct Recipe {
    std::vector<std::size_t> start; // [coarse + 1] into `fine`
    std::vector<std::size_t> fine;  // fine cells, grouped by coarse cell
    std::vector<float> share;       // volume of the fine cell over that of the coarse one
};

Recipe recipe(const grid::Grid& fine) {
    const auto coarse_of = grid::coarse_cell(fine);
    const auto volume = grid::cell_volumes(fine);
    const std::size_t coarse_cells = grid::coarsened(fine).stored_cells();
    Recipe result;
    result.start.assign(coarse_cells + 1, 0);
    std::vector<double> total(coarse_cells, 0.0);
    for (std::size_t cell = 0; cell < coarse_of.size(); ++cell) {
        ++result.start[coarse_of[cell] + 1];
        total[coarse_of[cell]] += volume[cell];
    }
    for (std::size_t c = 0; c < coarse_cells; ++c) {
        result.start[c + 1] += result.start[c];
    }
    auto next = result.start;
    result.fine.resize(coarse_of.size());
    result.share.resize(coarse_of.size());
    for (std::size_t cell = 0; cell < coarse_of.size(); ++cell) {
        const std::size_t place = next[coarse_of[cell]]++;
        result.fine[place] = cell;
        result.share[place] = static_cast<float>(volume[cell] / total[coarse_of[cell]]);
    }
    return result;
}

} // namespace

Source coarsened(const Source& source, const grid::Grid& fine) {
    Source coarse = source;
    const auto parts = std::make_shared<const Recipe>(recipe(fine));
    coarse.cells = parts->start.size() - 1;
    coarse.finish = nullptr;
    coarse.open = [parts, open = source.open, nodes = source.basis->nodes()]() -> Source::Reader {
        const auto read_fine = open();
        const auto buffer = std::make_shared<std::vector<float>>();
        return [parts, read_fine, buffer, nodes](std::size_t first, std::size_t count, float* weighted,
                                                 std::size_t stride) {
            for (std::size_t c = 0; c < count; ++c) {
                float* out = weighted + c * stride;
                std::fill(out, out + nodes, 0.0F);
            }
            // Fine cells of a row of coarse cells form long runs; each run is read once.
            const std::size_t begin = parts->start[first];
            const std::size_t end = parts->start[first + count];
            std::vector<std::size_t> order(end - begin);
            for (std::size_t i = 0; i < order.size(); ++i) {
                order[i] = begin + i;
            }
            std::sort(order.begin(), order.end(),
                      [&](std::size_t a, std::size_t b) { return parts->fine[a] < parts->fine[b]; });
            constexpr std::size_t longest_run = 256;
            for (std::size_t i = 0; i < order.size();) {
                std::size_t run = 1;
                while (i + run < order.size() && run < longest_run &&
                       parts->fine[order[i + run]] == parts->fine[order[i]] + run) {
                    ++run;
                }
                buffer->resize(run * nodes);
                read_fine(parts->fine[order[i]], run, buffer->data(), nodes);
                for (std::size_t r = 0; r < run; ++r) {
                    const std::size_t place = order[i + r];
                    const auto owner = std::upper_bound(
                        parts->start.begin() + static_cast<std::ptrdiff_t>(first), parts->start.end(), place);
                    const auto target = static_cast<std::size_t>(owner - parts->start.begin()) - 1;
                    float* out = weighted + (target - first) * stride;
                    const float* in = buffer->data() + r * nodes;
                    for (std::size_t n = 0; n < nodes; ++n) {
                        out[n] += parts->share[place] * in[n];
                    }
                }
                i += run;
            }
        };
    };
    return coarse;
}

} // namespace aureole::spectra
