#include "map_products.hpp"

#include "aureole/base/constants.hpp"
#include "aureole/base/parallel.hpp"
#include "aureole/maps/units.hpp"

#include <fmt/format.h>

#include <algorithm>
#include <cmath>
#include <limits>

namespace aureole::app {

namespace {

using emission::Band;

/// The trade's flux of a plane from its integral over the sky in CGS: Jy, or photons cm-2 s-1 (per MeV or
/// GeV).
double trade_flux(double cgs, const emission::Channel& channel, const std::string& gamma_unit) {
    if (channel.band == Band::radio) {
        return cgs / constants::jansky;
    }
    return channel.is_band() ? cgs : cgs * maps::gamma_factor(gamma_unit);
}

std::string flux_unit(const emission::Channel& channel, const std::string& gamma_unit) {
    if (channel.band == Band::radio) {
        return "Jy";
    }
    if (channel.is_band()) {
        return "cm-2 s-1";
    }
    return gamma_unit.ends_with("GeV-1") ? "cm-2 s-1 GeV-1" : "cm-2 s-1 MeV-1";
}

std::string file_of(const emission::Plane& plane, const emission::Channel& channel) {
    if (plane.band == Band::gamma) {
        std::string process = plane.process;
        std::replace(process.begin(), process.end(), ':', '_');
        return plane.process == "total" ? "maps/gamma.fits" : "maps/gamma_" + process + ".fits";
    }
    const std::string suffix = plane.process == "synchrotron_q"   ? "_q"
                               : plane.process == "synchrotron_u" ? "_u"
                                                                  : "";
    return "maps/radio_" + file_label(channel) + suffix + ".fits";
}

} // namespace

float peak_of(const maps::Image& image) {
    float peak = 0;
    for (const float value : image.value) {
        peak = std::max(peak, std::abs(value));
    }
    return peak;
}

std::string file_label(const emission::Channel& channel) {
    std::string text = emission::label(channel);
    std::erase(text, ' ');
    return text;
}

MapSettings map_settings(const scenario::Scenario& scenario, const grid::Grid& grid) {
    MapSettings settings;
    settings.view = scenario_view(scenario);
    settings.pixels = scenario_pixels(scenario, grid, settings.view);
    settings.radio_beam = radio_beam(scenario);
    settings.gamma_beam = gamma_beam(scenario);
    settings.radio_unit = scenario.text("radio.unit");
    settings.gamma_unit = scenario.text("gamma.unit");
    settings.render.tolerance = scenario.number("map.tolerance");
    const std::string pion_model = scenario.text("emission.pion_model");
    // Steps at the borders of the published regimes, or coefficients that nothing outside has confirmed.
    const bool unverified = pion_model != "kafexhiu_2014_continuous" && pion_model != "kelner_2006";
    settings.gamma_cards = {{"PIONMOD", pion_model, "p + p -> gamma, by author and year"},
                            {"PIONVER", std::string(unverified ? "UNVERIFIED" : "CHECKED"),
                             "energy fraction across regime borders"},
                            {"NUCENH", scenario.number("emission.nuclear_enhancement"), "nuclei over p + p"}};
    return settings;
}

std::vector<MapProduct> make_maps(const emission::Emitted& emitted,
                                  const std::vector<emission::Channel>& channels,
                                  const MapSettings& settings,
                                  const RunContext& context) {
    const auto& planes = emitted.emissivity.planes;
    auto rendered =
        maps::render(emitted.emissivity, settings.view, settings.pixels, settings.render, context);
    const std::size_t pixels = settings.pixels.nx * settings.pixels.ny;
    std::vector<MapProduct> products(planes.size());
    for_each_block(context, planes.size(), [&](std::size_t p) {
        MapProduct& product = products[p];
        product.plane = planes[p];
        product.channel = channels[planes[p].channel];
        const bool radio = planes[p].band == Band::radio;
        product.label = emission::label(product.channel);
        product.file = file_of(planes[p], product.channel);
        product.luminosity = emitted.report.planes[p].luminosity;
        const auto& beam = radio ? settings.radio_beam : settings.gamma_beam;
        const std::string unit = radio                       ? settings.radio_unit
                                 : product.channel.is_band() ? "cm-2 s-1 sr-1"
                                                             : settings.gamma_unit;
        const double factor = planes[p].unit * (radio ? maps::radio_factor(unit, product.channel.centre(),
                                                                           beam, settings.pixels.pixel_area())
                                                      : maps::gamma_factor(unit));
        maps::Image& image = product.image;
        image.pixels = settings.pixels;
        image.name = product.label;
        image.frequency = radio ? product.channel.centre() : 0;
        image.unit = unit == "Jy/beam" ? "MJy/sr" : unit; // per beam only once there is a beam
        image.value.resize(pixels);
        const float* from = rendered.value.data() + p * pixels;
        std::transform(from, from + pixels, image.value.begin(),
                       [factor](float v) { return static_cast<float>(factor * static_cast<double>(v)); });
        if (beam) {
            image = maps::convolve(image, *beam);
        }
        image.unit = unit;

        maps::MapNotes& notes = product.notes;
        notes.process = planes[p].process == "total" && radio ? "synchrotron" : planes[p].process;
        notes.flux = trade_flux(rendered.flux[p] * planes[p].unit, product.channel, settings.gamma_unit);
        notes.flux_unit = flux_unit(product.channel, settings.gamma_unit);
        const double expected = rendered.flux_expected[p];
        const double scale = planes[p].is_signed ? rendered.flux_expected[planes[p].channel] : expected;
        if (std::abs(scale) > 0) {
            notes.flux_error =
                std::abs(rendered.flux[p] + rendered.flux_outside[p] - expected) / std::abs(scale);
            notes.flux_outside = planes[p].is_signed ? 0 : rendered.flux_outside[p] / expected;
        }
        notes.error_sight = rendered.sampling_error[p];
        notes.width = radio ? product.channel.to - product.channel.from : 0;
        if (!radio) {
            notes.more = settings.gamma_cards;
        }
        if (planes[p].process == "total") {
            notes.error_energy = emitted.report.planes[p].energy_error;
            notes.missing = emitted.report.planes[p].missing_above + emitted.report.planes[p].missing_below;
        } else {
            notes.error_energy = emitted.report.planes[planes[p].channel].energy_error;
        }
    });
    return products;
}

void estimate_errors(std::vector<MapProduct>& fine, const std::vector<MapProduct>& coarse) {
    for (std::size_t p = 0; p < fine.size(); ++p) {
        const maps::Image& image = fine[p].image;
        const double peak = peak_of(image);
        double largest = 0;
        for (std::size_t i = 0; i < image.value.size() && peak > 0; ++i) {
            // Halving the cells again would change the map by less than this: by half of it at first order,
            // by a quarter at second.
            largest = std::max(largest, std::abs(static_cast<double>(image.value[i]) -
                                                 static_cast<double>(coarse[p].image.value[i])));
        }
        maps::MapNotes& notes = fine[p].notes;
        notes.error_cells = peak > 0 ? largest / peak : 0;
        notes.numerical_error = notes.error_cells + notes.error_energy + notes.error_sight;
    }
}

maps::Image spectral_index(const maps::Image& low, const maps::Image& high, double floor) {
    maps::Image index = low;
    index.unit = "";
    index.frequency = 0;
    const float low_floor = static_cast<float>(floor) * peak_of(low);
    const float high_floor = static_cast<float>(floor) * peak_of(high);
    const double log_ratio = std::log(high.frequency / low.frequency);
    // A brightness temperature falls by two powers of the frequency more than a flux.
    const double from_kelvin = low.unit == "K" ? 2 : 0;
    for (std::size_t i = 0; i < index.value.size(); ++i) {
        const bool usable = low.value[i] > low_floor && high.value[i] > high_floor;
        index.value[i] = usable ? static_cast<float>(std::log(static_cast<double>(high.value[i]) /
                                                              static_cast<double>(low.value[i])) /
                                                         log_ratio +
                                                     from_kelvin)
                                : std::numeric_limits<float>::quiet_NaN();
    }
    return index;
}

} // namespace aureole::app
