#include "aureole/emission/emit.hpp"

#include "emission_check.hpp"
#include "products.hpp"
#include "synchrotron_cells.hpp"

#include "aureole/base/parallel.hpp"
#include "aureole/base/pool.hpp"
#include "aureole/base/progress.hpp"
#include "aureole/emission/kernels.hpp"

#include <algorithm>
#include <map>

namespace aureole::emission {

namespace {

using grid::Cells;
using spectra::Source;
using spectra::Species;

const Source* find(const std::vector<Source>& sources, Species species) {
    const auto found =
        std::find_if(sources.begin(), sources.end(), [&](const Source& s) { return s.species == species; });
    return found == sources.end() ? nullptr : &*found;
}

/// Where everything goes in a row of planes: totals of every channel first, then Q and U, then each process
/// apart.
struct Layout {
    std::vector<Plane> planes;
    std::vector<std::size_t> radio, gamma; // channels of each band, which are also their total planes
    std::size_t stokes = 0;                // first Q plane; 0: none
    std::map<std::string, std::size_t> process_start; // first plane of a process kept apart
    std::vector<std::size_t> term_start;              // the same per product term
};

Layout lay_out(const std::vector<Channel>& channels,
               const Processes& processes,
               const ProductPlan& plan,
               bool synchrotron) {
    Layout layout;
    for (std::size_t c = 0; c < channels.size(); ++c) {
        (channels[c].band == Band::gamma ? layout.gamma : layout.radio).push_back(c);
        layout.planes.push_back({channels[c].band, "total", c, false, 1});
    }
    if (synchrotron && processes.polarisation && !layout.radio.empty()) {
        layout.stokes = layout.planes.size();
        for (const char* stokes : {"synchrotron_q", "synchrotron_u"}) {
            for (const std::size_t c : layout.radio) {
                layout.planes.push_back({Band::radio, stokes, c, true, 1});
            }
        }
    }
    if (processes.separate) {
        for (const ProductTerm& term : plan.terms) {
            const auto [place, is_new] = layout.process_start.try_emplace(term.process, layout.planes.size());
            layout.term_start.push_back(place->second);
            for (std::size_t g = 0; g < layout.gamma.size() && is_new; ++g) {
                layout.planes.push_back({Band::gamma, term.process, layout.gamma[g], false, 1});
            }
        }
    }
    return layout;
}

/// Spectra of a block of cells with what follows from them at once: products, and the intervals that fall
/// back to straight lines.
struct SpeciesBlock {
    std::vector<float> spectra, sums;
    std::vector<std::size_t> negative, negative_start, found;

    std::span<const std::size_t> negative_of(std::size_t cell) const {
        return {negative.data() + negative_start[cell], negative_start[cell + 1] - negative_start[cell]};
    }
    std::size_t cells_with_fallback() const {
        std::size_t count = 0;
        for (std::size_t c = 0; c + 1 < negative_start.size(); ++c) {
            count += negative_start[c + 1] > negative_start[c] ? 1 : 0;
        }
        return count;
    }

    void read(const Source& source,
              const Source::Reader& reader,
              const ProductSet& set,
              std::size_t first,
              std::size_t count,
              bool portable) {
        if (spectra.size() < count * set.stride) {
            spectra.assign(count * set.stride, 0.0F);
        }
        reader(first, count, spectra.data(), set.stride);
        negative.clear();
        negative_start.assign(1, 0);
        found.resize(source.basis->intervals());
        for (std::size_t c = 0; c < count; ++c) {
            const std::size_t n =
                source.basis->negative_intervals(spectra.data() + c * set.stride, found.data());
            negative.insert(negative.end(), found.begin(), found.begin() + static_cast<std::ptrdiff_t>(n));
            negative_start.push_back(negative.size());
        }
        if (set.rows == 0) {
            return;
        }
        sums.resize(count * set.rows);
        kernels::products(set.packed.data(), set.rows, spectra.data(), count, set.nodes, set.stride,
                          sums.data(), portable);
        for (std::size_t c = 0; c < count; ++c) {
            for (const std::size_t interval : negative_of(c)) {
                set.add_fallback(*source.basis, interval, spectra.data() + c * set.stride,
                                 sums.data() + c * set.rows);
            }
        }
    }
};

struct Scratch {
    Source::Reader electron_reader, proton_reader;
    SpeciesBlock electrons, protons;
    std::vector<float> row; // all gamma planes of one cell
};

/// Calls body(cell, i, j, k) for every cell of the whole galaxy that a stored cell stands for: sectors, then
/// the mirror image.
template <class Body> void for_each_target(const Cells& cells, std::size_t stored_cell, Body&& body) {
    const grid::Grid& grid = cells.stored;
    const std::size_t k = stored_cell / grid.plane_cells();
    const std::size_t in_plane = stored_cell % grid.plane_cells();
    const std::size_t i = in_plane % grid.nx();
    const bool rz = grid.geometry == grid::Geometry::rz;
    const std::size_t first_row = rz ? 0 : in_plane / grid.nx();
    const std::size_t last_row = rz ? cells.sectors : first_row + 1;
    const auto both_sides = [&](std::size_t plane) {
        for (std::size_t j = first_row; j < last_row; ++j) {
            body(i + cells.nx() * (j + cells.n2() * plane), i, j, plane);
        }
    };
    both_sides(grid.mirrored ? grid.nz() + k : k);
    if (grid.mirrored) {
        both_sides(grid.nz() - 1 - k);
    }
}

} // namespace

Emitted emit(const grid::Grid& grid,
             const media::Media& media,
             const std::vector<Source>& sources,
             const std::vector<Channel>& channels,
             const Processes& processes,
             const Orientation& orientation,
             const RunContext& context) {
    const Source* electrons = find(sources, Species::electrons);
    const Source* protons = find(sources, Species::protons);
    const ProductPlan plan = plan_products(media, processes, electrons != nullptr, protons != nullptr);
    const bool wants_synchrotron = processes.synchrotron && electrons != nullptr;
    const Layout layout = lay_out(channels, processes, plan, wants_synchrotron);

    auto electron_set = build_products(plan, Species::electrons, electrons, channels, layout.gamma, context);
    auto proton_set = build_products(plan, Species::protons, protons, channels, layout.gamma, context);
    SynchrotronCells synchrotron;
    if (wants_synchrotron) {
        synchrotron = prepare_synchrotron(*electrons->basis, media.field, channels, layout.radio,
                                          layout.stokes != 0, context);
    }

    Emitted result;
    Emissivity& field = result.emissivity;
    field.cells = grid::whole_galaxy(
        grid, synchrotron.active() && !media.field.ordered.empty() ? processes.sectors : 1);
    field.planes = layout.planes;
    std::vector<double> gamma_unit;
    for (std::size_t g = 0; g < layout.gamma.size(); ++g) {
        gamma_unit.push_back(std::max({electron_set.largest[g], proton_set.largest[g], 1e-300}) * 1e-16);
    }
    for (Plane& plane : field.planes) {
        for (std::size_t g = 0; g < layout.gamma.size(); ++g) {
            plane.unit = plane.channel == layout.gamma[g] ? gamma_unit[g] : plane.unit;
        }
        for (std::size_t r = 0; r < layout.radio.size() && synchrotron.active(); ++r) {
            plane.unit = plane.channel == layout.radio[r] ? synchrotron.unit[r] : plane.unit;
        }
    }
    pack(electron_set, gamma_unit);
    pack(proton_set, gamma_unit);

    const std::size_t planes = field.planes.size();
    const std::size_t gammas = layout.gamma.size();
    field.value.assign(field.cells.size() * planes, 0.0F);

    constexpr std::size_t block_cells = 240;
    const std::size_t stored = grid.stored_cells();
    const std::size_t blocks = (stored + block_cells - 1) / block_cells;
    std::vector<std::size_t> fallback_cells(blocks, 0);
    Pool<Scratch> scratch_pool([&] {
        Scratch scratch;
        scratch.electron_reader = electrons != nullptr ? electrons->open() : nullptr;
        scratch.proton_reader = protons != nullptr ? protons->open() : nullptr;
        return scratch;
    });
    Progress progress(context, "emission", blocks);
    const bool uses_protons = protons != nullptr && !proton_set.kernels.empty() && gammas > 0;
    const bool uses_electrons =
        electrons != nullptr && (synchrotron.active() || (!electron_set.kernels.empty() && gammas > 0));

    const auto work = [&](std::size_t block, Scratch& scratch) {
        const std::size_t first = block * block_cells;
        const std::size_t count = std::min(block_cells, stored - first);
        if (uses_protons) {
            scratch.protons.read(*protons, scratch.proton_reader, proton_set, first, count,
                                 context.reproducible);
            fallback_cells[block] += scratch.protons.cells_with_fallback();
        }
        if (uses_electrons) {
            scratch.electrons.read(*electrons, scratch.electron_reader, electron_set, first, count,
                                   context.reproducible);
            fallback_cells[block] += scratch.electrons.cells_with_fallback();
        }
        scratch.row.assign(planes, 0.0F);
        for (std::size_t c = 0; c < count; ++c) {
            std::fill(scratch.row.begin(), scratch.row.end(), 0.0F);
            for (std::size_t t = 0; t < plan.terms.size() && gammas > 0; ++t) {
                const ProductTerm& term = plan.terms[t];
                const bool is_proton = plan.kernels[term.kernel].species == Species::protons;
                const ProductSet& set = is_proton ? proton_set : electron_set;
                const SpeciesBlock& species = is_proton ? scratch.protons : scratch.electrons;
                const float scalar = term.scalar(first + c);
                const float* sums = species.sums.data() + c * set.rows + set.first_row(term.kernel);
                for (std::size_t g = 0; g < gammas; ++g) {
                    const float value = std::max(0.0F, scalar * sums[g]);
                    scratch.row[layout.gamma[g]] += value;
                    if (!layout.term_start.empty()) {
                        scratch.row[layout.term_start[t] + g] += value;
                    }
                }
            }
            for_each_target(
                field.cells, first + c, [&](std::size_t cell, std::size_t i, std::size_t j, std::size_t k) {
                    float* out = field.value.data() + cell * planes;
                    std::copy(scratch.row.begin(), scratch.row.end(), out);
                    if (synchrotron.active()) {
                        synchrotron.emit(
                            field_seen(media.field, field.cells, first + c, i, j, k, orientation),
                            scratch.electrons.spectra.data() + c * electron_set.stride, *electrons->basis,
                            scratch.electrons.negative_of(c), layout.radio, out,
                            layout.stokes == 0 ? nullptr : out + layout.stokes, context.reproducible);
                    }
                });
        }
        progress.step();
    };
    for_each_block(context, blocks, [&](std::size_t block) {
        scratch_pool.with([&](Scratch& scratch) { work(block, scratch); });
    });
    if (uses_electrons && electrons->finish) {
        electrons->finish();
    }
    if (uses_protons && protons->finish) {
        protons->finish();
    }
    for (const std::size_t n : fallback_cells) {
        result.report.cells_with_fallback += n;
    }
    result.report.planes = luminosities(field);
    result.report.share_below_gamma_10 = check_spectra(result.report.planes, grid, media, plan, sources,
                                                       channels, synchrotron.active(), context);
    return result;
}

} // namespace aureole::emission
