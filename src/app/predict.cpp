#include "aureole/app/predict.hpp"

#include "evaluate.hpp"
#include "map_products.hpp"
#include "predict_heights.hpp"
#include "predict_inputs.hpp"
#include "predict_tables.hpp"

#include "aureole/base/constants.hpp"
#include "aureole/base/error.hpp"
#include "aureole/base/parallel.hpp"
#include "aureole/files/hash.hpp"
#include "aureole/files/run_folder.hpp"
#include "aureole/media/media.hpp"
#include "aureole/spectra/file_source.hpp"
#include "aureole/version.hpp"

#include <fmt/format.h>

#include <algorithm>
#include <chrono>
#include <cmath>
#include <functional>
#include <span>

namespace aureole::app {

namespace {

using emission::Band;
using emission::Channel;
using Clock = std::chrono::steady_clock;

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
    for_each_block(context, writers.size(), [&](std::size_t writer) { writers[writer](); });
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

} // namespace

PredictResult
predict(const scenario::Scenario& scenario, const PredictOptions& options, const RunContext& context) {
    auto since = Clock::now();
    const Inputs inputs = read_inputs(scenario);
    const Plan sizes = plan(scenario, context);
    const auto groups = channel_groups(inputs, scenario, sizes.cells, sizes.room_for_emissivity);
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

    const Galaxy galaxy{inputs.grid, media, sources, inputs.processes, inputs.settings};
    Evaluation fine = evaluate(galaxy, inputs.channels, groups, context);
    std::vector<MapProduct>& products = fine.products;
    note_timing(context, "emission and maps", since);
    std::vector<MapProduct> coarse;
    if (scenario.boolean("accuracy.estimate")) {
        coarse = evaluate_coarser(galaxy, inputs.channels, fine, context).products;
        estimate_errors(products, coarse);
        note_timing(context, "numerical error", since);
    }
    const auto heights = measure_heights(scenario, inputs.settings, products, coarse, context);
    note_timing(context, "heights", since);

    const std::string effective = scenario::effective_toml(scenario);
    const std::string hash = files::hex(files::fnv1a(effective));
    PredictResult result;
    result.warnings = warnings_of(fine.report, products, inputs.settings, inputs.file);
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
        summary_lines(scenario, inputs.settings, products, fine.report, heights, options.folder.string());
    return result;
}

} // namespace aureole::app
