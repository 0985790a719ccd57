#include "aureole/app/heights.hpp"

#include "heights_channels.hpp"
#include "heights_spec.hpp"

#include "aureole/base/constants.hpp"
#include "aureole/base/error.hpp"
#include "aureole/emission/channels.hpp"
#include "aureole/files/ecsv.hpp"
#include "aureole/files/json.hpp"
#include "aureole/files/run_folder.hpp"
#include "aureole/maps/regrid.hpp"
#include "aureole/report/heights_tables.hpp"
#include "aureole/version.hpp"

#include <CLI/CLI.hpp>
#include <fmt/format.h>

#include <algorithm>
#include <cmath>
#include <cstdio>
#include <filesystem>
#include <optional>

namespace aureole::app {

namespace {

using files::Json;
using maps::Image;

struct GivenMaps {
    std::vector<Image> images;
    std::vector<std::optional<emission::Channel>> energy; ///< [images] of gamma-ray maps that tell
};

GivenMaps read_all(const std::vector<std::string>& paths, const RunContext& context) {
    GivenMaps given;
    for (const std::string& path : paths) {
        context.check_interrupt();
        std::vector<Image> planes = maps::read_maps(path);
        const bool gamma = planes.front().unit.starts_with("cm-2");
        const auto energies = gamma ? channel_energies(path) : std::vector<emission::Channel>{};
        for (std::size_t k = 0; k < planes.size(); ++k) {
            given.energy.push_back(energies.size() == planes.size() ? std::optional(energies[k])
                                                                    : std::nullopt);
            given.images.push_back(std::move(planes[k]));
        }
    }
    return given;
}

/// The frequency or photon energy where it tells the maps apart, else what they are called.
std::vector<std::string> labels_of(const std::vector<Image>& images,
                                   const std::vector<std::optional<emission::Channel>>& energy) {
    const auto short_name = [](const Image& image) {
        return std::filesystem::path(image.name).filename().string();
    };
    std::vector<std::string> labels;
    for (std::size_t k = 0; k < images.size(); ++k) {
        const double frequency = images[k].frequency;
        labels.push_back(energy[k]       ? emission::label(*energy[k])
                         : frequency > 0 ? emission::label({emission::Band::radio, frequency, frequency})
                                         : short_name(images[k]));
    }
    const std::vector<std::string> first = labels;
    for (std::size_t k = 0; k < images.size(); ++k) {
        if (std::count(first.begin(), first.end(), first[k]) > 1) {
            labels[k] += images[k].frequency > 0 || energy[k] ? " (" + short_name(images[k]) + ")" : "";
        }
    }
    return labels;
}

/// Sum over the map in Jy, or photons cm-2 s-1 (MeV-1). NaN for a map in K without a frequency.
double flux_of(const Image& image) {
    double sum = 0;
    for (const float value : image.value) {
        sum += std::isnan(value) ? 0 : static_cast<double>(value);
    }
    const double area = image.pixels.pixel_area();
    if (image.unit == "Jy/pixel") {
        return sum;
    }
    if (image.unit == "Jy/beam") {
        return sum * area / maps::solid_angle(*image.beam);
    }
    if (image.unit == "K") {
        return image.frequency > 0
                   ? sum * area * 2 * constants::boltzmann *
                         std::pow(image.frequency / constants::speed_of_light, 2) / constants::jansky
                   : NAN;
    }
    return sum * area * (image.unit == "MJy/sr" ? 1e6 : 1);
}

double peak_of(const Image& image) {
    double peak = -HUGE_VAL;
    for (const float value : image.value) {
        peak = std::isnan(value) ? peak : std::max(peak, static_cast<double>(value));
    }
    return peak;
}

std::string flux_unit(const std::string& unit) {
    return unit == "cm-2 s-1 sr-1 MeV-1" ? "cm-2 s-1 MeV-1" : unit.starts_with("cm-2") ? "cm-2 s-1" : "Jy";
}

/// What the maps given are; numbers as they were measured, in the common unit and beam.
Json maps_json(const std::vector<Image>& images,
               const std::vector<std::string>& labels,
               const std::vector<std::optional<emission::Channel>>& energy) {
    const auto gev = [](double value) { return Json(value / constants::gigaelectronvolt); };
    Json::Array list;
    for (std::size_t k = 0; k < images.size(); ++k) {
        const Image& image = images[k];
        const bool radio = !image.unit.starts_with("cm-2");
        const std::string path = image.name.substr(0, image.name.rfind(", channel "));
        Json::Object map{{"file", std::filesystem::absolute(path).string()},
                         {"band", radio ? "radio" : "gamma"},
                         {"process", "total"},
                         {"label", labels[k]},
                         {"frequency_hz", image.frequency > 0 ? Json(image.frequency) : Json()},
                         {"energy_from_gev", energy[k] ? gev(energy[k]->from) : Json()},
                         {"energy_to_gev", energy[k] ? gev(energy[k]->to) : Json()},
                         {"unit", image.unit},
                         {"peak", peak_of(image)},
                         {"flux", flux_of(image)},
                         {"flux_unit", flux_unit(image.unit)}};
        if (image.beam) {
            map.emplace_back("beam_arcsec", Json::Array{image.beam->major / constants::arcsecond,
                                                        image.beam->minor / constants::arcsecond});
            map.emplace_back("beam_angle_deg", image.beam->position_angle / constants::degree);
        }
        list.push_back(std::move(map));
    }
    return list;
}

std::vector<std::string> assumptions() {
    return {"errors of the centre, the position angle and the inclination",
            "missing spacings, sidelobes and thermal emission in the maps",
            "the effect of interpolation on the noise of maps put on other pixels"};
}

Json summary_json(const HeightsArguments& arguments,
                  const std::vector<Image>& images,
                  const std::vector<std::string>& labels,
                  const std::vector<std::optional<emission::Channel>>& energy,
                  const profiles::HeightsSpec& spec,
                  const profiles::HeightsReport& report) {
    const bool gamma = images.front().unit.starts_with("cm-2");
    const std::string band = gamma ? "gamma" : "radio";
    const auto left_out = assumptions();
    return Json::Object{
        {"aureole", version},
        {"title", "heights measured in maps"},
        {"object", ""},
        {"command", arguments.command},
        {"view", Json::Object{{"inclination_deg", spec.profile.inclination / constants::degree},
                              {"position_angle_deg", spec.profile.position_angle / constants::degree},
                              {"distance_kpc", spec.profile.distance / constants::kiloparsec},
                              {"distance_error_kpc", spec.profile.distance_error / constants::kiloparsec}}},
        {"maps", maps_json(images, labels, energy)},
        {band + "_heights", report::heights_json(report, labels)},
        {band + "_exponent", report::exponent_json(report)},
        {"warnings", Json::Array(report.notes.begin(), report.notes.end())},
        {"leaves_out", Json::Array(left_out.begin(), left_out.end())}};
}

} // namespace

void add_heights_options(CLI::App& app, HeightsArguments& arguments) {
    app.add_option("MAP", arguments.files, "FITS maps, one galaxy, any telescopes")->required();
    app.add_option("-o,--output", arguments.folder, "Folder for tables and summary");
    const char* galaxy = "Galaxy";
    const auto quantity = [&](const char* name, std::string& target, const char* text, const char* group) {
        return app.add_option(name, target, text)->group(group)->type_name("TEXT");
    };
    quantity("--centre,--center", arguments.centre, "\"RA DEC\", deg or h:m:s d:m:s (from header)", galaxy);
    quantity("--position-angle", arguments.position_angle, "Major axis, North through East (PADEG)", galaxy);
    quantity("--inclination", arguments.inclination, "90 deg is edge-on (INCLDEG, or 90 deg)", galaxy);
    quantity("--distance", arguments.distance, "\"10 Mpc\" (DISTKPC)", galaxy);
    quantity("--distance-error", arguments.distance_error, "Common to all heights", galaxy);
    const char* profile = "Profiles";
    app.add_option("--strips", arguments.strips, "Strips along the major axis")
        ->group(profile)
        ->capture_default_str();
    quantity("--strip-width", arguments.strip_width, "\"2 kpc\" (half the map in all)", profile);
    quantity("--bin", arguments.bin, "Height of a bin (half a beam)", profile);
    quantity("--from", arguments.from, "Least |height| fitted (0)", profile);
    quantity("--to", arguments.to, "Greatest |height| fitted (0.45 maps)", profile);
    quantity("--mask", arguments.mask, "FITS mask or region file to leave out", profile);
    quantity("--beam", arguments.beam, "Common beam, \"15 arcsec\" (smallest)", profile);
    const char* noise = "Noise";
    app.add_option("--rms", arguments.rms, "Noise of the maps given, 0: none (measured)")
        ->group(noise)
        ->allow_extra_args(false);
    app.add_option("--noise", arguments.noise, "Where errors come from (beam)")
        ->group(noise)
        ->check(CLI::IsMember({"beam", "autocorrelation", "scatter"}));
    quantity("--source-free-height", arguments.source_free_height, "|height| beyond all emission", noise);
    quantity("--background", arguments.background, "Value, 'measured' or 'fitted'", noise)
        ->capture_default_str();
    quantity("--calibration-error", arguments.calibration_error, "Fraction, for amplitudes", noise);
    const char* fit = "Fit";
    app.add_option("--model", arguments.models,
                   "exponential, gaussian, sech2, two_exponential\nor two_gaussian; repeatable")
        ->group(fit)
        ->allow_extra_args(false);
    app.add_flag("--naive", arguments.naive, "Edge-on models at any inclination")->group(fit);
    quantity("--disc-radius", arguments.disc_radius, "Scale length of the inclined disc (fitted)", fit);
    app.add_option("--sides", arguments.sides, "Fit both sides as one, or each")
        ->group(fit)
        ->check(CLI::IsMember({"both", "each"}))
        ->capture_default_str();
    app.add_flag("--force", arguments.force, "Replace results of an earlier run");
}

int heights(const HeightsArguments& arguments, const RunContext& context) {
    const auto beam = read_beam_option(arguments.beam);
    std::optional<files::RunFolder> folder;
    const GivenMaps given = read_all(arguments.files, context);
    const std::vector<Image>& originals = given.images;
    if (!arguments.folder.empty()) {
        folder.emplace(arguments.folder, arguments.force);
        for (const std::string& path : arguments.files) {
            folder->protect(path);
        }
    }
    maps::CommonMaps common = maps::bring_to_common(originals, beam);
    const std::vector<Image>& images = common.images;
    HeightsRequest request =
        read_request(arguments, originals, images, maps::read_facts(arguments.files.front()));
    profiles::HeightsReport report;
    try {
        report = profiles::measure_heights(images, request.spec, context);
    } catch (const Error& error) {
        throw Error(error.kind() == ErrorKind::scenario ? ErrorKind::usage : error.kind(), error.what());
    }
    if (images.front().unit.starts_with("cm-2")) {
        report.exponents.clear(); // heights against frequency are a matter of radio maps
    }
    report.notes.insert(report.notes.begin(), request.notes.begin(), request.notes.end());
    report.notes.insert(report.notes.begin(), common.notes.begin(), common.notes.end());

    const auto labels = labels_of(images, given.energy);
    for (const std::string& line : report::terminal_lines(report, labels)) {
        if (!arguments.quiet) {
            fmt::print("{}\n", line);
        }
    }
    std::fflush(stdout);
    if (folder) {
        const std::vector<std::pair<std::string, std::string>> meta{{"command", arguments.command}};
        folder->begin_writing();
        folder->write_text("tables/profiles.ecsv",
                           files::ecsv_text(report::profiles_table(report, labels, request.spec), meta));
        folder->write_text("tables/heights.ecsv",
                           files::ecsv_text(report::heights_table(report, labels), meta));
        folder->write_text("tables/exponents.ecsv", files::ecsv_text(report::exponents_table(report), meta));
        folder->write_text(
            "summary.json",
            summary_json(arguments, images, labels, given.energy, request.spec, report).text());
        folder->finish(arguments.command);
    }
    return report.chosen ? 0 : static_cast<int>(ErrorKind::accuracy);
}

} // namespace aureole::app
