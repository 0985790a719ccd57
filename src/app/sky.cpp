#include "sky.hpp"

#include "predict_tables.hpp"
#include "write_maps.hpp"

#include "aureole/base/constants.hpp"
#include "aureole/version.hpp"

#include <fmt/format.h>

#include <chrono>

namespace aureole::app {

namespace {

using emission::Band;

maps::MapOrigin
origin_of(const scenario::Scenario& scenario, const MapSettings& settings, const RunName& name) {
    maps::MapOrigin origin;
    origin.object = scenario.text("run.object");
    origin.title = scenario.text("run.title");
    origin.inclination = settings.view.inclination;
    origin.position_angle = settings.view.position_angle;
    origin.azimuth = settings.view.azimuth;
    origin.distance = settings.view.distance;
    origin.perspective = settings.view.projection == sight::Projection::perspective;
    origin.scenario_hash = name.hash;
    origin.history = {name.command,
                      "Model output of aureole " + std::string(version) + "; full-spacing sky, no noise.",
                      "The scenario is beside the maps: scenario.toml."};
    if (!name.law.empty()) {
        origin.history.push_back("Spectra solved for the scattering law " + name.law + ".");
    }
    return origin;
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

Sky make_sky(const scenario::Scenario& scenario,
             const Inputs& inputs,
             const media::Media& media,
             const std::vector<spectra::Source>& sources,
             const std::vector<spectra::Source>* coarse_sources,
             const std::vector<ChannelGroup>& groups,
             const RunContext& context) {
    auto since = std::chrono::steady_clock::now();
    const auto say = [&](const char* stage) {
        const auto now = std::chrono::steady_clock::now();
        context.say(LogLevel::debug,
                    fmt::format("{}: {:.3f} s", stage, std::chrono::duration<double>(now - since).count()));
        since = now;
    };
    const Galaxy galaxy{inputs.grid, media, sources, inputs.processes, inputs.settings};
    Sky sky;
    sky.fine = evaluate(galaxy, inputs.channels, groups, context);
    std::vector<MapProduct>& products = sky.fine.products;
    say("emission and maps");
    std::vector<MapProduct> coarse;
    if (scenario.boolean("accuracy.estimate")) {
        coarse = evaluate_coarser(galaxy, inputs.channels, sky.fine, coarse_sources, context).products;
        estimate_errors(products, coarse);
        say("numerical error");
    }
    sky.heights = measure_heights(scenario, inputs.settings, products, coarse, context);
    say("heights");
    sky.warnings = warnings_of(sky.fine.report, products, inputs.settings, inputs.file);
    for (const MapProduct& product : products) {
        if (product.notes.flux_error > inputs.settings.render.tolerance) {
            sky.accuracy_missed = true;
            sky.warnings.push_back(fmt::format(
                "{} {}: the map's flux misses the emission by {:.2g}, expected {:.2g} (map.tolerance)",
                product.label, product.notes.process, product.notes.flux_error,
                inputs.settings.render.tolerance));
        }
    }
    return sky;
}

void write_sky(const Sky& sky,
               const scenario::Scenario& scenario,
               const Inputs& inputs,
               const RunName& name,
               files::RunFolder& folder,
               const RunContext& context) {
    write_maps(sky.fine.products, origin_of(scenario, inputs.settings, name),
               scenario.boolean("map.spectral_index"), folder, name.prefix, context);
    write_tables(folder, name.prefix, scenario, inputs.settings, sky.fine.products, sky.heights, sky.warnings,
                 name.hash, name.command);
}

} // namespace aureole::app
