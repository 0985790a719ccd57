#include "predict_inputs.hpp"

#include "aureole/app/predict.hpp"
#include "aureole/base/constants.hpp"
#include "aureole/grid/cells.hpp"
#include "aureole/transport/read_scenario.hpp"

#include <fmt/format.h>

#include <algorithm>
#include <cmath>
#include <initializer_list>
#include <tuple>
#include <unistd.h>

namespace aureole::app {

using emission::Band;
using emission::Channel;

namespace {

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

/// All but the emissivity.
std::size_t other_bytes(const Plan& plan, std::size_t per_stored_cell, const RunContext& context) {
    const std::size_t pixels = plan.pixels_x * plan.pixels_y;
    const std::size_t images = 3 * pixels * plan.planes * sizeof(float);
    constexpr std::size_t smoothing_per_pixel = 64; // padded transforms of one plane
    constexpr std::size_t program_and_tables = 30U << 20U;
    return images + plan.stored_cells * per_stored_cell +
           smoothing_per_pixel * pixels * static_cast<std::size_t>(std::max(1, context.threads)) +
           program_and_tables;
}

/// What a run may take: as asked, or three quarters of the memory of the machine.
std::size_t available_bytes(const RunContext& context) {
    if (context.memory_limit > 0) {
        return context.memory_limit;
    }
    const auto pages = static_cast<std::size_t>(std::max(0L, sysconf(_SC_PHYS_PAGES)));
    return pages * static_cast<std::size_t>(std::max(1L, sysconf(_SC_PAGESIZE))) / 4 * 3;
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
    // Every pass reads all spectra.
    const double emission =
        static_cast<double>(plan.passes) * (0.3 + 1e-7 * static_cast<double>(plan.stored_cells)) +
        1.6e-8 * static_cast<double>(plan.cells) * planes;
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

/// Seconds of one core: the table of secondaries, and protons, electrons and positrons of each law.
double transport_seconds(const Plan& plan, const transport::TransportSpec& spec) {
    const auto cells = static_cast<double>(plan.stored_cells);
    const double march = 1.3 * std::pow(cells / 3072, 1.15) * spec.bins_per_decade / 16;
    double sum = 2;
    for (const auto& law : spec.laws) {
        const bool iterated = transport::depends_on_cosmic_rays(transport::checked_law(law.law));
        const bool sought = law.anchor.kind != transport::AnchorSpec::Kind::absolute &&
                            law.anchor.kind != transport::AnchorSpec::Kind::rate;
        sum += march * (iterated ? 30 : 1) * (sought ? 4 : 1);
    }
    return sum;
}

} // namespace

Plan plan(const scenario::Scenario& scenario, const RunContext& context) {
    const Inputs inputs = read_inputs(scenario);
    Plan plan;
    plan.stored_cells = inputs.grid.stored_cells();
    const bool ordered = scenario.profile("field.ordered").kind != scenario::ProfileKind::none ||
                         (inputs.file && inputs.file->has("B_VECTOR"));
    plan.cells = grid::whole_galaxy(inputs.grid, ordered ? inputs.processes.sectors : 1).size();
    plan.planes = plane_count(inputs, scenario, {0, inputs.channels.size()});
    plan.pixels_x = inputs.settings.pixels.nx;
    plan.pixels_y = inputs.settings.pixels.ny;
    plan.pixel_arcsec = inputs.settings.pixels.step_y / constants::arcsecond;
    const std::size_t others = other_bytes(plan, bytes_per_stored_cell(inputs, scenario), context);
    const std::size_t available = available_bytes(context);
    plan.room_for_emissivity = available > others ? available - others : 0;
    const auto groups = channel_groups(inputs, scenario, plan.cells, plan.room_for_emissivity);
    plan.passes = groups.size();
    for (const ChannelGroup& group : groups) {
        plan.emissivity_bytes = std::max(plan.emissivity_bytes,
                                         plan.cells * plane_count(inputs, scenario, group) * sizeof(float));
    }
    plan.total_bytes = others + plan.emissivity_bytes;
    plan.seconds = seconds(plan, inputs, scenario) / std::max(1, context.threads);

    std::vector<std::string> prefixes{""};
    if (scenario.has_transport()) {
        const auto spec = read_transport(scenario, inputs);
        plan.laws = spec.laws.size();
        if (plan.laws > 1) {
            prefixes.clear();
            for (const auto& law : spec.laws) {
                prefixes.push_back(law.name + "/");
            }
        }
        plan.seconds *= static_cast<double>(plan.laws);
        plan.seconds += transport_seconds(plan, spec) / std::max(1, context.threads);
    }
    for (const std::string& prefix : prefixes) {
        bool gamma = false;
        for (const Channel& channel : inputs.channels) {
            if (channel.band == Band::radio) {
                plan.files.push_back(prefix + "maps/radio_" + file_label(channel) + ".fits");
            } else {
                gamma = true;
            }
        }
        if (gamma) {
            plan.files.push_back(prefix + "maps/gamma.fits");
        }
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
    if (laws > 1) {
        lines.push_back(fmt::format("laws        {}, each in a folder of its own", laws));
    }
    if (passes > 1) {
        lines.push_back(fmt::format(
            "passes      {}: the emissivity of all planes does not fit into memory at once", passes));
    }
    for (const std::string& file : files) {
        lines.push_back("writes      " + file);
    }
    lines.emplace_back("Nothing was computed or written (--dry-run).");
    return lines;
}

} // namespace aureole::app
