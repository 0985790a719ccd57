#include "aureole/spectra/source.hpp"
#include "aureole/spectra/unpack.hpp"

#include <algorithm>

namespace aureole::spectra {

namespace {

/// What coarse cells are made of. The fine cells of one are in ascending order, so that neighbours along the
/// first axis form a piece.
struct Recipe {
    struct Piece {
        std::size_t cell;  // first fine cell
        std::size_t count; // fine cells one after another
    };
    std::vector<std::size_t> start; // [coarse + 1] into `piece`
    std::vector<Piece> piece;
    std::vector<float> share; // [fine] volume of the fine cell over that of the coarse one
};

Recipe recipe(const grid::Grid& fine) {
    const auto coarse_of = grid::coarse_cell(fine);
    const auto volume = grid::cell_volumes(fine);
    const std::size_t coarse_cells = grid::coarsened(fine).stored_cells();
    std::vector<double> total(coarse_cells, 0.0);
    Recipe result;
    result.start.assign(coarse_cells + 1, 0);
    const auto begins_piece = [&](std::size_t cell) {
        return cell == 0 || coarse_of[cell] != coarse_of[cell - 1];
    };
    for (std::size_t cell = 0; cell < coarse_of.size(); ++cell) {
        total[coarse_of[cell]] += volume[cell];
        result.start[coarse_of[cell] + 1] += begins_piece(cell) ? 1 : 0;
    }
    for (std::size_t c = 0; c < coarse_cells; ++c) {
        result.start[c + 1] += result.start[c];
    }
    auto next = result.start;
    result.piece.resize(result.start.back());
    result.share.resize(coarse_of.size());
    for (std::size_t cell = 0; cell < coarse_of.size(); ++cell) {
        const std::size_t coarse = coarse_of[cell];
        result.share[cell] = static_cast<float>(volume[cell] / total[coarse]);
        if (begins_piece(cell)) {
            result.piece[next[coarse]++] = {cell, 1};
        } else {
            ++result.piece[next[coarse] - 1].count;
        }
    }
    return result;
}

/// Averages of coarse cells first .. first + count - 1. The n-th pieces of neighbouring coarse cells follow
/// one another in the file: they are read together.
void read_averages(const Recipe& parts,
                   const Source::Reader& read_fine,
                   std::vector<float>& buffer,
                   std::size_t nodes,
                   std::size_t first,
                   std::size_t count,
                   float* weighted,
                   std::size_t stride) {
    const auto pieces_of = [&](std::size_t coarse) { return parts.start[coarse + 1] - parts.start[coarse]; };
    std::size_t most = 0;
    for (std::size_t c = 0; c < count; ++c) {
        std::fill_n(weighted + c * stride, nodes, 0.0F);
        most = std::max(most, pieces_of(first + c));
    }
    for (std::size_t n = 0; n < most; ++n) {
        for (std::size_t c = 0; c < count;) {
            if (n >= pieces_of(first + c)) {
                ++c;
                continue;
            }
            const auto piece = [&](std::size_t coarse) { return parts.piece[parts.start[coarse] + n]; };
            const std::size_t start = piece(first + c).cell;
            std::size_t end = start;
            std::size_t last = c;
            while (last < count && n < pieces_of(first + last) && piece(first + last).cell == end) {
                end += piece(first + last).count;
                ++last;
            }
            buffer.resize((end - start) * nodes);
            read_fine(start, end - start, buffer.data(), nodes);
            const float* from = buffer.data();
            for (; c < last; ++c) {
                const auto [cell, cells] = piece(first + c);
                for (std::size_t i = 0; i < cells; ++i, from += nodes) {
                    add_scaled(from, parts.share[cell + i], nodes, weighted + c * stride);
                }
            }
        }
    }
}

} // namespace

std::vector<Source> coarsened(const std::vector<Source>& sources, const grid::Grid& fine) {
    const auto parts = std::make_shared<const Recipe>(recipe(fine));
    std::vector<Source> result;
    for (const Source& source : sources) {
        Source coarse = source;
        coarse.cells = parts->start.size() - 1;
        coarse.finish = nullptr;
        coarse.open = [parts, open = source.open, nodes = source.basis->nodes()]() -> Source::Reader {
            const auto buffer = std::make_shared<std::vector<float>>();
            return [parts, read_fine = open(), buffer, nodes](std::size_t first, std::size_t count,
                                                              float* weighted, std::size_t stride) {
                read_averages(*parts, read_fine, *buffer, nodes, first, count, weighted, stride);
            };
        };
        result.push_back(std::move(coarse));
    }
    return result;
}

} // namespace aureole::spectra
