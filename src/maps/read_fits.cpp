#include "aureole/maps/read_fits.hpp"

#include "map_header.hpp"

#include "aureole/base/constants.hpp"
#include "aureole/base/error.hpp"
#include "aureole/base/units.hpp"

#include <fmt/format.h>

#include <algorithm>
#include <array>
#include <charconv>
#include <cmath>
#include <string_view>

namespace aureole::maps {

namespace {

using files::FitsReader;
using files::HduInfo;

struct Rewriting {
    std::string_view found, meant;
};

/// Usual spellings of BUNIT in the grammar of the FITS Standard (common practice).
std::string plain_spelling(std::string text) {
    constexpr std::array<Rewriting, 18> rewritings{{
        {"JANSKY", "Jy"},
        {"Jansky", "Jy"},
        {"JY", "Jy"},
        {"jy", "Jy"},
        {"BEAM", "beam"},
        {"Beam", "beam"},
        {"/bm", "/beam"},
        {"/BM", "/beam"},
        {"PIXEL", "pixel"},
        {"Pixel", "pixel"},
        {"PIX", "pix"},
        {"SR", "sr"},
        {"Sr", "sr"},
        {"KELVIN", "K"},
        {"Kelvin", "K"},
        {"kelvin", "K"},
        {"photons", "photon"},
        {" / ", "/"},
    }};
    for (const auto& [found, meant] : rewritings) {
        for (std::size_t at = text.find(found); at != std::string::npos;
             at = text.find(found, at + meant.size())) {
            text.replace(at, found.size(), meant);
        }
    }
    while (!text.empty() && text.front() == ' ') {
        text.erase(0, 1);
    }
    return text;
}

struct MapUnit {
    std::string name;
    double factor = 1; ///< value in the file x factor = value in `name`
};

MapUnit read_unit(FitsReader& file, const HduInfo& hdu) {
    const std::string expected =
        "expected a brightness such as Jy/beam, Jy/pixel, MJy/sr, K or cm-2 s-1 sr-1 MeV-1";
    const auto found = file.text(hdu, "BUNIT");
    if (!found || found->empty()) {
        refuse_card(file, hdu, "BUNIT", "found nothing, " + expected);
    }
    if (found->starts_with("MJY/B")) {
        refuse_card(
            file, hdu, "BUNIT",
            fmt::format("found {}, which may mean mJy or MJy, expected either as it is spelt", *found));
    }
    Unit unit;
    try {
        unit = parse_unit(plain_spelling(*found));
    } catch (const Error&) {
        refuse_card(file, hdu, "BUNIT", fmt::format("found '{}', {}", *found, expected));
    }
    constexpr Dimension per_beam = {.mass = 1, .time = -2, .beam = -1};
    constexpr Dimension per_pixel = {.mass = 1, .time = -2, .pixel = -1};
    constexpr Dimension photons = {.length = -2, .time = -1, .angle = -2};
    constexpr Dimension photons_per_energy = {.length = -4, .mass = -1, .time = 1, .angle = -2};
    const std::pair<Dimension, MapUnit> kinds[] = {
        {per_beam, {"Jy/beam", 1 / constants::jansky}},
        {per_pixel, {"Jy/pixel", 1 / constants::jansky}},
        {dimension::radio_intensity, {"MJy/sr", 1e-6 / constants::jansky}},
        {dimension::temperature, {"K", 1}},
        {photons, {"cm-2 s-1 sr-1", 1}},
        {photons_per_energy, {"cm-2 s-1 sr-1 MeV-1", constants::megaelectronvolt}},
    };
    for (const auto& [dimension, kind] : kinds) {
        if (unit.dimension == dimension) {
            const double factor = unit.factor * kind.factor;
            return {kind.name, std::abs(factor - 1) < 1e-12 ? 1 : factor};
        }
    }
    refuse_card(file, hdu, "BUNIT", fmt::format("found '{}', {}", *found, expected));
}

/// Number behind "NAME=" in a card.
std::optional<double> number_after(const std::string& card, const std::string& name) {
    const std::size_t at = card.find(name);
    const std::size_t start = at == std::string::npos ? at : card.find_first_not_of(" =", at + name.size());
    if (start == std::string::npos) {
        return std::nullopt;
    }
    std::string text = card.substr(start);
    std::replace(text.begin(), text.end(), 'D', 'E');
    double value = 0;
    const char* first = text.data() + (text.front() == '+' ? 1 : 0);
    const auto [end, failure] = std::from_chars(first, text.data() + text.size(), value);
    return failure == std::errc() ? std::optional(value) : std::nullopt;
}

Beam beam_of(double major, double minor, double angle) {
    return {major * constants::degree, minor * constants::degree, angle * constants::degree};
}

/// The last one counts: a map may have been smoothed after cleaning.
std::optional<Beam> beam_in_history(FitsReader& file, const HduInfo& hdu) {
    std::optional<Beam> beam;
    for (const std::string& card : file.cards(hdu)) {
        if (!card.starts_with("HISTORY") || card.find("CLEAN BMAJ") == std::string::npos) {
            continue;
        }
        const auto major = number_after(card, "BMAJ");
        const auto minor = number_after(card, "BMIN");
        if (major && minor && *minor > 0 && *major >= *minor) {
            beam = beam_of(*major, *minor, number_after(card, "BPA").value_or(0));
        }
    }
    return beam;
}

std::optional<Beam> read_beam(FitsReader& file, const HduInfo& hdu) {
    const auto major = file.number(hdu, "BMAJ");
    const auto minor = file.number(hdu, "BMIN");
    const auto angle = file.number(hdu, "BPA");
    if (!major || *major == 0) {
        if (file.flag(hdu, "CASAMBM").value_or(false)) {
            refuse_card(
                file, hdu, "CASAMBM",
                "found a beam for every channel, expected one for all: smooth the channels to a common "
                "beam first");
        }
        return beam_in_history(file, hdu);
    }
    if (!minor) {
        refuse_card(file, hdu, "BMIN",
                    "found nothing beside BMAJ, expected the minor width of the beam in deg");
    }
    if (!(*minor > 0) || !(*major >= *minor)) {
        refuse_card(
            file, hdu, "BMAJ",
            fmt::format("found BMAJ = {} and BMIN = {}, expected BMAJ >= BMIN > 0 (deg)", *major, *minor));
    }
    if (!angle && *major > *minor * (1 + 1e-6)) {
        refuse_card(file, hdu, "BPA",
                    "found nothing for a beam that is not round, expected its position angle in deg");
    }
    return beam_of(*major, *minor, angle.value_or(0));
}

bool all_blank(const std::vector<float>& values) {
    return std::all_of(values.begin(), values.end(), [](float value) { return std::isnan(value); });
}

} // namespace

std::vector<Image> read_maps(const std::string& path) {
    FitsReader file(path);
    const HduInfo& hdu = first_image(file);
    const MapAxes axes = read_axes(file, hdu);
    const MapUnit unit = read_unit(file, hdu);
    Image image;
    image.pixels = read_pixels(file, hdu, axes);
    image.beam = read_beam(file, hdu);
    image.unit = unit.name;
    if (unit.name == "Jy/beam" && !image.beam) {
        refuse_card(
            file, hdu, "BMAJ",
            "found nothing for a map in Jy/beam, expected BMAJ, BMIN and BPA in deg (or CLEAN BMAJ= in "
            "the HISTORY)");
    }
    std::vector<Image> images;
    for (std::size_t channel = 0; channel < axes.channels; ++channel) {
        image.value = read_plane(file, hdu, axes, channel);
        image.frequency = unit.name.starts_with("cm-2") ? 0 : axes.frequency[channel];
        image.name = axes.channels == 1 ? path : fmt::format("{}, channel {}", path, channel + 1);
        if (all_blank(image.value)) {
            throw Error(ErrorKind::input,
                        fmt::format("{}: HDU {}: found blanks only, expected a map", image.name, hdu.name));
        }
        for (float& value : image.value) {
            value = static_cast<float>(value * unit.factor);
        }
        images.push_back(image);
    }
    return images;
}

MapFacts read_facts(const std::string& path) {
    FitsReader file(path);
    const HduInfo& hdu = first_image(file);
    MapFacts facts;
    const auto lon = file.number(hdu, "OBSRA");
    const auto lat = file.number(hdu, "OBSDEC");
    if (lon && lat) {
        facts.pointing = SkyPosition{*lon * constants::degree, *lat * constants::degree};
    }
    const auto angle = [&](const char* keyword) {
        const auto value = file.number(hdu, keyword);
        return value ? std::optional(*value * constants::degree) : std::nullopt;
    };
    facts.inclination = angle("INCLDEG");
    facts.position_angle = angle("PADEG");
    const auto kpc = file.number(hdu, "DISTKPC");
    if (kpc && *kpc > 0) {
        facts.distance = *kpc * constants::kiloparsec;
    }
    return facts;
}

} // namespace aureole::maps
