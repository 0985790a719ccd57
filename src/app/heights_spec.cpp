#include "heights_spec.hpp"

#include "aureole/base/constants.hpp"
#include "aureole/base/error.hpp"
#include "aureole/base/units.hpp"
#include "aureole/maps/regions.hpp"
#include "aureole/maps/regrid.hpp"
#include "aureole/maps/sky.hpp"
#include "aureole/profiles/noise.hpp"

#include <fmt/format.h>

#include <algorithm>
#include <array>
#include <cmath>
#include <sstream>

namespace aureole::app {

namespace {

[[noreturn]] void refuse(const std::string& option, const std::string& text) {
    throw Error(ErrorKind::usage, fmt::format("{}: {}", option, text));
}

double quantity(const std::string& option, const std::string& text, const Dimension& dimension) {
    try {
        return to_cgs(text, dimension);
    } catch (const Error& error) {
        refuse(option, error.what());
    }
}

double positive(const std::string& option, const std::string& text, const Dimension& dimension) {
    const double value = quantity(option, text, dimension);
    if (!(value > 0)) {
        const auto expected = describe(dimension);
        refuse(option, fmt::format("found \"{}\", expected {} over 0 such as \"{}\"", text, expected.name,
                                   expected.example));
    }
    return value;
}

double
option_or(const std::string& option, const std::string& text, const Dimension& dimension, double otherwise) {
    return text.empty() ? otherwise : positive(option, text, dimension);
}

double value_in(const std::string& option, const std::string& text, const std::string& unit) {
    const Unit parsed = parse_unit(unit);
    return quantity(option, text, parsed.dimension) / parsed.factor;
}

/// A fraction such as "0.05" or "5 %".
double fraction(const std::string& option, std::string text) {
    double size = 1;
    if (!text.empty() && text.back() == '%') {
        text.pop_back();
        size = 0.01;
    }
    const double value = size * quantity(option, text, dimension::none);
    if (!(value >= 0) || value >= 1) {
        refuse(option,
               fmt::format("found \"{}\", expected a fraction of 0 or more and less than 1, such as 0.05",
                           text));
    }
    return value;
}

bool on_map(const maps::PixelGrid& pixels, const maps::SkyPosition& sky) {
    const auto place = maps::pixel_position(pixels, sky);
    return place && (*place)[0] > -0.5 && (*place)[1] > -0.5 &&
           (*place)[0] < static_cast<double>(pixels.nx) - 0.5 &&
           (*place)[1] < static_cast<double>(pixels.ny) - 0.5;
}

maps::SkyPosition position_option(const std::string& text, const std::string& frame) {
    std::string words = text;
    std::replace(words.begin(), words.end(), ',', ' ');
    std::istringstream stream(words);
    std::vector<std::string> part;
    for (std::string word; stream >> word;) {
        part.push_back(word);
    }
    if (part.size() == 6) { // "12 34 56.7 -12 23 28"
        part = {part[0] + ':' + part[1] + ':' + part[2], part[3] + ':' + part[4] + ':' + part[5]};
    }
    const auto lon = part.size() == 2 ? maps::read_angle(part[0], true) : std::nullopt;
    const auto lat = part.size() == 2 ? maps::read_angle(part[1], false) : std::nullopt;
    if (!lon || !lat || std::abs(*lat) > constants::pi / 2) {
        refuse("--centre",
               fmt::format("found \"{}\", expected right ascension and declination such as \"188.5 -12.4\" "
                           "(deg) or \"12:34:00 -12:24:00\"",
                           text));
    }
    return maps::change_frame({*lon, *lat}, "ICRS", frame);
}

maps::SkyPosition centre_of(const HeightsArguments& arguments,
                            const maps::PixelGrid& pixels,
                            const maps::MapFacts& facts,
                            HeightsRequest& request) {
    if (!arguments.centre.empty()) {
        const maps::SkyPosition centre = position_option(arguments.centre, pixels.frame);
        if (!on_map(pixels, centre)) {
            refuse("--centre", fmt::format("found \"{}\", which is off the first map", arguments.centre));
        }
        return centre;
    }
    const maps::SkyPosition reference{pixels.lon, pixels.lat};
    if (facts.pointing) {
        const auto pointing = maps::change_frame(*facts.pointing, "ICRS", pixels.frame);
        if (on_map(pixels, pointing)) {
            request.notes.emplace_back(
                "The centre was taken from OBSRA and OBSDEC of the first map; --centre sets it.");
            return pointing;
        }
    }
    if (on_map(pixels, reference)) {
        request.notes.emplace_back(
            "The centre was taken from the reference point of the first map; --centre sets it.");
        return reference;
    }
    request.notes.emplace_back("The centre was taken in the middle of the first map; --centre sets it.");
    return maps::sky_position(pixels, 0.5 * (static_cast<double>(pixels.nx) - 1),
                              0.5 * (static_cast<double>(pixels.ny) - 1));
}

void set_orientation(const HeightsArguments& arguments,
                     const maps::MapFacts& facts,
                     HeightsRequest& request) {
    profiles::ProfileSpec& profile = request.spec.profile;
    if (!arguments.distance.empty()) {
        profile.distance = positive("--distance", arguments.distance, dimension::length);
    } else if (facts.distance) {
        profile.distance = *facts.distance;
    } else {
        refuse(
            "--distance",
            "found neither this option nor DISTKPC in the first map, expected a length such as \"10 Mpc\"");
    }
    if (!arguments.distance_error.empty()) {
        profile.distance_error = quantity("--distance-error", arguments.distance_error, dimension::length);
    }
    if (profile.distance_error < 0 || profile.distance_error >= profile.distance) {
        refuse("--distance-error", fmt::format("found \"{}\", expected 0 or more and less than the distance",
                                               arguments.distance_error));
    }
    if (!arguments.position_angle.empty()) {
        profile.position_angle = quantity("--position-angle", arguments.position_angle, dimension::angle);
    } else if (facts.position_angle) {
        profile.position_angle = *facts.position_angle;
    } else {
        refuse("--position-angle",
               "found neither this option nor PADEG in the first map, expected the angle of the major "
               "axis from North through East such as \"40 deg\"");
    }
    if (!arguments.inclination.empty()) {
        profile.inclination = quantity("--inclination", arguments.inclination, dimension::angle);
        if (profile.inclination < 0 || profile.inclination > constants::pi * (1 + 1e-12)) {
            refuse("--inclination", fmt::format("found \"{}\", expected 0 to 180 deg (90 deg is edge-on)",
                                                arguments.inclination));
        }
    } else if (facts.inclination) {
        profile.inclination = *facts.inclination;
    } else {
        request.notes.emplace_back("The galaxy was taken as edge-on; --inclination sets it.");
    }
    profile.inclination = std::min(profile.inclination, constants::pi - profile.inclination);
}

/// Strips, bins and the range of heights; defaults from the map and its beam.
void set_strips(const HeightsArguments& arguments, const maps::Image& image, HeightsRequest& request) {
    profiles::HeightsSpec& spec = request.spec;
    profiles::ProfileSpec& profile = spec.profile;
    const maps::PixelGrid& pixels = image.pixels;
    const double pixel = std::max(std::abs(pixels.step_x), std::abs(pixels.step_y)) * profile.distance;
    const double width = static_cast<double>(pixels.nx) * std::abs(pixels.step_x) * profile.distance;
    const double height = static_cast<double>(pixels.ny) * std::abs(pixels.step_y) * profile.distance;
    if (arguments.strips < 1) {
        refuse("--strips", fmt::format("found {}, expected 1 or more", arguments.strips));
    }
    profile.strips = static_cast<std::size_t>(arguments.strips);
    profile.strip_width =
        option_or("--strip-width", arguments.strip_width, dimension::length,
                  std::max(2 * pixel, 0.5 * std::min(width, height) / static_cast<double>(profile.strips)));
    profile.bin_height =
        option_or("--bin", arguments.bin, dimension::length,
                  image.beam ? std::max(0.5 * image.beam->major * profile.distance, pixel) : 2 * pixel);
    if (!arguments.from.empty()) {
        spec.least_height = quantity("--from", arguments.from, dimension::length);
    }
    spec.greatest_height = option_or("--to", arguments.to, dimension::length, spec.greatest_height);
    if (spec.least_height < 0 || !(spec.greatest_height > spec.least_height)) {
        refuse("--from", fmt::format("found \"{}\", expected 0 or more and less than --to", arguments.from));
    }
    profile.half_range =
        std::isfinite(spec.greatest_height) ? spec.greatest_height : 0.45 * std::min(width, height);
    if (profile.half_range < 2 * profile.bin_height) {
        refuse(arguments.to.empty() ? "--bin" : "--to",
               fmt::format("found heights up to {:.3g} kpc in bins of {:.3g} kpc, expected two bins or more",
                           profile.half_range / constants::kiloparsec,
                           profile.bin_height / constants::kiloparsec));
    }
    if (image.beam && profile.bin_height < 0.4 * image.beam->minor * profile.distance) {
        request.notes.emplace_back("The bins are lower than 0.4 beams: neighbours are strongly correlated.");
    }
    if (!arguments.source_free_height.empty()) {
        profile.source_free_height =
            positive("--source-free-height", arguments.source_free_height, dimension::length);
    }
}

/// Determinants of squared widths: of the map's own beam, of the beam it was brought to, and of what noise
/// correlated like the former is correlated like after the smoothing. That correlation has the beam's
/// covariance C; the kernel C' - C, folded in twice, widens it to 2C' - C.
struct Widths {
    double before = 1, after = 1, noise = 1;
};

Widths widths_of(const maps::Image& original, const maps::Image& image) {
    if (!original.beam || !image.beam) {
        return {};
    }
    const auto matrix = [](const maps::Beam& beam) {
        const double s = std::sin(beam.position_angle);
        const double c = std::cos(beam.position_angle);
        const double major = beam.major * beam.major;
        const double minor = beam.minor * beam.minor;
        return std::array{major * s * s + minor * c * c, (major - minor) * s * c,
                          major * c * c + minor * s * s};
    };
    const auto determinant = [](const std::array<double, 3>& m) { return m[0] * m[2] - m[1] * m[1]; };
    const auto before = matrix(*original.beam);
    const auto after = matrix(*image.beam);
    const std::array<double, 3> noise{2 * after[0] - before[0], 2 * after[1] - before[1],
                                      2 * after[2] - before[2]};
    return {determinant(before), determinant(after), determinant(noise)};
}

/// Change of the rms by the smoothing: by det^1/4 in brightness, and with the beam's solid angle per beam.
double smoothing_factor(const maps::Image& original, const maps::Image& image) {
    const Widths widths = widths_of(original, image);
    const double per_beam = original.unit == "Jy/beam" ? std::sqrt(widths.after / widths.before) : 1;
    return per_beam * std::pow(widths.before / widths.noise, 0.25);
}

/// Smoothed noise is correlated over more than the beam. With this factor on its rms, noise taken to be
/// correlated like the beam has the right power on scales over the beam, which is what heights feel; shorter
/// ones get too much. Near 1 where nothing was smoothed.
double correlation_factor(const maps::Image& original, const maps::Image& image) {
    const Widths widths = widths_of(original, image);
    return std::pow(widths.noise / widths.after, 0.25);
}

double rms_of(const std::string& text, const maps::Image& original, const maps::Image& image) {
    const double given = value_in("--rms", text, original.unit);
    if (given < 0) {
        refuse("--rms", fmt::format("found \"{}\", expected 0 (noiseless) or more", text));
    }
    maps::Image one = image;
    one.value = {1.0F};
    one.unit = original.unit;
    return given * smoothing_factor(original, image) *
           static_cast<double>(maps::convert_unit(one, image.unit).value[0]);
}

bool smoothed(std::span<const maps::Image> originals, std::span<const maps::Image> images) {
    for (std::size_t k = 0; k < images.size(); ++k) {
        if (correlation_factor(originals[k], images[k]) > 1.001 ||
            originals[k].beam.has_value() != images[k].beam.has_value()) {
            return true;
        }
    }
    return false;
}

/// The noise of every map, as given or as measured.
void set_rms(const HeightsArguments& arguments,
             std::span<const maps::Image> originals,
             std::span<const maps::Image> images,
             HeightsRequest& request) {
    profiles::ProfileSpec& profile = request.spec.profile;
    std::vector<double>& rms = request.spec.rms;
    const bool raise = profile.noise == profiles::NoiseFrom::beam && smoothed(originals, images);
    if (arguments.rms.empty() && !raise) {
        return;
    }
    for (std::size_t k = 0; k < images.size(); ++k) {
        if (arguments.rms.empty()) {
            rms.push_back(
                profiles::measure_noise(images[k], profiles::source_free_pixels(images[k].pixels, profile))
                    .rms);
        } else {
            const std::string& text = arguments.rms[arguments.rms.size() == 1 ? 0 : k];
            rms.push_back(text == "0" ? 0 : rms_of(text, originals[k], images[k]));
        }
        rms.back() *= raise ? correlation_factor(originals[k], images[k]) : 1;
    }
    if (raise && *std::max_element(rms.begin(), rms.end()) > 0) {
        request.notes.emplace_back(
            "Noise of smoothed maps is correlated over more than the beam: its rms was raised "
            "to keep the errors of heights right.");
    }
}

void set_noise(const HeightsArguments& arguments,
               std::span<const maps::Image> originals,
               std::span<const maps::Image> images,
               HeightsRequest& request) {
    profiles::ProfileSpec& profile = request.spec.profile;
    if (arguments.rms.size() > 1 && arguments.rms.size() != images.size()) {
        refuse("--rms", fmt::format("found {} values, expected one, or one for each of {} maps",
                                    arguments.rms.size(), images.size()));
    }
    const std::string noise = !arguments.noise.empty() ? arguments.noise
                              : images.front().beam    ? "beam"
                                                       : "autocorrelation";
    profile.noise = noise == "beam"      ? profiles::NoiseFrom::beam
                    : noise == "scatter" ? profiles::NoiseFrom::scatter
                                         : profiles::NoiseFrom::autocorrelation;
    set_rms(arguments, originals, images, request);
    if (arguments.background == "measured") {
        profile.background = profiles::BackgroundFrom::measured;
    } else if (arguments.background == "fitted") {
        profile.background = profiles::BackgroundFrom::fitted;
    } else if (arguments.background != "0") {
        profile.background_level = value_in("--background", arguments.background, images.front().unit);
    }
    if (!arguments.calibration_error.empty()) {
        profile.calibration_error = fraction("--calibration-error", arguments.calibration_error);
    }
}

void set_models(const HeightsArguments& arguments, HeightsRequest& request) {
    profiles::HeightsSpec& spec = request.spec;
    for (const std::string& name : arguments.models) {
        try {
            spec.models.push_back(profiles::parse_model(name));
        } catch (const Error& error) {
            refuse("--model", error.what());
        }
    }
    if (spec.models.empty()) {
        spec.models = {profiles::Model::exponential, profiles::Model::gaussian};
    }
    spec.sides = arguments.sides == "each" ? profiles::Sides::each : profiles::Sides::together;
    spec.force_inclination = arguments.naive;
    const double off_edge = std::abs(constants::pi / 2 - spec.profile.inclination);
    const double radius = option_or("--disc-radius", arguments.disc_radius, dimension::length, 0);
    if (!arguments.naive && off_edge > 0.1 * constants::degree) {
        if (spec.profile.inclination < 0.1) {
            refuse(
                "--inclination",
                fmt::format("found {:.3g} deg, expected 6 deg or more: seen face-on, heights leave no trace",
                            spec.profile.inclination / constants::degree));
        }
        spec.disc = profiles::DiscSpec{radius > 0 ? std::optional(radius) : std::nullopt, std::nullopt};
    }
}

} // namespace

std::optional<maps::Beam> read_beam_option(const std::string& text) {
    if (text.empty()) {
        return std::nullopt;
    }
    std::vector<std::string> part;
    std::istringstream stream(text);
    for (std::string piece; std::getline(stream, piece, ',');) {
        part.push_back(piece);
    }
    if (part.size() != 1 && part.size() != 3) {
        refuse("--beam",
               fmt::format("found \"{}\", expected \"15 arcsec\" or \"15 arcsec, 12 arcsec, 30 deg\"", text));
    }
    maps::Beam beam;
    beam.major = positive("--beam", part[0], dimension::angle);
    beam.minor = part.size() == 3 ? positive("--beam", part[1], dimension::angle) : beam.major;
    beam.position_angle = part.size() == 3 ? quantity("--beam", part[2], dimension::angle) : 0;
    if (beam.minor > beam.major) {
        refuse("--beam", fmt::format("found \"{}\", expected the major width first", text));
    }
    return beam;
}

HeightsRequest read_request(const HeightsArguments& arguments,
                            std::span<const maps::Image> originals,
                            std::span<const maps::Image> images,
                            const maps::MapFacts& facts) {
    HeightsRequest request;
    const maps::Image& first = images.front();
    set_orientation(arguments, facts, request);
    const auto centre = centre_of(arguments, first.pixels, facts, request);
    request.spec.profile.centre = profiles::offset_of(first.pixels, centre.lon, centre.lat);
    set_strips(arguments, first, request);
    if (!arguments.mask.empty()) {
        request.spec.profile.mask = maps::read_mask(arguments.mask, first.pixels);
    }
    set_noise(arguments, originals, images, request);
    set_models(arguments, request);
    return request;
}

} // namespace aureole::app
