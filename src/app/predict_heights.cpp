#include "predict_heights.hpp"

#include "aureole/base/constants.hpp"
#include "aureole/base/error.hpp"

#include <fmt/format.h>

#include <algorithm>
#include <cmath>

namespace aureole::app {

namespace {

using emission::Band;

/// Noise of one map in its unit, as the scenario gives it for all or for each.
double rms_of(const std::vector<std::string>& given, std::size_t map, const maps::Image& image) {
    if (given.empty()) {
        return 0;
    }
    if (map >= given.size() && given.size() > 1) {
        throw Error(
            ErrorKind::scenario,
            fmt::format("heights.rms: found {} values, expected one for each radio frequency or one for all",
                        given.size()));
    }
    const std::string& text = given[given.size() == 1 ? 0 : map];
    try {
        const Unit unit = parse_unit(image.unit);
        return to_cgs(text, unit.dimension) / unit.factor;
    } catch (Error& error) {
        error.in("heights.rms");
        throw;
    }
}

profiles::HeightsSpec
heights_spec(const scenario::Scenario& scenario, const MapSettings& settings, const maps::Image& image) {
    profiles::HeightsSpec spec;
    profiles::ProfileSpec& profile = spec.profile;
    const double distance = settings.view.distance;
    profile.position_angle = settings.view.position_angle;
    profile.inclination = settings.view.inclination > constants::pi / 2
                              ? constants::pi - settings.view.inclination
                              : settings.view.inclination;
    profile.distance = distance;
    profile.distance_error = scenario.quantity("view.distance_error");
    profile.strips = static_cast<std::size_t>(scenario.integer("heights.strips"));
    const double width = static_cast<double>(image.pixels.nx) * std::abs(image.pixels.step_x) * distance;
    const double height = static_cast<double>(image.pixels.ny) * image.pixels.step_y * distance;
    const double across = std::min(width, height);
    profile.strip_width = scenario.quantity("heights.strip_width");
    if (profile.strip_width == 0) {
        const double pixel = image.pixels.step_y * distance;
        profile.strip_width =
            std::max(2 * pixel, 0.5 * std::max(width, height) / static_cast<double>(profile.strips));
    }
    profile.bin_height = scenario.quantity("heights.bin");
    if (profile.bin_height == 0) {
        const double pixel = image.pixels.step_y * distance;
        profile.bin_height = image.beam ? std::max(0.5 * image.beam->minor * distance, pixel) : 2 * pixel;
    }
    const double greatest = scenario.quantity("heights.to");
    profile.half_range = greatest > 0 ? greatest : 0.45 * across;
    profile.pixel_meaning = profiles::PixelMeaning::averages;
    profile.calibration_error = scenario.number("heights.calibration_error");
    spec.least_height = scenario.quantity("heights.from");
    if (greatest > 0) {
        spec.greatest_height = greatest;
    }
    spec.sides = scenario.text("heights.sides") == "each" ? profiles::Sides::each : profiles::Sides::together;
    for (const std::string& model : scenario.texts("heights.models")) {
        spec.models.push_back(profiles::parse_model(model));
    }
    const double off_edge = std::abs(constants::pi / 2 - profile.inclination);
    if (scenario.text("heights.inclination") == "forward" && off_edge > 0.1 * constants::degree) {
        profiles::DiscSpec disc;
        const double radius = scenario.quantity("heights.disc_radius");
        if (radius > 0) {
            disc.scale_length = radius;
        }
        spec.disc = disc;
    }
    return spec;
}

/// Copies the change of each height under coarsening into its numerical error.
void add_numerical_errors(profiles::HeightsReport& fine, const profiles::HeightsReport& coarse) {
    // At second order the error would be a third of the change. But fits of profiles with few cells to a
    // scale height do not converge evenly: over closed-form galaxies of 12 to 32 cells the error was 0.25 to
    // 1.3 times the change (tests/app/numerical_error.py), hence more than all of it.
    constexpr double share = 1.5;
    for (std::size_t r = 0; r < fine.rows.size() && r < coarse.rows.size(); ++r) {
        auto& components = fine.rows[r].fit.component;
        const auto& others = coarse.rows[r].fit.component;
        for (std::size_t c = 0; c < components.size() && c < others.size(); ++c) {
            components[c].numerical_error = share * std::abs(components[c].h - others[c].h);
        }
    }
    for (std::size_t r = 0; r < fine.combined.size() && r < coarse.combined.size(); ++r) {
        fine.combined[r].numerical_error = share * std::abs(fine.combined[r].h - coarse.combined[r].h);
    }
}

std::optional<BandHeights> measure_band(Band band,
                                        const scenario::Scenario& scenario,
                                        const MapSettings& settings,
                                        const std::vector<MapProduct>& products,
                                        const std::vector<MapProduct>& coarse,
                                        const RunContext& context) {
    BandHeights result;
    std::vector<maps::Image> images;
    std::vector<maps::Image> coarse_images;
    for (std::size_t p = 0; p < products.size(); ++p) {
        const MapProduct& product = products[p];
        if (product.plane.band == band && product.plane.process == "total") {
            images.push_back(product.image);
            result.labels.push_back(product.label);
            if (!coarse.empty()) {
                coarse_images.push_back(coarse[p].image);
            }
        }
    }
    if (images.empty()) {
        return std::nullopt;
    }
    profiles::HeightsSpec& spec = result.spec;
    spec = heights_spec(scenario, settings, images.front());
    const auto given = band == Band::radio ? scenario.texts("heights.rms") : std::vector<std::string>{};
    for (std::size_t i = 0; i < images.size(); ++i) {
        spec.rms.push_back(rms_of(given, i, images[i]));
    }
    try {
        result.report = profiles::measure_heights(images, spec, context);
        if (!coarse_images.empty()) {
            add_numerical_errors(result.report,
                                 profiles::measure_heights(coarse_images, spec, context, &result.report));
        }
        if (band == Band::gamma) {
            result.report.exponents.clear(); // heights against frequency are a matter of the radio maps
        }
    } catch (const Error& error) {
        // Maps that cannot be measured (too coarse, empty) are still maps.
        if (error.kind() != ErrorKind::input && error.kind() != ErrorKind::scenario) {
            throw;
        }
        result.problem = error.what();
    }
    return result;
}

} // namespace

PredictedHeights measure_heights(const scenario::Scenario& scenario,
                                 const MapSettings& settings,
                                 const std::vector<MapProduct>& products,
                                 const std::vector<MapProduct>& coarse,
                                 const RunContext& context) {
    return {measure_band(Band::radio, scenario, settings, products, coarse, context),
            measure_band(Band::gamma, scenario, settings, products, coarse, context)};
}

} // namespace aureole::app
