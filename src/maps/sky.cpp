#include "aureole/maps/sky.hpp"

#include "aureole/base/constants.hpp"
#include "aureole/base/error.hpp"

#include <fmt/format.h>

#include <charconv>
#include <cmath>
#include <limits>
#include <vector>

namespace aureole::maps {

namespace {

using Vector = std::array<double, 3>;

Vector direction(const SkyPosition& sky) {
    return {std::cos(sky.lat) * std::cos(sky.lon), std::cos(sky.lat) * std::sin(sky.lon), std::sin(sky.lat)};
}

SkyPosition position_of(const Vector& v) {
    const double lon = std::atan2(v[1], v[0]);
    return {lon < 0 ? lon + 2 * constants::pi : lon, std::atan2(v[2], std::hypot(v[0], v[1]))};
}

/// Direction cosines of a position towards East, North and the centre itself.
Vector local_cosines(const SkyPosition& centre, const SkyPosition& sky) {
    const double turn = sky.lon - centre.lon;
    // 1 - cos by the half-angle, so that small offsets keep their digits.
    const double half = std::sin(0.5 * turn);
    const double north =
        std::sin(sky.lat - centre.lat) + 2 * std::sin(centre.lat) * std::cos(sky.lat) * half * half;
    return {std::cos(sky.lat) * std::sin(turn), north,
            std::cos(sky.lat - centre.lat) - 2 * std::cos(sky.lat) * std::cos(centre.lat) * half * half};
}

[[noreturn]] void refuse(const std::string& projection) {
    throw Error(ErrorKind::input, fmt::format("found projection {}, expected TAN or SIN", projection));
}

/// Rows: the Galactic axes in ICRS.
constexpr std::array<Vector, 3> galactic_axes{
    {{-0.0548755604162154, -0.8734370902348850, -0.4838350155487132},
     {+0.4941094278755837, -0.4448296299600112, +0.7469822444972189},
     {-0.8676661490190047, -0.1980763734312015, +0.4559837761750669}}};

bool is_equatorial(const std::string& frame) {
    return frame == "ICRS" || frame == "FK5";
}

std::optional<double> plain_number(std::string_view text) {
    double value = 0;
    const auto [end, failure] = std::from_chars(text.data(), text.data() + text.size(), value);
    if (failure != std::errc() || end != text.data() + text.size() || !std::isfinite(value)) {
        return std::nullopt;
    }
    return value;
}

} // namespace

SkyPosition sky_position(const PixelGrid& pixels, double i, double j) {
    const double cosine = std::cos(pixels.rotation);
    const double sine = std::sin(pixels.rotation);
    const double di = i - pixels.centre_x;
    const double dj = j - pixels.centre_y;
    const double x = pixels.step_x * (cosine * di - sine * dj);
    const double y = pixels.step_y * (sine * di + cosine * dj);
    double east = x;
    double north = y;
    double towards = 1;
    if (pixels.projection == "SIN") {
        const double square = x * x + y * y;
        towards = square <= 1 ? std::sqrt(1 - square) : std::numeric_limits<double>::quiet_NaN();
    } else if (pixels.projection == "TAN") {
        towards = 1 / std::sqrt(1 + x * x + y * y);
        east *= towards;
        north *= towards;
    } else {
        refuse(pixels.projection);
    }
    const double sin_lat = std::sin(pixels.lat);
    const double cos_lat = std::cos(pixels.lat);
    const double along = towards * cos_lat - north * sin_lat;
    const double lon = pixels.lon + std::atan2(east, along);
    const double lat = std::atan2(towards * sin_lat + north * cos_lat, std::hypot(along, east));
    const double circle = 2 * constants::pi;
    return {lon - circle * std::floor(lon / circle), lat};
}

std::optional<std::array<double, 2>> pixel_position(const PixelGrid& pixels, const SkyPosition& sky) {
    const auto [east, north, towards] = local_cosines({pixels.lon, pixels.lat}, sky);
    if (pixels.projection != "SIN" && pixels.projection != "TAN") {
        refuse(pixels.projection);
    }
    if (!(towards > 1e-9)) {
        return std::nullopt;
    }
    const double scale = pixels.projection == "SIN" ? 1 : 1 / towards;
    const double u = scale * east / pixels.step_x;
    const double v = scale * north / pixels.step_y;
    const double cosine = std::cos(pixels.rotation);
    const double sine = std::sin(pixels.rotation);
    return std::array{pixels.centre_x + cosine * u + sine * v, pixels.centre_y - sine * u + cosine * v};
}

std::optional<std::array<double, 2>> gnomonic_offset(const SkyPosition& centre, const SkyPosition& sky) {
    const auto [east, north, towards] = local_cosines(centre, sky);
    if (!(towards > 1e-9)) {
        return std::nullopt;
    }
    return std::array{east / towards, north / towards};
}

double angular_distance(const SkyPosition& a, const SkyPosition& b) {
    const auto [east, north, towards] = local_cosines(a, b);
    return std::atan2(std::hypot(east, north), towards);
}

SkyPosition change_frame(const SkyPosition& sky, const std::string& from_frame, const std::string& to_frame) {
    for (const std::string& frame : {from_frame, to_frame}) {
        if (!is_equatorial(frame) && frame != "GALACTIC") {
            throw Error(ErrorKind::input,
                        fmt::format("found celestial frame {}, expected ICRS, FK5 or GALACTIC", frame));
        }
    }
    if (is_equatorial(from_frame) == is_equatorial(to_frame)) {
        return sky;
    }
    const bool to_galactic = is_equatorial(from_frame);
    const Vector v = direction(sky);
    Vector turned{};
    for (std::size_t row = 0; row < 3; ++row) {
        for (std::size_t column = 0; column < 3; ++column) {
            turned[row] +=
                (to_galactic ? galactic_axes[row][column] : galactic_axes[column][row]) * v[column];
        }
    }
    return position_of(turned);
}

std::optional<double> read_angle(std::string_view text, bool hours) {
    while (!text.empty() && text.front() == ' ') {
        text.remove_prefix(1);
    }
    while (!text.empty() && text.back() == ' ') {
        text.remove_suffix(1);
    }
    const bool negative = text.starts_with('-');
    if (negative || text.starts_with('+')) {
        text.remove_prefix(1);
    }
    if (text.empty() || text.front() == '-' || text.front() == '+') {
        return std::nullopt;
    }
    const std::size_t mark = text.find_first_of(":hdms");
    double degrees = 0;
    if (mark == std::string_view::npos) {
        const auto value = plain_number(text);
        if (!value) {
            return std::nullopt;
        }
        degrees = *value;
    } else {
        const bool colons = text[mark] == ':';
        const bool counts_hours = colons ? hours : text[mark] == 'h';
        const std::string_view marks = colons ? "::" : counts_hours ? "hms" : "dms";
        double size = 1;
        for (std::size_t part = 0; part < 3 && !text.empty(); ++part) {
            const std::size_t end = part < marks.size() ? text.find(marks[part]) : std::string_view::npos;
            if (end == std::string_view::npos && !colons) {
                return std::nullopt;
            }
            const auto value = plain_number(text.substr(0, end));
            if (!value || *value < 0 || (part > 0 && *value >= 60)) {
                return std::nullopt;
            }
            degrees += *value * size;
            size /= 60;
            text.remove_prefix(end == std::string_view::npos ? text.size() : end + 1);
        }
        if (!text.empty()) {
            return std::nullopt;
        }
        degrees *= counts_hours ? 15 : 1;
    }
    return (negative ? -degrees : degrees) * constants::degree;
}

} // namespace aureole::maps
