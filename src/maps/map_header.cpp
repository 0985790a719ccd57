#include "map_header.hpp"

#include "aureole/base/constants.hpp"
#include "aureole/base/error.hpp"
#include "aureole/base/units.hpp"
#include "aureole/maps/sky.hpp"

#include <fmt/format.h>

#include <algorithm>
#include <array>
#include <cmath>
#include <limits>
#include <optional>

namespace aureole::maps {

namespace {

using files::FitsReader;
using files::HduInfo;

std::string numbered(const char* keyword, std::size_t axis) {
    return fmt::format("{}{}", keyword, axis + 1);
}

std::string axis_type(FitsReader& file, const HduInfo& hdu, std::size_t axis) {
    std::string type = file.text(hdu, numbered("CTYPE", axis)).value_or("");
    std::transform(type.begin(), type.end(), type.begin(),
                   [](unsigned char c) { return static_cast<char>(std::toupper(c)); });
    return type;
}

bool is_lon(const std::string& type) {
    return type.starts_with("RA--") || type.starts_with("GLON");
}
bool is_lat(const std::string& type) {
    return type.starts_with("DEC-") || type.starts_with("GLAT");
}
bool is_energy(const std::string& type) {
    return type.starts_with("ENER") || type == "ENERGY";
}
bool is_spectral(const std::string& type) {
    return type.starts_with("FREQ") || type.starts_with("WAVE") || is_energy(type);
}

/// Step of an axis that no other one turns: CDELTn, or the diagonal of the CD matrix.
double step_of(FitsReader& file, const HduInfo& hdu, std::size_t axis) {
    const auto matrix = file.number(hdu, fmt::format("CD{0}_{0}", axis + 1));
    const double pc = file.number(hdu, fmt::format("PC{0}_{0}", axis + 1)).value_or(1);
    return matrix ? *matrix : pc * file.number(hdu, numbered("CDELT", axis)).value_or(1);
}

/// Factor from the unit of an axis; `usual` where CUNITn is absent.
double axis_factor(FitsReader& file,
                   const HduInfo& hdu,
                   std::size_t axis,
                   const Dimension& dimension,
                   const std::string& usual) {
    std::string unit = file.text(hdu, numbered("CUNIT", axis)).value_or("");
    if (unit.empty()) {
        unit = usual;
    }
    if (unit == "HZ" || unit == "hz") {
        unit = "Hz";
    } else if (unit == "DEG" || unit == "degree" || unit == "degrees" || unit == "DEGREE") {
        unit = "deg";
    }
    try {
        return unit_factor(unit, dimension);
    } catch (const Error& error) {
        refuse_card(file, hdu, numbered("CUNIT", axis), error.what());
    }
}

/// Value of a linear axis at a pixel counted from 0, in the unit of the header.
double axis_value(FitsReader& file, const HduInfo& hdu, std::size_t axis, std::size_t pixel) {
    const auto reference = file.number(hdu, numbered("CRVAL", axis));
    if (!reference) {
        refuse_card(file, hdu, numbered("CRVAL", axis), "found nothing, expected the value of the axis");
    }
    const double at = file.number(hdu, numbered("CRPIX", axis)).value_or(1);
    return *reference + step_of(file, hdu, axis) * (static_cast<double>(pixel + 1) - at);
}

/// Rest frequency of maps whose axes do not tell. Below 1 MHz it can hardly be Hz.
double frequency_keyword(FitsReader& file, const HduInfo& hdu) {
    for (const char* keyword : {"RESTFRQ", "RESTFREQ", "FREQ"}) {
        const auto value = file.number(hdu, keyword);
        if (!value || *value == 0) {
            continue;
        }
        if (*value < 1e6) {
            refuse_card(file, hdu, keyword,
                        fmt::format("found {}, expected a frequency in Hz, 1e6 or more", *value));
        }
        return *value;
    }
    return 0;
}

void read_spectrum(FitsReader& file, const HduInfo& hdu, std::size_t axis, MapAxes& axes) {
    const std::string type = axis_type(file, hdu, axis);
    axes.channels = hdu.shape[axis];
    axes.channel_axis = axis;
    axes.frequency.assign(axes.channels, 0.0);
    if (is_energy(type)) {
        return;
    }
    const bool wave = type.starts_with("WAVE");
    const double factor =
        axis_factor(file, hdu, axis, wave ? dimension::length : dimension::frequency, wave ? "m" : "Hz");
    for (std::size_t channel = 0; channel < axes.channels; ++channel) {
        const double value = factor * axis_value(file, hdu, axis, channel);
        if (!(value > 0)) {
            refuse_card(file, hdu, numbered("CRVAL", axis),
                        fmt::format("found {} {} in channel {}, expected a value > 0", value,
                                    wave ? "cm" : "Hz", channel + 1));
        }
        axes.frequency[channel] = wave ? constants::speed_of_light / value : value;
    }
}

/// The plane I (code 1) of a STOKES axis; the only one whatever it is.
std::size_t stokes_plane(FitsReader& file, const HduInfo& hdu, std::size_t axis) {
    if (hdu.shape[axis] == 1) {
        return 0;
    }
    for (std::size_t plane = 0; plane < hdu.shape[axis]; ++plane) {
        if (std::abs(axis_value(file, hdu, axis, plane) - 1) < 0.01) {
            return plane;
        }
    }
    refuse_card(file, hdu, numbered("CRVAL", axis),
                "found no Stokes I on the STOKES axis, expected a plane of code 1");
}

using Matrix = std::array<std::array<double, 2>, 2>;

/// Intermediate world coordinates (deg) by pixel along the two celestial axes: CD, or CDELT with PC or CROTA.
Matrix read_matrix(FitsReader& file, const HduInfo& hdu, const MapAxes& axes) {
    const std::array<std::size_t, 2> axis{axes.lon, axes.lat};
    Matrix cd{};
    Matrix pc{{{1, 0}, {0, 1}}};
    bool has_cd = false;
    bool has_pc = false;
    for (std::size_t row = 0; row < 2; ++row) {
        for (std::size_t column = 0; column < 2; ++column) {
            const std::string place = fmt::format("{}_{}", axis[row] + 1, axis[column] + 1);
            const std::string old_place = fmt::format("PC{:03}{:03}", axis[row] + 1, axis[column] + 1);
            const auto c = file.number(hdu, "CD" + place);
            auto p = file.number(hdu, "PC" + place);
            p = p ? p : file.number(hdu, old_place);
            has_cd = has_cd || c;
            has_pc = has_pc || p;
            cd[row][column] = c.value_or(0);
            pc[row][column] = p.value_or(pc[row][column]);
        }
    }
    if (has_cd) {
        return cd;
    }
    std::array<double, 2> step{};
    for (std::size_t row = 0; row < 2; ++row) {
        const std::string keyword = numbered("CDELT", axis[row]);
        const auto found = file.number(hdu, keyword);
        if (!found) {
            refuse_card(file, hdu, keyword, "found nothing, expected the pixel size or a CD matrix");
        }
        step[row] = *found;
    }
    const auto turn = file.number(hdu, numbered("CROTA", axes.lat));
    if (!has_pc && turn && *turn != 0) {
        const double c = std::cos(*turn * constants::degree);
        const double s = std::sin(*turn * constants::degree);
        return {{{step[0] * c, -step[1] * s}, {step[0] * s, step[1] * c}}};
    }
    for (std::size_t row = 0; row < 2; ++row) {
        for (std::size_t column = 0; column < 2; ++column) {
            pc[row][column] *= step[row];
        }
    }
    return pc;
}

std::string matrix_keyword(FitsReader& file, const HduInfo& hdu, const MapAxes& axes) {
    const std::string cd = fmt::format("CD{}_{}", axes.lon + 1, axes.lon + 1);
    const std::string turn = numbered("CROTA", axes.lat);
    return file.number(hdu, cd)     ? fmt::format("CD{}_{}", axes.lon + 1, axes.lat + 1)
           : file.number(hdu, turn) ? turn
                                    : fmt::format("PC{}_{}", axes.lon + 1, axes.lat + 1);
}

/// Takes the matrix apart into steps and one rotation, or refuses it.
void set_steps(FitsReader& file, const HduInfo& hdu, const MapAxes& axes, PixelGrid& pixels) {
    const Matrix m = read_matrix(file, hdu, axes);
    const double size_x = std::hypot(m[0][0], m[0][1]);
    const double size_y = std::hypot(m[1][0], m[1][1]);
    const double area = m[0][0] * m[1][1] - m[0][1] * m[1][0];
    const std::string keyword = matrix_keyword(file, hdu, axes);
    if (!(std::abs(area) > 1e-6 * size_x * size_y)) {
        refuse_card(
            file, hdu, keyword,
            fmt::format("found the pixel matrix [[{}, {}], [{}, {}]], expected one that can be inverted",
                        m[0][0], m[0][1], m[1][0], m[1][1]));
    }
    const double skew = (m[0][0] * m[1][0] + m[0][1] * m[1][1]) / (size_x * size_y);
    if (std::abs(skew) > 1e-6) {
        refuse_card(
            file, hdu, keyword,
            fmt::format("found the pixel matrix [[{}, {}], [{}, {}]], sheared by {:.3g}, expected square "
                        "or unturned pixels (rows at right angles to 1e-6)",
                        m[0][0], m[0][1], m[1][0], m[1][1], skew));
    }
    if (std::max(std::abs(m[0][1]), std::abs(m[1][0])) <= 1e-12 * std::min(size_x, size_y)) {
        pixels.step_x = m[0][0];
        pixels.step_y = m[1][1];
    } else {
        pixels.step_y = std::copysign(size_y, m[1][1]);
        pixels.step_x = std::copysign(size_x, area * pixels.step_y);
        pixels.rotation = std::atan2(m[1][0] / pixels.step_y, m[1][1] / pixels.step_y);
    }
    pixels.step_x *= axis_factor(file, hdu, axes.lon, dimension::angle, "deg");
    pixels.step_y *= axis_factor(file, hdu, axes.lat, dimension::angle, "deg");
}

std::string frame_of(FitsReader& file, const HduInfo& hdu, const std::string& lon_type) {
    if (lon_type.starts_with("GLON")) {
        return "GALACTIC";
    }
    auto frame = file.text(hdu, "RADESYS");
    frame = frame ? frame : file.text(hdu, "RADECSYS");
    auto equinox = file.number(hdu, "EQUINOX");
    equinox = equinox ? equinox : file.number(hdu, "EPOCH");
    if (!frame || frame->empty()) {
        frame = !equinox ? "ICRS" : *equinox < 1984 ? "FK4" : "FK5";
    }
    if (*frame != "ICRS" && *frame != "FK5") {
        refuse_card(file, hdu, "RADESYS",
                    fmt::format("found {}, expected ICRS, FK5 or Galactic coordinates: precess the map first",
                                *frame));
    }
    if (*frame == "FK5" && equinox && std::abs(*equinox - 2000) > 0.01) {
        refuse_card(file, hdu, "EQUINOX", fmt::format("found {}, expected 2000", *equinox));
    }
    return *frame;
}

/// Radius in the plane of a zenithal projection by distance from its centre.
double zenithal_radius(const std::string& projection, double distance) {
    return projection == "ARC"   ? distance
           : projection == "STG" ? 2 * std::tan(0.5 * distance)
                                 : 2 * std::sin(0.5 * distance);
}

/// Whether the projection may stand for `pixels.projection` over the whole map: the greatest displacement in
/// pixels.
double displacement(const std::string& projection, const PixelGrid& pixels) {
    const double step = std::min(std::abs(pixels.step_x), std::abs(pixels.step_y));
    const auto nx = static_cast<double>(pixels.nx);
    const auto ny = static_cast<double>(pixels.ny);
    double worst = 0;
    for (const auto& [i, j] :
         {std::array{-0.5, -0.5}, {nx - 0.5, -0.5}, {-0.5, ny - 0.5}, {nx - 0.5, ny - 0.5}}) {
        const SkyPosition sky = sky_position(pixels, i, j);
        if (!std::isfinite(sky.lat)) {
            return std::numeric_limits<double>::infinity();
        }
        if (projection == "NCP") { // against SIN: Calabretta & Greisen 2002, sec. 5.1.5
            const double turn = sky.lon - pixels.lon;
            const double sin_lat = std::sin(pixels.lat);
            const double orthographic =
                std::sin(sky.lat) * std::cos(pixels.lat) - std::cos(sky.lat) * sin_lat * std::cos(turn);
            const double polar = (std::cos(pixels.lat) - std::cos(sky.lat) * std::cos(turn)) / sin_lat;
            worst = std::max(worst, std::abs(polar - orthographic) / step);
        } else {
            const double distance = angular_distance({pixels.lon, pixels.lat}, sky);
            worst =
                std::max(worst, std::abs(zenithal_radius(projection, distance) - std::tan(distance)) / step);
        }
    }
    return worst;
}

void set_projection(FitsReader& file, const HduInfo& hdu, const MapAxes& axes, PixelGrid& pixels) {
    const std::string lon_type = axis_type(file, hdu, axes.lon);
    const std::string keyword = numbered("CTYPE", axes.lon);
    const std::string projection = lon_type.size() > 5 ? lon_type.substr(5) : "";
    const bool close =
        projection == "ARC" || projection == "STG" || projection == "ZEA" || projection == "NCP";
    if (projection != "TAN" && projection != "SIN" && !close) {
        refuse_card(
            file, hdu, keyword,
            fmt::format("found {}, expected the projection TAN or SIN (or ARC, STG, ZEA, NCP on a small map)",
                        lon_type));
    }
    const auto pole = file.number(hdu, "LONPOLE");
    if (pole && std::abs(std::remainder(*pole - 180, 360)) > 1e-6) {
        refuse_card(file, hdu, "LONPOLE", fmt::format("found {}, expected 180", *pole));
    }
    for (const char* parameter : {"PV{}_1", "PV{}_2"}) {
        const std::string name = fmt::format(fmt::runtime(parameter), axes.lat + 1);
        const double value = file.number(hdu, name).value_or(0);
        if (projection == "SIN" && value != 0) {
            refuse_card(file, hdu, name, fmt::format("found {} (a slant projection), expected 0", value));
        }
    }
    pixels.projection = projection == "SIN" || projection == "NCP" ? "SIN" : "TAN";
    if (close) {
        const double miss = displacement(projection, pixels);
        if (!(miss <= 0.05)) {
            refuse_card(
                file, hdu, keyword,
                fmt::format(
                    "found {}, which strays from {} by {:.3g} pixels on this map, expected TAN or SIN, "
                    "or a smaller map",
                    lon_type, pixels.projection, miss));
        }
    }
}

} // namespace

void refuse_card(const FitsReader& file,
                 const HduInfo& hdu,
                 const std::string& keyword,
                 const std::string& text) {
    throw Error(ErrorKind::input, fmt::format("{}: HDU {}: {}: {}", file.path(), hdu.name, keyword, text));
}

const HduInfo& first_image(const FitsReader& file) {
    for (const HduInfo& hdu : file.hdus()) {
        if (hdu.is_image && hdu.shape.size() >= 2 && hdu.values() > 0) {
            return hdu;
        }
    }
    throw Error(ErrorKind::input,
                fmt::format("{}: found no image, expected a map of two axes or more", file.path()));
}

MapAxes read_axes(FitsReader& file, const HduInfo& hdu) {
    MapAxes axes;
    std::optional<std::size_t> lon;
    std::optional<std::size_t> lat;
    std::optional<std::size_t> spectrum;
    std::size_t stride = 1;
    for (std::size_t axis = 0; axis < hdu.shape.size(); ++axis) {
        const std::string type = axis_type(file, hdu, axis);
        axes.stride.push_back(stride);
        stride *= hdu.shape[axis];
        if (is_lon(type)) {
            lon = axis;
        } else if (is_lat(type)) {
            lat = axis;
        } else if (is_spectral(type)) {
            spectrum = axis;
        } else if (type == "STOKES") {
            axes.fixed += axes.stride[axis] * stokes_plane(file, hdu, axis);
        } else if (hdu.shape[axis] > 1) {
            refuse_card(
                file, hdu, numbered("CTYPE", axis),
                fmt::format(
                    "found '{}' on an axis of length {}, expected RA and DEC (or GLON and GLAT), FREQ, "
                    "WAVE, ENERGY or STOKES",
                    type, hdu.shape[axis]));
        }
    }
    if (!lon || !lat) {
        refuse_card(file, hdu, "CTYPE1",
                    fmt::format("found '{}' and '{}', expected RA and DEC or GLON and GLAT",
                                axis_type(file, hdu, 0), axis_type(file, hdu, 1)));
    }
    axes.lon = *lon;
    axes.lat = *lat;
    axes.frequency.assign(1, 0.0);
    if (spectrum) {
        read_spectrum(file, hdu, *spectrum, axes);
    }
    if (!spectrum ||
        (axes.channels == 1 && axes.frequency[0] == 0 && !is_energy(axis_type(file, hdu, *spectrum)))) {
        axes.frequency[0] = frequency_keyword(file, hdu);
    }
    return axes;
}

PixelGrid read_pixels(FitsReader& file, const HduInfo& hdu, const MapAxes& axes) {
    PixelGrid pixels;
    pixels.nx = hdu.shape[axes.lon];
    pixels.ny = hdu.shape[axes.lat];
    const auto need = [&](const char* keyword, std::size_t axis) {
        const auto value = file.number(hdu, numbered(keyword, axis));
        if (!value) {
            refuse_card(file, hdu, numbered(keyword, axis),
                        "found nothing, expected the reference point of the map");
        }
        return *value;
    };
    pixels.centre_x = need("CRPIX", axes.lon) - 1;
    pixels.centre_y = need("CRPIX", axes.lat) - 1;
    pixels.lon = need("CRVAL", axes.lon) * axis_factor(file, hdu, axes.lon, dimension::angle, "deg");
    pixels.lat = need("CRVAL", axes.lat) * axis_factor(file, hdu, axes.lat, dimension::angle, "deg");
    set_steps(file, hdu, axes, pixels);
    pixels.frame = frame_of(file, hdu, axis_type(file, hdu, axes.lon));
    set_projection(file, hdu, axes, pixels);
    return pixels;
}

std::vector<float>
read_plane(FitsReader& file, const HduInfo& hdu, const MapAxes& axes, std::size_t channel) {
    const std::size_t nx = hdu.shape[axes.lon];
    const std::size_t ny = hdu.shape[axes.lat];
    const std::size_t start = axes.fixed + (axes.channels > 1 ? channel * axes.stride[axes.channel_axis] : 0);
    std::vector<float> plane(nx * ny);
    if (axes.lon == 0 && axes.lat == 1) {
        file.read(hdu, start, plane.size(), plane.data());
    } else {
        std::vector<float> all(hdu.values());
        file.read(hdu, 0, all.size(), all.data());
        for (std::size_t j = 0; j < ny; ++j) {
            for (std::size_t i = 0; i < nx; ++i) {
                plane[i + nx * j] = all[start + i * axes.stride[axes.lon] + j * axes.stride[axes.lat]];
            }
        }
    }
    for (float& value : plane) {
        if (!std::isfinite(value)) {
            value = std::numeric_limits<float>::quiet_NaN();
        }
    }
    return plane;
}

} // namespace aureole::maps
