#include "aureole/maps/regions.hpp"

#include "map_header.hpp"

#include "aureole/base/constants.hpp"
#include "aureole/base/error.hpp"
#include "aureole/maps/sky.hpp"

#include <fmt/format.h>

#include <algorithm>
#include <array>
#include <cmath>
#include <fstream>
#include <sstream>

namespace aureole::maps {

namespace {

using Point = std::array<double, 2>;

struct Shape {
    enum class Kind { circle, ellipse, box, polygon } kind = Kind::circle;
    bool takes_out = false; ///< '-' in front
    std::string frame = "ICRS";
    SkyPosition centre;
    double width = 0, height = 0; ///< rad: semi-axes, or half width and height
    double angle = 0;             ///< rad, from West over North
    std::vector<Point> corner;    ///< gnomonic offsets from the centre
};

class RegionReader {
  public:
    RegionReader(std::string_view text, std::string name) : text_(text), name_(std::move(name)) {}

    std::vector<Shape> read() {
        std::vector<Shape> shapes;
        std::size_t start = 0;
        while (start <= text_.size()) {
            ++line_;
            const std::size_t end = std::min(text_.find('\n', start), text_.size());
            std::string line(text_.substr(start, end - start));
            start = end + 1;
            line.erase(std::min(line.find('#'), line.size()));
            std::istringstream parts(line);
            std::string part;
            while (std::getline(parts, part, ';')) {
                add(trimmed(part), shapes);
            }
        }
        if (shapes.empty()) {
            throw Error(ErrorKind::input,
                        fmt::format("{}: found no region, expected circle, ellipse, box or polygon", name_));
        }
        return shapes;
    }

  private:
    [[noreturn]] void fail(const std::string& text) const {
        throw Error(ErrorKind::input, fmt::format("{}: line {}: {}", name_, line_, text));
    }
    static std::string trimmed(const std::string& text) {
        const std::size_t first = text.find_first_not_of(" \t\r");
        if (first == std::string::npos) {
            return {};
        }
        return text.substr(first, text.find_last_not_of(" \t\r") - first + 1);
    }

    void add(std::string part, std::vector<Shape>& shapes) {
        std::transform(part.begin(), part.end(), part.begin(),
                       [](unsigned char c) { return static_cast<char>(std::tolower(c)); });
        if (part.empty() || part.starts_with("global")) {
            return;
        }
        if (part == "icrs" || part == "fk5" || part == "j2000" || part == "galactic") {
            frame_ = part == "galactic" ? "GALACTIC" : part == "icrs" ? "ICRS" : "FK5";
            return;
        }
        const std::size_t open = part.find('(');
        if (open == std::string::npos) {
            fail(fmt::format(
                "found \"{}\", expected icrs, fk5, galactic or a shape such as circle(10.5,41.2,30\")",
                part));
        }
        const std::size_t close = part.find(')', open);
        if (close == std::string::npos || !trimmed(part.substr(close + 1)).empty()) {
            fail(fmt::format("found \"{}\", expected one closing bracket at its end", part));
        }
        shapes.push_back(
            shape(trimmed(part.substr(0, open)), values(part.substr(open + 1, close - open - 1))));
    }

    std::vector<std::string> values(const std::string& text) const {
        std::vector<std::string> found;
        std::istringstream parts(text);
        std::string value;
        const bool commas = text.find(',') != std::string::npos;
        while (commas ? static_cast<bool>(std::getline(parts, value, ','))
                      : static_cast<bool>(parts >> value)) {
            found.push_back(trimmed(value));
        }
        return found;
    }

    Shape shape(std::string kind, const std::vector<std::string>& value) const {
        Shape made;
        made.frame = frame_;
        if (kind.starts_with('-') || kind.starts_with('+')) {
            made.takes_out = kind.front() == '-';
            kind.erase(0, 1);
        }
        const auto expect = [&](bool right, const char* form) {
            if (!right) {
                fail(fmt::format("found {} with {} values, expected {}", kind, value.size(), form));
            }
        };
        if (kind == "circle") {
            expect(value.size() == 3, "circle(lon,lat,radius)");
            made.width = made.height = length(value[2]);
        } else if (kind == "ellipse") {
            expect(value.size() == 4 || value.size() == 5, "ellipse(lon,lat,semi-axis,semi-axis,angle)");
            made.kind = Shape::Kind::ellipse;
        } else if (kind == "box") {
            expect(value.size() == 4 || value.size() == 5, "box(lon,lat,width,height,angle)");
            made.kind = Shape::Kind::box;
        } else if (kind == "polygon") {
            expect(value.size() >= 6 && value.size() % 2 == 0, "polygon(lon,lat,lon,lat,lon,lat,...)");
            made.kind = Shape::Kind::polygon;
        } else {
            fail(fmt::format("found shape \"{}\", expected circle, ellipse, box or polygon", kind));
        }
        made.centre = place(value[0], value[1]);
        if (kind == "ellipse" || kind == "box") {
            const double half = kind == "box" ? 0.5 : 1;
            made.width = half * length(value[2]);
            made.height = half * length(value[3]);
            made.angle = value.size() == 5 ? angle(value[4]) : 0;
        }
        for (std::size_t k = 0; kind == "polygon" && k < value.size(); k += 2) {
            const auto offset = gnomonic_offset(made.centre, place(value[k], value[k + 1]));
            if (!offset) {
                fail("found a polygon wider than a hemisphere");
            }
            made.corner.push_back(*offset);
        }
        return made;
    }

    SkyPosition place(const std::string& lon_text, const std::string& lat_text) const {
        const auto lon = read_angle(lon_text, frame_ != "GALACTIC");
        const auto lat = read_angle(lat_text, false);
        if (!lon || !lat || std::abs(*lat) > constants::pi / 2) {
            fail(fmt::format("found position \"{}\", \"{}\", expected degrees, or hh:mm:ss and dd:mm:ss",
                             lon_text, lat_text));
        }
        return {*lon, *lat};
    }

    double length(std::string text) const {
        double unit = constants::degree;
        if (!text.empty() && (text.back() == '"' || text.back() == '\'' || text.back() == 'd')) {
            unit = text.back() == '"'    ? constants::arcsecond
                   : text.back() == '\'' ? constants::arcminute
                                         : constants::degree;
            text.pop_back();
        }
        const auto value =
            text.find_first_of(":hdms") == std::string::npos ? read_angle(text, false) : std::nullopt;
        if (!value || !(*value > 0)) {
            fail(fmt::format("found length \"{}\", expected degrees > 0, or a number with \" or '", text));
        }
        return *value / constants::degree * unit;
    }

    double angle(const std::string& text) const {
        const auto value = read_angle(text, false);
        if (!value) {
            fail(fmt::format("found angle \"{}\", expected degrees", text));
        }
        return *value;
    }

    std::string_view text_;
    std::string name_;
    std::size_t line_ = 0;
    std::string frame_ = "ICRS";
};

/// Even-odd rule.
bool in_polygon(const std::vector<Point>& corner, const Point& p) {
    bool inside = false;
    for (std::size_t k = 0, before = corner.size() - 1; k < corner.size(); before = k++) {
        const Point& a = corner[k];
        const Point& b = corner[before];
        if ((a[1] > p[1]) != (b[1] > p[1]) && p[0] < a[0] + (b[0] - a[0]) * (p[1] - a[1]) / (b[1] - a[1])) {
            inside = !inside;
        }
    }
    return inside;
}

bool inside(const Shape& shape, const SkyPosition& sky) {
    if (shape.kind == Shape::Kind::circle) {
        return angular_distance(shape.centre, sky) <= shape.width;
    }
    const auto offset = gnomonic_offset(shape.centre, sky);
    if (!offset) {
        return false;
    }
    if (shape.kind == Shape::Kind::polygon) {
        return in_polygon(shape.corner, *offset);
    }
    const double west = -(*offset)[0];
    const double north = (*offset)[1];
    const double u = (west * std::cos(shape.angle) + north * std::sin(shape.angle)) / shape.width;
    const double v = (north * std::cos(shape.angle) - west * std::sin(shape.angle)) / shape.height;
    return shape.kind == Shape::Kind::box ? std::abs(u) <= 1 && std::abs(v) <= 1 : u * u + v * v <= 1;
}

std::vector<unsigned char> mask_image(const std::string& path, const PixelGrid& pixels) {
    files::FitsReader file(path);
    const files::HduInfo& hdu = first_image(file);
    const MapAxes axes = read_axes(file, hdu);
    const PixelGrid own = read_pixels(file, hdu, axes);
    const std::vector<float> value = read_plane(file, hdu, axes, 0);
    std::vector<unsigned char> mask(pixels.nx * pixels.ny, 0);
    bool overlap = false;
    for (std::size_t j = 0; j < pixels.ny; ++j) {
        for (std::size_t i = 0; i < pixels.nx; ++i) {
            const SkyPosition sky =
                change_frame(sky_position(pixels, static_cast<double>(i), static_cast<double>(j)),
                             pixels.frame, own.frame);
            const auto place = pixel_position(own, sky);
            if (!place) {
                continue;
            }
            const double x = std::floor((*place)[0] + 0.5);
            const double y = std::floor((*place)[1] + 0.5);
            if (x >= 0 && y >= 0 && x < static_cast<double>(own.nx) && y < static_cast<double>(own.ny)) {
                overlap = true;
                const float found = value[static_cast<std::size_t>(x) + own.nx * static_cast<std::size_t>(y)];
                mask[i + pixels.nx * j] = !std::isnan(found) && found != 0 ? 1 : 0;
            }
        }
    }
    if (!overlap) {
        throw Error(ErrorKind::input,
                    fmt::format("{}: does not overlap with the map, expected a mask of the same part of "
                                "the sky",
                                path));
    }
    return mask;
}

} // namespace

std::vector<unsigned char>
region_mask(std::string_view text, const std::string& name, const PixelGrid& pixels) {
    const std::vector<Shape> shapes = RegionReader(text, name).read();
    std::vector<unsigned char> mask(pixels.nx * pixels.ny, 0);
    for (std::size_t j = 0; j < pixels.ny; ++j) {
        for (std::size_t i = 0; i < pixels.nx; ++i) {
            const SkyPosition sky = sky_position(pixels, static_cast<double>(i), static_cast<double>(j));
            for (const Shape& shape : shapes) {
                if (inside(shape, change_frame(sky, pixels.frame, shape.frame))) {
                    mask[i + pixels.nx * j] = shape.takes_out ? 0 : 1;
                }
            }
        }
    }
    return mask;
}

std::vector<unsigned char> read_mask(const std::string& path, const PixelGrid& pixels) {
    std::ifstream stream(path, std::ios::binary);
    std::ostringstream text;
    text << stream.rdbuf();
    if (!stream) {
        throw Error(ErrorKind::input,
                    fmt::format("{}: cannot be read, expected a FITS mask or a text of regions", path));
    }
    const std::string content = text.str();
    return content.starts_with("SIMPLE") ? mask_image(path, pixels) : region_mask(content, path, pixels);
}

} // namespace aureole::maps
