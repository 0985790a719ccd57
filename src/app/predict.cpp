#include "aureole/app/predict.hpp"

#include "map_products.hpp"
#include "predict_heights.hpp"
#include "predict_tables.hpp"

#include "aureole/base/constants.hpp"
#include "aureole/base/error.hpp"
#include "aureole/base/parallel.hpp"
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
#include <functional>
#include <initializer_list>
#include <span>
#include <tuple>

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
    for (std::size_t c = 1; c < inputs.channels.size(); ++c) {
        if (file_label(inputs.channels[c]) == file_label(inputs.channels[c - 1])) {
            throw Error(
                ErrorKind::scenario,
                fmt::format("{}: found two channels at {}, expected channels that differ in four digits",
                            scenario.file().string(), emission::label(inputs.channels[c])));
        }
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

void write_cube(const std::filesystem::path& path,
                std::span<const MapProduct> products,
                const maps::MapOrigin& origin) {
    std::vector<maps::Image> planes;
    std::vector<maps::MapNotes> notes;
    std::vector<double> energies;
    for (const MapProduct& product : products) {
        planes.push_back(product.image);
        notes.push_back(product.notes);
        energies.push_back(product.channel.from);
    }
    if (products.front().channel.is_band()) {
        energies.push_back(products.back().channel.to);
    }
    maps::write_gamma_cube(path, planes, energies, origin, notes, false);
}

void write_maps(const std::vector<MapProduct>& products,
                const maps::MapOrigin& origin,
                bool spectral_index_maps,
                files::RunFolder& folder,
                const RunContext& context) {
    std::vector<std::function<void()>> writers;
    std::vector<const MapProduct*> radio;
    for (const MapProduct& product : products) {
        if (product.plane.band == Band::radio) {
            writers.emplace_back([&origin, &product, path = folder.place(product.file)] {
                maps::write_radio_map(path, product.image, origin, product.notes, false);
            });
            if (!product.plane.is_signed) {
                radio.push_back(&product);
            }
        }
    }
    // Planes of one gamma-ray process follow one another.
    for (std::size_t first = 0; first < products.size();) {
        std::size_t last = first;
        while (last < products.size() && products[last].file == products[first].file) {
            ++last;
        }
        if (products[first].plane.band == Band::gamma) {
            const std::span<const MapProduct> cube(products.data() + first, last - first);
            writers.emplace_back([&origin, cube, path = folder.place(products[first].file)] {
                write_cube(path, cube, origin);
            });
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
            writers.emplace_back([&origin, notes, low = radio[r - 1], high = radio[r],
                                  path = folder.place(name)] {
                maps::write_plane(path, spectral_index(low->image, high->image, floor), origin, notes, false);
            });
        }
    }
    if (radio.size() > 1) {
        maps::write_channel_table(folder.place("maps/channels.fits"), frequency, width, file, false);
    }
    // The cubes come last and are the largest: they go first.
    std::reverse(writers.begin(), writers.end());
    for_each_block(context, writers.size(), [&](std::size_t file) { writers[file](); });
}

std::vector<std::string> warnings_of(const emission::EmissionReport& report,
                                     const std::vector<MapProduct>& products,
                                     const MapSettings& settings,
                                     const std::optional<grid::GridFile>& file) {
    std::vector<std::string> warnings;
    if (file) {
        warnings.insert(warnings.end(), file->warnings.begin(), file->warnings.end());
    }
    if (file && file->has("CR_HELIUM")) {
        warnings.push_back(
            fmt::format("{}: HDU CR_HELIUM is not used; emission.nuclear_enhancement stands for "
                        "nuclei heavier than hydrogen",
                        file->path));
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
        if (!(product.luminosity > 0)) {
            warnings.push_back(fmt::format("{}: nothing is emitted; {} missing or 0", product.label,
                                           product.plane.band == Band::radio
                                               ? "electrons or the field are"
                                               : "particles, gas and radiation are"));
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

/// Whether the heights of a species' closed form change with energy: every energy of every cell is then held.
bool holds_spectra(const scenario::Scenario& scenario, const std::string& species) {
    return scenario.text(species + ".source") == "closed_form" &&
           scenario.number(species + ".height_slope") != 0;
}

/// Media and spectra that are held.
std::size_t bytes_per_stored_cell(const Inputs& inputs, const scenario::Scenario& scenario) {
    const auto in_file = [&](const char* hdu) { return inputs.file && inputs.file->has(hdu); };
    const auto given = [&](const char* key, const char* hdu) {
        return in_file(hdu) || scenario.profile(key).kind != scenario::ProfileKind::none;
    };
    std::size_t values = scenario.names("radiation.component").size();
    for (const auto& [key, hdu, size] :
         std::initializer_list<std::tuple<const char*, const char*, std::size_t>>{
             {"field.ordered", "B_VECTOR", 4},
             {"field.random", "B_TURB", 1},
             {"gas.hi", "GAS_HI", 1},
             {"gas.h2", "GAS_H2", 1},
             {"gas.hii", "GAS_HII", 1},
             {"gas.electrons", "N_E", 1},
             {"gas.temperature", "T_E", 1},
             {"turbulence.speed", "V_TURB", 1},
             {"turbulence.scale", "L_TURB", 1}}) {
        values += given(key, hdu) ? size : 0;
    }
    values += in_file("VELOCITY") ? 3 : 0;
    values += in_file("RADIATION") ? inputs.file->axes.at("EPS_PHOTON").size() : 0;
    for (const char* species : {"electrons", "protons"}) {
        values += holds_spectra(scenario, species)
                      ? static_cast<std::size_t>(scenario.integer(std::string(species) + ".energy_nodes"))
                      : 1;
    }
    constexpr std::size_t volumes = 8;
    return values * sizeof(float) + volumes;
}

std::size_t total_bytes(const Plan& plan, std::size_t per_stored_cell, const RunContext& context) {
    const std::size_t pixels = plan.pixels_x * plan.pixels_y;
    const std::size_t images = 3 * pixels * plan.planes * sizeof(float);
    constexpr std::size_t smoothing_per_pixel = 64; // padded transforms of one plane
    constexpr std::size_t program_and_tables = 30U << 20U;
    return plan.emissivity_bytes + images + plan.stored_cells * per_stored_cell +
           smoothing_per_pixel * pixels * static_cast<std::size_t>(std::max(1, context.threads)) +
           program_and_tables;
}

double narrowest(const std::vector<double>& edges) {
    double width = edges[1] - edges[0];
    for (std::size_t i = 2; i < edges.size(); ++i) {
        width = std::min(width, edges[i] - edges[i - 1]);
    }
    return width;
}

/// Seconds of one core to average profiles over the cells: those that are no products of R and z are sampled.
double averaging_seconds(const Inputs& inputs, const scenario::Scenario& scenario) {
    using scenario::ProfileKind;
    const auto stored = static_cast<double>(inputs.grid.stored_cells());
    const auto cost = [&](const std::string& key) {
        const auto profile = scenario.profile(key);
        const bool sampled = profile.flare > 0 || profile.kind == ProfileKind::beta ||
                             profile.kind == ProfileKind::power_law || profile.kind == ProfileKind::formula;
        const double sample = inputs.grid.geometry == grid::Geometry::xyz ? 5e-7 : 2e-7;
        return stored * (sampled ? sample : 5e-9);
    };
    double sum = 0;
    for (const char* key : {"field.ordered", "field.random", "gas.hi", "gas.h2", "gas.hii"}) {
        sum += cost(key);
    }
    for (const std::string& name : scenario.names("radiation.component")) {
        sum += cost("radiation.component." + name);
    }
    for (const std::string species : {"electrons", "protons"}) {
        const double times = holds_spectra(scenario, species)
                                 ? static_cast<double>(scenario.integer(species + ".energy_nodes"))
                                 : 1;
        sum += times * cost(species + ".space");
    }
    return sum;
}

/// Seconds of one core of 2.6 GHz; the factors are measured on the starters and a grid of 128^3 cells, where
/// the sum is good to a factor of 1.5.
double seconds(const Plan& plan, const Inputs& inputs, const scenario::Scenario& scenario) {
    const auto planes = static_cast<double>(plan.planes);
    const auto pixels = static_cast<double>(plan.pixels_x * plan.pixels_y);
    const double media = averaging_seconds(inputs, scenario);
    const double emission = 0.45 + 2.6e-8 * static_cast<double>(plan.cells) * planes;
    // Cells narrower than a pixel are met by more rays.
    const double pixel = inputs.settings.pixels.step_y * inputs.settings.view.distance;
    const double cell = std::min(narrowest(inputs.grid.x), narrowest(inputs.grid.z));
    const double rays = 1 + 2 * std::max(0.0, pixel / cell - 1);
    const double maps = 2.8e-9 * pixels * planes * std::cbrt(static_cast<double>(plan.cells)) * rays;
    const auto totals = static_cast<double>(inputs.channels.size());
    const double fits = static_cast<double>(scenario.integer("heights.strips") + 1) *
                        static_cast<double>(scenario.texts("heights.models").size());
    const double heights = totals * (6e-8 * pixels + 3.5e-3 * fits);
    const bool twice = scenario.boolean("accuracy.estimate");
    return media + (twice ? 1.5 : 1.0) * (emission + maps) + (twice ? 2 : 1) * heights;
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
    plan.total_bytes = total_bytes(plan, bytes_per_stored_cell(inputs, scenario), context);
    plan.seconds = seconds(plan, inputs, scenario) / std::max(1, context.threads);
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
    LargeArray<float>().swap(emitted.emissivity.value); // = {} would keep the memory
    note_timing(context, "maps", since);

    std::vector<MapProduct> coarse;
    if (scenario.boolean("accuracy.estimate")) {
        const auto coarse_sources = spectra::coarsened(sources, inputs.grid);
        emission::Processes processes = inputs.processes;
        processes.sectors = std::max<std::size_t>(4, processes.sectors / 2);
        const auto coarse_emitted =
            emission::emit(grid::coarsened(inputs.grid), media::coarsened(media, inputs.grid, context),
                           coarse_sources, inputs.channels, processes, orientation, context, &emitted);
        // The difference of the maps need not be known better than to a few per cent.
        MapSettings coarse_settings = inputs.settings;
        coarse_settings.render.tolerance *= 3;
        coarse = make_maps(coarse_emitted, inputs.channels, coarse_settings, context);
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
               scenario.boolean("map.spectral_index"), folder, context);
    write_tables(folder, scenario, inputs.settings, products, heights, result.warnings, hash,
                 options.command);
    folder.finish(options.command, context);
    note_timing(context, "writing", since);
    result.files = folder.files();
    result.summary =
        summary_lines(scenario, inputs.settings, products, emitted.report, heights, options.folder.string());
    return result;
}

} // namespace aureole::app
