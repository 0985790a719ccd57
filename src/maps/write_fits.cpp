#include "aureole/maps/write_fits.hpp"

#include "aureole/base/constants.hpp"
#include "aureole/base/error.hpp"

#include <fmt/format.h>

#include <cmath>

namespace aureole::maps {

namespace {

using files::Card;
using files::FitsWriter;
using files::Header;

constexpr double rad_to_deg = 1 / constants::degree;

void append(std::vector<Card>& to, const std::vector<Card>& more) {
    to.insert(to.end(), more.begin(), more.end());
}

/// The PC matrix of turned pixel axes; version: of the coordinates ("" or "A").
std::vector<Card> turn_cards(const PixelGrid& pixels, const std::string& version) {
    if (pixels.rotation == 0) {
        return {};
    }
    const double cosine = std::cos(pixels.rotation);
    const double sine = std::sin(pixels.rotation);
    return {{"PC1_1" + version, cosine, ""},
            {"PC1_2" + version, -sine, ""},
            {"PC2_1" + version, sine, ""},
            {"PC2_2" + version, cosine, ""}};
}

/// The celestial axes, with the turn of the pixel axes as a PC matrix.
std::vector<Card> celestial_cards(const PixelGrid& pixels) {
    const bool galactic = pixels.frame == "GALACTIC";
    std::vector<Card> cards{
        {"CTYPE1", (galactic ? "GLON-" : "RA---") + pixels.projection, ""},
        {"CRPIX1", pixels.centre_x + 1, "pixel of the reference point"},
        {"CRVAL1", pixels.lon * rad_to_deg, ""},
        {"CDELT1", pixels.step_x * rad_to_deg, ""},
        {"CUNIT1", std::string("deg"), ""},
        {"CTYPE2", (galactic ? "GLAT-" : "DEC--") + pixels.projection, ""},
        {"CRPIX2", pixels.centre_y + 1, ""},
        {"CRVAL2", pixels.lat * rad_to_deg, ""},
        {"CDELT2", pixels.step_y * rad_to_deg, ""},
        {"CUNIT2", std::string("deg"), ""},
    };
    append(cards, turn_cards(pixels, ""));
    cards.push_back({"LONPOLE", 180.0, "deg"});
    if (!galactic) {
        cards.push_back({"RADESYS", pixels.frame, "celestial frame"});
    }
    return cards;
}

/// Offsets in kpc at the galaxy's distance, as an alternate WCS.
std::vector<Card> kpc_cards(const PixelGrid& pixels, double distance, int axes) {
    const double kpc = distance / constants::kiloparsec;
    std::vector<Card> cards{
        {"WCSNAMEA", std::string("PHYSICAL_KPC"), "offsets at the distance of the galaxy"},
        {"CTYPE1A", std::string("OFFSET_X"), "to the West"},
        {"CRPIX1A", pixels.centre_x + 1, ""},
        {"CRVAL1A", 0.0, ""},
        {"CDELT1A", -pixels.step_x * kpc, ""},
        {"CUNIT1A", std::string("kpc"), ""},
        {"CTYPE2A", std::string("OFFSET_Y"), "to the North"},
        {"CRPIX2A", pixels.centre_y + 1, ""},
        {"CRVAL2A", 0.0, ""},
        {"CDELT2A", pixels.step_y * kpc, ""},
        {"CUNIT2A", std::string("kpc"), ""},
    };
    append(cards, turn_cards(pixels, "A"));
    if (axes == 3) {
        for (Card card : {Card{"CTYPE3A", std::string("PLANE"), ""}, Card{"CRPIX3A", 1.0, ""},
                          Card{"CRVAL3A", 1.0, ""}, Card{"CDELT3A", 1.0, ""}}) {
            cards.push_back(std::move(card));
        }
    }
    return cards;
}

std::vector<Card> origin_cards(const MapOrigin& origin) {
    return {
        {"OBJECT", origin.object, ""},
        {"TELESCOP", std::string("aureole model"), "model output, no observation"},
        {"TITLE", origin.title, ""},
        {"INCLDEG", origin.inclination * rad_to_deg, "inclination, deg"},
        {"PADEG", origin.position_angle * rad_to_deg, "position angle of the x axis, deg"},
        {"PHI0DEG", origin.azimuth * rad_to_deg, "azimuth, deg"},
        {"DISTKPC", origin.distance / constants::kiloparsec, "distance, kpc"},
        {"LOSMODE", std::string(origin.perspective ? "PERSP" : "ORTHO"), "projection of the sight lines"},
        {"SCENHASH", origin.scenario_hash, "FNV-1a of the effective scenario"},
    };
}

std::vector<Card> note_cards(const MapNotes& notes) {
    std::vector<Card> cards{
        {"PROCESS", notes.process, ""},
        {"FLUXTOT", notes.flux, "sum over the map, " + notes.flux_unit},
        {"FLUXCHK", notes.flux_error, "map against emission, relative"},
        {"FLUXOUT", notes.flux_outside, "share of the flux off the map"},
        {"SPECMISS", notes.missing, "share missing as the spectra end"},
    };
    if (notes.numerical_error > 0) {
        append(cards, {{"NUMERR", notes.numerical_error, "numerical error over the peak"},
                       {"NUMERR_E", notes.error_energy, "of it: energy nodes"},
                       {"NUMERR_C", notes.error_cells, "of it: cell size"},
                       {"NUMERR_S", notes.error_sight, "of it: sight lines"}});
    }
    append(cards, notes.more);
    return cards;
}

/// Whether one step in ln(energy) leads from each to the next.
bool is_even_in_log(const std::vector<double>& energies) {
    for (std::size_t i = 2; i < energies.size(); ++i) {
        if (std::abs(std::log(energies[i] / energies[i - 1]) / std::log(energies[1] / energies[0]) - 1) >
            1e-6) {
            return false;
        }
    }
    return true;
}

std::vector<Card> beam_cards(const Image& image) {
    if (!image.beam && image.unit == "Jy/beam") {
        throw Error(ErrorKind::runtime,
                    fmt::format("map {}: found the unit Jy/beam without a beam", image.name));
    }
    if (!image.beam) {
        return {};
    }
    return {{"BMAJ", image.beam->major * rad_to_deg, "beam, full width at half maximum, deg"},
            {"BMIN", image.beam->minor * rad_to_deg, ""},
            {"BPA", image.beam->position_angle * rad_to_deg, "North through East, deg"}};
}

} // namespace

void write_radio_map(const std::filesystem::path& path,
                     const Image& image,
                     const MapOrigin& origin,
                     const MapNotes& notes,
                     bool replace) {
    Header header;
    header.cards = celestial_cards(image.pixels);
    append(header.cards, {{"CTYPE3", std::string("FREQ"), ""},
                          {"CRPIX3", 1.0, ""},
                          {"CRVAL3", image.frequency, ""},
                          {"CDELT3", notes.width > 0 ? notes.width : 1e6,
                           "width of the channel; 1 MHz for a single frequency"},
                          {"CUNIT3", std::string("Hz"), ""},
                          {"RESTFRQ", image.frequency, "Hz"},
                          {"SPECSYS", std::string("BARYCENT"), ""}});
    append(header.cards, kpc_cards(image.pixels, origin.distance, 3));
    append(header.cards, {{"BUNIT", image.unit, ""}, {"BTYPE", notes.type, ""}});
    append(header.cards, beam_cards(image));
    append(header.cards, origin_cards(origin));
    append(header.cards, note_cards(notes));
    header.history = origin.history;
    FitsWriter writer(path, replace);
    writer.image("", {image.pixels.nx, image.pixels.ny, 1}, image.value, header);
    writer.commit();
}

void write_plane(const std::filesystem::path& path,
                 const Image& image,
                 const MapOrigin& origin,
                 const MapNotes& notes,
                 bool replace) {
    Header header;
    header.cards = celestial_cards(image.pixels);
    append(header.cards, kpc_cards(image.pixels, origin.distance, 2));
    append(header.cards, {{"BUNIT", image.unit, ""}, {"BTYPE", notes.type, ""}});
    append(header.cards, beam_cards(image));
    append(header.cards, origin_cards(origin));
    append(header.cards, {{"PROCESS", notes.process, ""}});
    append(header.cards, notes.more);
    header.history = origin.history;
    FitsWriter writer(path, replace);
    writer.image("", {image.pixels.nx, image.pixels.ny}, image.value, header);
    writer.commit();
}

void write_gamma_cube(const std::filesystem::path& path,
                      const std::vector<Image>& planes,
                      const std::vector<double>& energies,
                      const MapOrigin& origin,
                      const std::vector<MapNotes>& notes,
                      bool replace) {
    if (planes.empty() || notes.size() != planes.size() ||
        (energies.size() != planes.size() && energies.size() != planes.size() + 1)) {
        throw Error(ErrorKind::runtime, "write_gamma_cube: planes, notes and energies do not go together");
    }
    for (const Image& plane : planes) {
        if (plane.pixels != planes.front().pixels || plane.unit != planes.front().unit) {
            throw Error(ErrorKind::runtime, "write_gamma_cube: planes differ in pixels or unit");
        }
    }
    const bool bands = energies.size() == planes.size() + 1;
    const double mev = constants::megaelectronvolt;
    const double first = bands ? std::sqrt(energies[0] * energies[1]) : energies[0];
    const double ratio = energies.size() > 1 ? energies[1] / energies[0] : 10;
    Header header;
    header.cards = celestial_cards(planes.front().pixels);
    if (is_even_in_log(energies)) {
        append(header.cards, {{"CTYPE3", std::string("ENER-LOG"), "the table holds the energies"},
                              {"CRPIX3", 1.0, ""},
                              {"CRVAL3", first / mev, ""},
                              {"CDELT3", first / mev * std::log(ratio), ""},
                              {"CUNIT3", std::string("MeV"), ""}});
    } else {
        append(header.cards, {{"CTYPE3", std::string("ENERBAND"), "number of a plane; see the table"},
                              {"CRPIX3", 1.0, ""},
                              {"CRVAL3", 1.0, ""},
                              {"CDELT3", 1.0, ""}});
    }
    append(header.cards, kpc_cards(planes.front().pixels, origin.distance, 3));
    const std::string table = bands ? "EBOUNDS" : "ENERGIES";
    append(header.cards, {{"BUNIT", planes.front().unit, ""},
                          {"BTYPE", notes.front().type, ""},
                          {"BANDSHDU", table, "table of the planes' energies"}});
    append(header.cards, beam_cards(planes.front()));
    append(header.cards, origin_cards(origin));
    append(header.cards, {{"PROCESS", notes.front().process, ""}});
    append(header.cards, notes.front().more);
    header.history = origin.history;

    const std::size_t pixels = planes.front().value.size();
    std::vector<float> cube;
    cube.reserve(pixels * planes.size());
    for (const Image& plane : planes) {
        cube.insert(cube.end(), plane.value.begin(), plane.value.end());
    }
    FitsWriter writer(path, replace);
    writer.image("", {planes.front().pixels.nx, planes.front().pixels.ny, planes.size()}, cube, header);
    std::vector<files::TableColumn> columns;
    if (bands) {
        const double kev = 1e3 * constants::electronvolt;
        std::vector<long> channel;
        std::vector<double> low;
        std::vector<double> high;
        for (std::size_t p = 0; p < planes.size(); ++p) {
            channel.push_back(static_cast<long>(p));
            low.push_back(energies[p] / kev);
            high.push_back(energies[p + 1] / kev);
        }
        columns = {{"CHANNEL", "", channel}, {"E_MIN", "keV", low}, {"E_MAX", "keV", high}};
    } else {
        std::vector<double> at;
        for (const double energy : energies) {
            at.push_back(energy / mev);
        }
        columns = {{"ENERGY", "MeV", at}};
    }
    writer.table(table, columns, {});

    const auto column = [&](const char* name, auto member, const std::string& unit) {
        std::vector<double> values;
        for (const MapNotes& note : notes) {
            values.push_back(note.*member);
        }
        return files::TableColumn{name, unit, values};
    };
    writer.table(
        "NOTES",
        {column("FLUXTOT", &MapNotes::flux, notes.front().flux_unit),
         column("FLUXCHK", &MapNotes::flux_error, ""), column("FLUXOUT", &MapNotes::flux_outside, ""),
         column("SPECMISS", &MapNotes::missing, ""), column("NUMERR", &MapNotes::numerical_error, ""),
         column("NUMERR_E", &MapNotes::error_energy, ""), column("NUMERR_C", &MapNotes::error_cells, ""),
         column("NUMERR_S", &MapNotes::error_sight, "")},
        {});
    writer.commit();
}

void write_channel_table(const std::filesystem::path& path,
                         const std::vector<double>& frequency,
                         const std::vector<double>& width,
                         const std::vector<std::string>& file,
                         bool replace) {
    FitsWriter writer(path, replace);
    writer.image("", {}, std::vector<float>{}, {});
    writer.table("CHANNELS", {{"FREQ", "Hz", frequency}, {"WIDTH", "Hz", width}, {"FILE", "", file}}, {});
    writer.commit();
}

} // namespace aureole::maps
