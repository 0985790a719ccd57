#include "predict_tables.hpp"

#include "aureole/base/constants.hpp"
#include "aureole/files/ecsv.hpp"
#include "aureole/files/json.hpp"
#include "aureole/report/heights_tables.hpp"
#include "aureole/version.hpp"

#include <fmt/format.h>

#include <algorithm>
#include <cmath>
#include <limits>

namespace aureole::app {

namespace {

using emission::Band;
using files::EcsvColumn;
using files::Json;

constexpr double nothing = std::numeric_limits<double>::quiet_NaN();

double luminosity_factor(const emission::Channel& channel) {
    // Radio: erg s-1 Hz-1. Gamma: photons per second, per GeV where the channel is no band.
    return channel.band == Band::gamma && !channel.is_band() ? constants::gigaelectronvolt : 1;
}

std::string luminosity_unit(const emission::Channel& channel) {
    if (channel.band == Band::radio) {
        return "erg s-1 Hz-1";
    }
    return channel.is_band() ? "s-1" : "s-1 GeV-1";
}

std::string channels_table(const std::vector<MapProduct>& products, const std::string& hash) {
    std::vector<std::string> band, label, process, flux_unit, lum_unit, unit, file;
    std::vector<double> frequency, from, to, flux, peak, luminosity, missing, energy, cells, sight, check,
        outside;
    for (const MapProduct& product : products) {
        const bool radio = product.plane.band == Band::radio;
        const auto& notes = product.notes;
        band.emplace_back(radio ? "radio" : "gamma");
        label.push_back(product.label);
        process.push_back(product.plane.process);
        frequency.push_back(radio ? product.channel.centre() : nothing);
        from.push_back(radio ? nothing : product.channel.from / constants::gigaelectronvolt);
        to.push_back(radio ? nothing : product.channel.to / constants::gigaelectronvolt);
        flux.push_back(notes.flux);
        flux_unit.push_back(notes.flux_unit);
        peak.push_back(static_cast<double>(peak_of(product.image)));
        unit.push_back(product.image.unit);
        luminosity.push_back(product.luminosity * luminosity_factor(product.channel));
        lum_unit.push_back(luminosity_unit(product.channel));
        missing.push_back(notes.missing);
        energy.push_back(notes.error_energy);
        cells.push_back(notes.error_cells);
        sight.push_back(notes.error_sight);
        check.push_back(notes.flux_error);
        outside.push_back(notes.flux_outside);
        file.push_back(product.file);
    }
    return files::ecsv_text(
        {{"band", "", "", band},
         {"label", "", "", label},
         {"process", "", "", process},
         {"frequency", "Hz", "", frequency},
         {"energy_from", "GeV", "", from},
         {"energy_to", "GeV", "", to},
         {"flux", "", "sum over the map", flux},
         {"flux_unit", "", "", flux_unit},
         {"peak", "", "largest absolute value in the map", peak},
         {"unit", "", "of the map", unit},
         {"luminosity", "", "4 pi x emissivity, whole galaxy", luminosity},
         {"luminosity_unit", "", "", lum_unit},
         {"missing", "", "share missing because the spectra end", missing},
         {"error_energy", "", "numerical, from the energy nodes, relative", energy},
         {"error_cells", "", "numerical, from the cell size, relative to the peak", cells},
         {"error_sight", "", "numerical, from the sight lines, relative to the peak", sight},
         {"flux_check", "", "map against emission, relative", check},
         {"flux_outside", "", "share of the flux off the map", outside},
         {"file", "", "", file}},
        {{"scenario_hash", hash}});
}

struct HeightTables {
    std::vector<EcsvColumn> profiles, heights, exponents;
};

std::optional<HeightTables> height_tables(const PredictedHeights& all) {
    std::optional<HeightTables> tables;
    for (const auto* band : {&all.radio, &all.gamma}) {
        if (!*band || !(*band)->problem.empty()) {
            continue;
        }
        const auto& report = (*band)->report;
        HeightTables one{report::profiles_table(report, (*band)->labels, (*band)->spec),
                         report::heights_table(report, (*band)->labels), report::exponents_table(report)};
        if (tables) {
            tables->profiles = stacked(std::move(tables->profiles), one.profiles);
            tables->heights = stacked(std::move(tables->heights), one.heights);
            tables->exponents = stacked(std::move(tables->exponents), one.exponents);
        } else {
            tables = std::move(one);
        }
    }
    return tables;
}

Json::Array texts(const std::vector<std::string>& list) {
    return {list.begin(), list.end()};
}

Json summary_json(const scenario::Scenario& scenario,
                  const MapSettings& settings,
                  const std::vector<MapProduct>& products,
                  const PredictedHeights& heights,
                  const std::vector<std::string>& warnings,
                  const std::string& hash,
                  const std::string& command) {
    Json::Array maps;
    for (const MapProduct& product : products) {
        const bool radio = product.plane.band == Band::radio;
        maps.push_back(Json::Object{
            {"file", product.file},
            {"band", radio ? "radio" : "gamma"},
            {"process", product.plane.process},
            {"label", product.label},
            {"frequency_hz", radio ? Json(product.channel.centre()) : Json()},
            {"energy_from_gev", radio ? Json() : Json(product.channel.from / constants::gigaelectronvolt)},
            {"energy_to_gev", radio ? Json() : Json(product.channel.to / constants::gigaelectronvolt)},
            {"unit", product.image.unit},
            {"peak", static_cast<double>(peak_of(product.image))},
            {"flux", product.notes.flux},
            {"flux_unit", product.notes.flux_unit},
            {"numerical_error",
             product.notes.numerical_error > 0 ? Json(product.notes.numerical_error) : Json()}});
    }
    Json::Object summary{
        {"aureole", version},
        {"title", scenario.text("run.title")},
        {"object", scenario.text("run.object")},
        {"command", command},
        {"scenario_hash", hash},
        {"view", Json::Object{{"inclination_deg", settings.view.inclination / constants::degree},
                              {"position_angle_deg", settings.view.position_angle / constants::degree},
                              {"distance_kpc", settings.view.distance / constants::kiloparsec},
                              {"distance_error_kpc",
                               scenario.quantity("view.distance_error") / constants::kiloparsec}}},
        {"maps", std::move(maps)},
    };
    for (const auto& [name, band] : {std::pair{"radio", &heights.radio}, {"gamma", &heights.gamma}}) {
        if (!*band) {
            continue;
        }
        if (!(*band)->problem.empty()) {
            summary.emplace_back(std::string(name) + "_heights_problem", (*band)->problem);
            continue;
        }
        summary.emplace_back(std::string(name) + "_heights",
                             report::heights_json((*band)->report, (*band)->labels));
        summary.emplace_back(std::string(name) + "_exponent", report::exponent_json((*band)->report));
    }
    summary.emplace_back("warnings", texts(warnings));
    summary.emplace_back("leaves_out", texts(left_out(scenario.has_transport())));
    return summary;
}

} // namespace

/// Appends the rows of the second table to the first; both have the same columns.
std::vector<EcsvColumn> stacked(std::vector<EcsvColumn> first, const std::vector<EcsvColumn>& second) {
    for (std::size_t c = 0; c < first.size(); ++c) {
        std::visit(
            [&](auto& values) {
                const auto& more = std::get<std::decay_t<decltype(values)>>(second[c].values);
                values.insert(values.end(), more.begin(), more.end());
            },
            first[c].values);
    }
    return first;
}

std::vector<EcsvColumn> heights_columns(const PredictedHeights& heights) {
    auto tables = height_tables(heights);
    return tables ? std::move(tables->heights) : std::vector<EcsvColumn>{};
}

std::vector<std::string> left_out(bool solved) {
    std::vector<std::string> list{
        "Faraday rotation and depolarisation, thermal emission, absorption of any kind",
        "noise, missing spacings and calibration errors of a telescope: the maps are the full sky seen with "
        "the beam",
        "the angle between photons and electrons in inverse-Compton scattering: radiation is taken as "
        "isotropic",
        "structure below the size of a cell, other than the random field",
        "time: the galaxy is steady",
    };
    if (solved) {
        list.insert(list.end(),
                    {"spiral arms and all that is not axisymmetric in the transport of particles; single "
                     "sources; drifts; nuclei heavier than protons, other than by a factor",
                     "reacceleration by waves that run both ways, and energy gains of any kind"});
    } else {
        list.emplace_back("secondary electrons and positrons, unless they are in the spectra given");
    }
    return list;
}

void write_tables(files::RunFolder& folder,
                  const std::string& prefix,
                  const scenario::Scenario& scenario,
                  const MapSettings& settings,
                  const std::vector<MapProduct>& products,
                  const PredictedHeights& heights,
                  const std::vector<std::string>& warnings,
                  const std::string& hash,
                  const std::string& command) {
    folder.write_text(prefix + "tables/channels.ecsv", channels_table(products, hash));
    if (const auto tables = height_tables(heights)) {
        const std::vector<std::pair<std::string, std::string>> meta{{"scenario_hash", hash}};
        folder.write_text(prefix + "tables/profiles.ecsv", files::ecsv_text(tables->profiles, meta));
        folder.write_text(prefix + "tables/heights.ecsv", files::ecsv_text(tables->heights, meta));
        folder.write_text(prefix + "tables/exponents.ecsv", files::ecsv_text(tables->exponents, meta));
    }
    folder.write_text(prefix + "summary.json",
                      summary_json(scenario, settings, products, heights, warnings, hash, command).text());
}

std::vector<std::string> title_lines(const scenario::Scenario& scenario, const MapSettings& settings) {
    const std::string title = scenario.text("run.title");
    return {title.empty() ? scenario.text("run.object") : title,
            fmt::format("inclination {:.4g} deg, distance {}", settings.view.inclination / constants::degree,
                        format_quantity(settings.view.distance, dimension::length)),
            ""};
}

std::vector<std::string> summary_lines(const scenario::Scenario& scenario,
                                       const MapSettings& settings,
                                       const std::vector<MapProduct>& products,
                                       const emission::EmissionReport& report,
                                       const PredictedHeights& heights,
                                       const std::string& folder) {
    std::vector<std::string> lines = title_lines(scenario, settings);
    lines.push_back(fmt::format("{:<16} {:>24} {:>24} {:>10}", "channel", "flux", "peak", "num. error"));
    for (const MapProduct& product : products) {
        if (product.plane.process != "total") {
            continue;
        }
        lines.push_back(fmt::format("{:<16} {:>24} {:>24} {:>10}", product.label,
                                    fmt::format("{:.4g} {}", product.notes.flux, product.notes.flux_unit),
                                    fmt::format("{:.3g} {}", peak_of(product.image), product.image.unit),
                                    product.notes.numerical_error > 0
                                        ? fmt::format("{:.2g} %", 100 * product.notes.numerical_error)
                                        : "-"));
    }
    for (const auto& [name, band] : {std::pair{"Radio", &heights.radio}, {"Gamma-ray", &heights.gamma}}) {
        if (!*band) {
            continue;
        }
        lines.emplace_back("");
        lines.push_back(fmt::format("{} scale heights", name));
        if (!(*band)->problem.empty()) {
            lines.push_back("none: " + (*band)->problem);
            continue;
        }
        const auto more = report::terminal_lines((*band)->report, (*band)->labels, false);
        lines.insert(lines.end(), more.begin(), more.end());
    }
    if (report.cells_with_fallback > 0) {
        lines.emplace_back("");
        lines.push_back(
            fmt::format("{} spectra bend too sharply for a cubic somewhere and run straight there",
                        report.cells_with_fallback));
    }
    lines.emplace_back("");
    lines.push_back(
        fmt::format("Maps, tables and the scenario are in {} (summary.json, manifest.json).", folder));
    lines.emplace_back(leaves_out_line);
    return lines;
}

} // namespace aureole::app
