#include "aureole/emission/emit.hpp"

#include "emission_check.hpp"
#include "products.hpp"
#include "synchrotron_cells.hpp"

#include "aureole/base/constants.hpp"
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
    LargeArray<float> spectra, sums;
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
    std::vector<float> rows;    // [cell][plane], radio planes 0
    std::vector<float> totals;  // [cell][gamma channel]
    std::vector<float> numbers; // [cell] of one term
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

struct Tables {
    ProductSet electron_set, proton_set;
    SynchrotronCells synchrotron;
    std::vector<double> gamma_unit; // [gamma channels] CGS of one stored unit
};

namespace {

/// What all blocks of a run share.
struct Run {
    const Source* electrons = nullptr;
    const Source* protons = nullptr;
    ProductPlan plan;
    Layout layout;
    std::shared_ptr<const Tables> tables;
    bool uses_electrons = false, uses_protons = false;

    const ProductSet& electron_set() const { return tables->electron_set; }
    const ProductSet& proton_set() const { return tables->proton_set; }
    const SynchrotronCells& synchrotron() const { return tables->synchrotron; }

    Scratch scratch() const {
        Scratch result;
        result.electron_reader = electrons != nullptr ? electrons->open() : nullptr;
        result.proton_reader = protons != nullptr ? protons->open() : nullptr;
        return result;
    }
};

std::shared_ptr<const Tables> make_tables(const Run& run,
                                          const media::Media& media,
                                          const std::vector<Channel>& channels,
                                          bool synchrotron,
                                          const RunContext& context) {
    auto tables = std::make_shared<Tables>();
    const auto& gamma = run.layout.gamma;
    tables->electron_set =
        build_products(run.plan, Species::electrons, run.electrons, channels, gamma, context);
    tables->proton_set = build_products(run.plan, Species::protons, run.protons, channels, gamma, context);
    if (synchrotron) {
        tables->synchrotron = prepare_synchrotron(*run.electrons->basis, media.field, channels,
                                                  run.layout.radio, run.layout.stokes != 0, context);
    }
    for (std::size_t g = 0; g < gamma.size(); ++g) {
        tables->gamma_unit.push_back(
            std::max({tables->electron_set.largest[g], tables->proton_set.largest[g], 1e-300}) * 1e-16);
    }
    pack(tables->electron_set, tables->gamma_unit);
    pack(tables->proton_set, tables->gamma_unit);
    return tables;
}

Run prepare(const media::Media& media,
            const std::vector<Source>& sources,
            const std::vector<Channel>& channels,
            const Processes& processes,
            const RunContext& context,
            const Emitted* alike) {
    Run run;
    run.electrons = find(sources, Species::electrons);
    run.protons = find(sources, Species::protons);
    run.plan = plan_products(media, processes, run.electrons != nullptr, run.protons != nullptr);
    const bool synchrotron = processes.synchrotron && run.electrons != nullptr;
    run.layout = lay_out(channels, processes, run.plan, synchrotron);
    run.tables = alike != nullptr ? alike->tables : make_tables(run, media, channels, synchrotron, context);
    const bool gamma = !run.layout.gamma.empty();
    run.uses_protons = gamma && !run.proton_set().kernels.empty();
    run.uses_electrons = run.synchrotron().active() || (gamma && !run.electron_set().kernels.empty());
    return run;
}

/// The planes with the scale of their stored numbers.
std::vector<Plane> scaled_planes(const Run& run) {
    const Layout& layout = run.layout;
    auto planes = layout.planes;
    for (Plane& plane : planes) {
        for (std::size_t g = 0; g < layout.gamma.size(); ++g) {
            plane.unit = plane.channel == layout.gamma[g] ? run.tables->gamma_unit[g] : plane.unit;
        }
        for (std::size_t r = 0; r < layout.radio.size() && run.synchrotron().active(); ++r) {
            plane.unit = plane.channel == layout.radio[r] ? run.synchrotron().unit[r] : plane.unit;
        }
    }
    return planes;
}

/// Writes the gamma planes of the block's cells to rows[cell][plane]; radio planes become 0.
void add_products(
    const Run& run, std::size_t first, std::size_t count, std::size_t planes, Scratch& scratch, float* rows) {
    const Layout& layout = run.layout;
    const std::size_t channels = layout.gamma.size();
    std::fill_n(rows, count * planes, 0.0F);
    scratch.totals.assign(count * channels, 0.0F);
    scratch.numbers.resize(count);
    for (std::size_t t = 0; t < run.plan.terms.size() && channels > 0; ++t) {
        const ProductTerm& term = run.plan.terms[t];
        const bool is_proton = run.plan.kernels[term.kernel].species == Species::protons;
        const ProductSet& set = is_proton ? run.proton_set() : run.electron_set();
        const SpeciesBlock& species = is_proton ? scratch.protons : scratch.electrons;
        term.numbers(first, count, scratch.numbers.data());
        const float* sums = species.sums.data() + set.first_row(term.kernel);
        const bool apart = !layout.term_start.empty();
        for (std::size_t c = 0; c < count; ++c) {
            float* total = scratch.totals.data() + c * channels;
            float* own = apart ? rows + c * planes + layout.term_start[t] : nullptr;
            const float number = scratch.numbers[c];
            for (std::size_t g = 0; g < channels; ++g) {
                const float value = std::max(0.0F, number * sums[c * set.rows + g]);
                total[g] += value;
                if (apart) {
                    own[g] += value;
                }
            }
        }
    }
    for (std::size_t c = 0; c < count; ++c) {
        for (std::size_t g = 0; g < channels; ++g) {
            rows[c * planes + layout.gamma[g]] = scratch.totals[c * channels + g];
        }
    }
}

/// Fills the cells that stored cells first .. first + count - 1 stand for and adds emissivity x volume to
/// luminosity [plane]. Returns how many spectra fell back to straight lines.
std::size_t emit_block(const Run& run,
                       const media::Media& media,
                       const Orientation& orientation,
                       std::size_t first,
                       std::size_t count,
                       bool portable,
                       Scratch& scratch,
                       Emissivity& field,
                       double* luminosity) {
    std::size_t fallback_cells = 0;
    if (run.uses_protons) {
        scratch.protons.read(*run.protons, scratch.proton_reader, run.proton_set(), first, count, portable);
        fallback_cells += scratch.protons.cells_with_fallback();
    }
    if (run.uses_electrons) {
        scratch.electrons.read(*run.electrons, scratch.electron_reader, run.electron_set(), first, count,
                               portable);
        fallback_cells += scratch.electrons.cells_with_fallback();
    }
    const std::size_t planes = field.planes.size();
    const std::size_t stokes = run.layout.stokes;
    // A stored cell that stands for itself alone is filled in place.
    const bool in_place = !field.cells.stored.mirrored && field.cells.sectors == 1;
    scratch.rows.resize(in_place ? 0 : count * planes);
    float* rows = in_place ? field.value.data() + first * planes : scratch.rows.data();
    add_products(run, first, count, planes, scratch, rows);
    for (std::size_t c = 0; c < count; ++c) {
        const float* row = rows + c * planes;
        for_each_target(field.cells, first + c,
                        [&](std::size_t cell, std::size_t i, std::size_t j, std::size_t k) {
                            float* out = field.value.data() + cell * planes;
                            if (!in_place) {
                                std::copy_n(row, planes, out);
                            }
                            if (run.synchrotron().active()) {
                                run.synchrotron().emit(
                                    field_seen(media.field, field.cells, first + c, i, j, k, orientation),
                                    scratch.electrons.spectra.data() + c * run.electron_set().stride,
                                    *run.electrons->basis, scratch.electrons.negative_of(c), run.layout.radio,
                                    out, stokes == 0 ? nullptr : out + stokes, portable);
                            }
                            const double volume = grid::cell_volume(field.cells, i, j, k);
                            for (std::size_t p = 0; p < planes; ++p) {
                                luminosity[p] += volume * static_cast<double>(out[p]);
                            }
                        });
    }
    return fallback_cells;
}

/// From the sums of emissivity x volume of all blocks, [block][plane].
std::vector<PlaneReport> luminosities(const std::vector<Plane>& planes, const std::vector<double>& sums) {
    std::vector<PlaneReport> reports(planes.size());
    for (std::size_t p = 0; p < planes.size(); ++p) {
        double sum = 0;
        for (std::size_t place = p; place < sums.size(); place += planes.size()) {
            sum += sums[place];
        }
        reports[p].luminosity = 4 * constants::pi * sum * planes[p].unit;
    }
    return reports;
}

} // namespace

Emitted emit(const grid::Grid& grid,
             const media::Media& media,
             const std::vector<Source>& sources,
             const std::vector<Channel>& channels,
             const Processes& processes,
             const Orientation& orientation,
             const RunContext& context,
             const Emitted* alike) {
    const Run run = prepare(media, sources, channels, processes, context, alike);
    Emitted result;
    result.tables = run.tables;
    Emissivity& field = result.emissivity;
    const bool turns_with_azimuth = run.synchrotron().active() && !media.field.ordered.empty();
    field.cells = grid::whole_galaxy(grid, turns_with_azimuth ? processes.sectors : 1);
    field.planes = scaled_planes(run);
    field.value.resize(field.cells.size() * field.planes.size());

    constexpr std::size_t block_cells = 240;
    const std::size_t stored = grid.stored_cells();
    const std::size_t blocks = (stored + block_cells - 1) / block_cells;
    std::vector<std::size_t> fallback_cells(blocks, 0);
    std::vector<double> sums(blocks * field.planes.size(), 0.0); // emissivity x volume
    Pool<Scratch> scratch_pool([&] { return run.scratch(); });
    Progress progress(context, "emission", blocks);
    for_each_block(context, blocks, [&](std::size_t block) {
        const std::size_t first = block * block_cells;
        scratch_pool.with([&](Scratch& scratch) {
            fallback_cells[block] =
                emit_block(run, media, orientation, first, std::min(block_cells, stored - first),
                           context.reproducible, scratch, field, sums.data() + block * field.planes.size());
        });
        progress.step();
    });
    if (run.uses_electrons && run.electrons->finish) {
        run.electrons->finish();
    }
    if (run.uses_protons && run.protons->finish) {
        run.protons->finish();
    }
    for (const std::size_t n : fallback_cells) {
        result.report.cells_with_fallback += n;
    }
    result.report.planes = luminosities(field.planes, sums);
    if (alike == nullptr) {
        result.report.share_below_gamma_10 = check_spectra(result.report.planes, grid, media, run.plan,
                                                           {&run.electron_set(), &run.proton_set()}, sources,
                                                           channels, run.synchrotron().active(), context);
    }
    return result;
}

} // namespace aureole::emission
