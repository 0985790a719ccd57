#include "aureole/app/predict.hpp"

#include "map_products.hpp"
#include "predict_heights.hpp"
#include "predict_tables.hpp"

#include "aureole/base/constants.hpp"
#include "aureole/base/error.hpp"
#include "aureole/files/hash.hpp"
#include "aureole/files/run_folder.hpp"
#include "aureole/grid/scenario_grid.hpp"
#include "aureole/media/media.hpp"
#include "aureole/sight/orientation.hpp"
#include "aureole/spectra/file_source.hpp"
#include "aureole/version.hpp"

#include <fmt/format.h>

#include <algorithm>
#include <chrono>
#include <cmath>

namespace aureole::app {

namespace {

using emission::Band;
using emission::Channel;
using Clock = std::chrono::steady_clock;

/// Everything a run starts from.
struct Inputs {
    std::optional<grid::GridFile> file;
    grid::Grid grid;
    std::vector<Channel> channels;
    emission::Processes processes;
    MapSettings settings;
};

Inputs read_inputs(const scenario::Scenario& scenario) {
    Inputs inputs;
    inputs.file = grid::scenario_grid_file(scenario);
    inputs.grid = inputs.file ? inputs.file->grid : grid::scenario_grid(scenario);
    inputs.channels = emission::channels(scenario);
    if (inputs.channels.empty()) {
        throw Error(
            ErrorKind::scenario,
            fmt::format(
                "{}: found no channels, expected radio.frequencies, gamma.energies or gamma.band_edges",
                scenario.file().string()));
    }
    inputs.processes = emission::processes(scenario);
    inputs.settings = map_settings(scenario, inputs.grid);
    return inputs;
}

/// Number of planes of a run, before the media are known: an upper bound where processes are kept apart.
std::size_t plane_count(const Inputs& inputs, const scenario::Scenario& scenario) {
    const auto radio =
        static_cast<std::size_t>(std::count_if(inputs.channels.begin(), inputs.channels.end(),
                                               [](const Channel& c) { return c.band == Band::radio; }));
    const std::size_t gamma = inputs.channels.size() - radio;
    std::size_t planes = radio + gamma;
    if (inputs.processes.polarisation) {
        planes += 2 * radio;
    }
    if (inputs.processes.separate) {
        const std::size_t fields =
            scenario.names("radiation.component").size() + (scenario.boolean("radiation.cmb") ? 1 : 0);
        planes += gamma * (fields + 4);
    }
    return planes;
}

void note_timing(const RunContext& context, const char* stage, Clock::time_point& since) {
    const auto now = Clock::now();
    context.say(LogLevel::debug,
                fmt::format("{}: {:.3f} s", stage, std::chrono::duration<double>(now - since).count()));
    since = now;
}

maps::MapOrigin origin_of(const scenario::Scenario& scenario,
                          const MapSettings& settings,
                          const std::string& hash,
                          const std::string& command) {
    maps::MapOrigin origin;
    origin.object = scenario.text("run.object");
    origin.title = scenario.text("run.title");
    origin.inclination = settings.view.inclination;
    origin.position_angle = settings.view.position_angle;
    origin.azimuth = settings.view.azimuth;
    origin.distance = settings.view.distance;
    origin.perspective = settings.view.projection == sight::Projection::perspective;
    origin.scenario_hash = hash;
    origin.history = {command,
                      "Model output of aureole " + std::string(version) + "; full-spacing sky, no noise.",
                      "The scenario is beside the maps: scenario.toml."};
    return origin;
}

void write_maps(const std::vector<MapProduct>& products,
                const maps::MapOrigin& origin,
                bool spectral_index_maps,
                files::RunFolder& folder) {
    std::vector<const MapProduct*> radio;
    for (const MapProduct& product : products) {
        if (product.plane.band == Band::radio) {
            maps::write_radio_map(folder.place(product.file), product.image, origin, product.notes, false);
            if (!product.plane.is_signed) {
                radio.push_back(&product);
            }
        }
    }
    // Planes of one gamma-ray process follow one another.
    for (std::size_t first = 0; first < products.size();) {
        std::size_t last = first;
        std::vector<maps::Image> planes;
        std::vector<maps::MapNotes> notes;
        std::vector<double> energies;
        while (last < products.size() && products[last].file == products[first].file) {
            planes.push_back(products[last].image);
            notes.push_back(products[last].notes);
            energies.push_back(products[last].channel.from);
            ++last;
        }
        if (products[first].plane.band == Band::gamma) {
            if (products[first].channel.is_band()) {
                energies.push_back(products[last - 1].channel.to);
            }
            maps::write_gamma_cube(folder.place(products[first].file), planes, energies, origin, notes,
                                   false);
        }
        first = last;
    }
    std::vector<double> frequency;
    std::vector<double> width;
    std::vector<std::string> file;
    for (std::size_t r = 0; r < radio.size(); ++r) {
        frequency.push_back(radio[r]->channel.centre());
        width.push_back(radio[r]->channel.to - radio[r]->channel.from);
        file.push_back(radio[r]->file.substr(5));
        if (r > 0 && spectral_index_maps) {
            constexpr double floor = 1e-3;
            maps::MapNotes notes;
            notes.process = "synchrotron";
            notes.type = "Spectral index";
            notes.more = {{"FREQLOW", radio[r - 1]->channel.centre(), "Hz"},
                          {"FREQHIGH", radio[r]->channel.centre(), "Hz"}};
            const std::string name =
                fmt::format("maps/spectral_index_{}_{}.fits", file_label(radio[r - 1]->channel),
                            file_label(radio[r]->channel));
            maps::write_plane(folder.place(name), spectral_index(radio[r - 1]->image, radio[r]->image, floor),
                              origin, notes, false);
        }
    }
    if (radio.size() > 1) {
        maps::write_channel_table(folder.place("maps/channels.fits"), frequency, width, file, false);
    }
}

std::vector<std::string> warnings_of(const emission::EmissionReport& report,
                                     const std::vector<MapProduct>& products,
                                     const MapSettings& settings,
                                     const std::optional<grid::GridFile>& file) {
    std::vector<std::string> warnings = report.warnings;
    if (file) {
        warnings.insert(warnings.end(), file->warnings.begin(), file->warnings.end());
    }
    if (report.share_below_gamma_10 > 1e-3) {
        warnings.push_back(fmt::format("up to {:.2g} % of the inverse-Compton emission of a channel comes "
                                       "from electrons below gamma = 10, where the "
                                       "formula is not good",
                                       100 * report.share_below_gamma_10));
    }
    constexpr double worth_saying = 0.01;
    for (const MapProduct& product : products) {
        if (product.plane.process != "total") {
            continue;
        }
        if (product.notes.missing > worth_saying) {
            warnings.push_back(fmt::format("{}: {:.2g} % of the emission is missing because the spectra end, "
                                           "if they went on as power laws",
                                           product.label, 100 * product.notes.missing));
        }
        if (product.notes.flux_outside > worth_saying) {
            warnings.push_back(fmt::format(
                "{}: {:.2g} % of the flux lies off the map; map.width and map.height may be larger",
                product.label, 100 * product.notes.flux_outside));
        }
        if (product.channel.band == Band::gamma && product.channel.to > 10e3 * constants::gigaelectronvolt) {
            warnings.push_back(
                fmt::format("{}: pair absorption is not included; it matters above 10 TeV", product.label));
        }
    }
    for (const auto& [beam, name] :
         {std::pair{settings.radio_beam, "radio"}, {settings.gamma_beam, "gamma"}}) {
        if (beam && beam->minor < 2 * settings.pixels.step_y) {
            warnings.push_back(
                fmt::format("the {} beam is {:.2g} pixels wide, expected 2 or more (map.pixel)", name,
                            beam->minor / settings.pixels.step_y));
        }
    }
    return warnings;
}

} // namespace

Plan plan(const scenario::Scenario& scenario, const RunContext& context) {
    const Inputs inputs = read_inputs(scenario);
    Plan plan;
    plan.stored_cells = inputs.grid.stored_cells();
    const bool ordered = scenario.profile("field.ordered").kind != scenario::ProfileKind::none ||
                         (inputs.file && inputs.file->has("B_VECTOR"));
    plan.cells = grid::whole_galaxy(inputs.grid, ordered ? inputs.processes.sectors : 1).size();
    plan.planes = plane_count(inputs, scenario);
    plan.pixels_x = inputs.settings.pixels.nx;
    plan.pixels_y = inputs.settings.pixels.ny;
    plan.pixel_arcsec = inputs.settings.pixels.step_y / constants::arcsecond;
    plan.emissivity_bytes = plan.cells * plan.planes * sizeof(float);
    const std::size_t image_bytes = plan.pixels_x * plan.pixels_y * plan.planes * sizeof(float);
    constexpr std::size_t media_bytes_per_cell = 48;
    plan.total_bytes =
        plan.emissivity_bytes + 3 * image_bytes + plan.stored_cells * media_bytes_per_cell + (100U << 20U);
    // Measured on one core of 2.6 GHz: see docs/performance.md.
    const double threads = std::max(1, context.threads);
    const double work = 6e-9 * static_cast<double>(plan.cells * plan.planes) +
                        1.5e-9 * static_cast<double>(plan.pixels_x * plan.pixels_y * plan.planes) *
                            std::cbrt(static_cast<double>(plan.cells));
    plan.seconds = (0.3 + 2 * work) / threads * (scenario.boolean("accuracy.estimate") ? 1.6 : 1.0);
    for (const Channel& channel : inputs.channels) {
        if (channel.band == Band::radio) {
            plan.files.push_back("maps/radio_" + file_label(channel) + ".fits");
        }
    }
    if (plan.files.size() < inputs.channels.size()) {
        plan.files.emplace_back("maps/gamma.fits");
    }
    return plan;
}

std::vector<std::string> Plan::lines() const {
    const auto size = [](std::size_t bytes) {
        return bytes < (1U << 30U) ? fmt::format("{:.0f} MB", static_cast<double>(bytes) / 1e6)
                                   : fmt::format("{:.2f} GB", static_cast<double>(bytes) / 1e9);
    };
    std::vector<std::string> lines{
        fmt::format("cells       {} stored, {} emitting", stored_cells, cells),
        fmt::format("maps        {} planes of {} x {} pixels of {:.4g} arcsec", planes, pixels_x, pixels_y,
                    pixel_arcsec),
        fmt::format("memory      about {}, of it {} emissivity", size(total_bytes), size(emissivity_bytes)),
        fmt::format("time        about {:.1f} s", seconds),
    };
    for (const std::string& file : files) {
        lines.push_back("writes      " + file);
    }
    lines.emplace_back("Nothing was computed or written (--dry-run).");
    return lines;
}

PredictResult
predict(const scenario::Scenario& scenario, const PredictOptions& options, const RunContext& context) {
    auto since = Clock::now();
    const Inputs inputs = read_inputs(scenario);
    const Plan sizes = plan(scenario, context);
    if (context.memory_limit > 0 && sizes.total_bytes > context.memory_limit) {
        throw Error(ErrorKind::runtime, fmt::format("--memory: the run needs about {:.2f} GB, found a limit "
                                                    "of {:.2f} GB; fewer cells, channels or "
                                                    "pixels need less",
                                                    static_cast<double>(sizes.total_bytes) / 1e9,
                                                    static_cast<double>(context.memory_limit) / 1e9));
    }
    files::RunFolder folder(options.folder, options.force);
    if (inputs.file) {
        folder.protect(inputs.file->path);
    }
    folder.protect(scenario.file());

    const auto* file = inputs.file ? &*inputs.file : nullptr;
    const auto media = media::load_media(scenario, inputs.grid, file, context);
    const auto sources = spectra::open_sources(scenario, inputs.grid, file, context);
    note_timing(context, "media and spectra", since);

    const auto orientation = sight::orientation(inputs.settings.view);
    auto emitted =
        emission::emit(inputs.grid, media, sources, inputs.channels, inputs.processes, orientation, context);
    note_timing(context, "emission", since);
    auto products = make_maps(emitted, inputs.channels, inputs.settings, context);
    emitted.emissivity.value = {};
    note_timing(context, "maps", since);

    std::vector<MapProduct> coarse;
    if (scenario.boolean("accuracy.estimate")) {
        std::vector<spectra::Source> coarse_sources;
        for (const auto& source : sources) {
            coarse_sources.push_back(spectra::coarsened(source, inputs.grid));
        }
        emission::Processes processes = inputs.processes;
        processes.sectors = std::max<std::size_t>(4, processes.sectors / 2);
        const auto coarse_emitted =
            emission::emit(grid::coarsened(inputs.grid), media::coarsened(media, inputs.grid), coarse_sources,
                           inputs.channels, processes, orientation, context);
        coarse = make_maps(coarse_emitted, inputs.channels, inputs.settings, context);
        estimate_errors(products, coarse);
        note_timing(context, "numerical error", since);
    }
    const auto heights = measure_heights(scenario, inputs.settings, products, coarse, context);
    note_timing(context, "heights", since);

    const std::string effective = scenario::effective_toml(scenario);
    const std::string hash = files::hex(files::fnv1a(effective));
    PredictResult result;
    result.warnings = warnings_of(emitted.report, products, inputs.settings, inputs.file);
    for (const MapProduct& product : products) {
        if (product.notes.flux_error > inputs.settings.render.tolerance) {
            result.accuracy_missed = true;
            result.warnings.push_back(fmt::format(
                "{} {}: the map's flux misses the emission by {:.2g}, expected {:.2g} (map.tolerance)",
                product.label, product.notes.process, product.notes.flux_error,
                inputs.settings.render.tolerance));
        }
    }
    context.check_interrupt();
    folder.begin_writing();
    folder.write_text("scenario.toml", effective);
    write_maps(products, origin_of(scenario, inputs.settings, hash, options.command),
               scenario.boolean("map.spectral_index"), folder);
    write_tables(folder, scenario, inputs.settings, products, heights, result.warnings, hash,
                 options.command);
    folder.finish(options.command);
    note_timing(context, "writing", since);
    result.files = folder.files();
    result.summary =
        summary_lines(scenario, inputs.settings, products, emitted.report, heights, options.folder.string());
    return result;
}

} // namespace aureole::app
