#include "aureole/maps/regrid.hpp"

#include "aureole/base/constants.hpp"
#include "aureole/base/error.hpp"
#include "aureole/maps/sky.hpp"
#include "aureole/maps/units.hpp"

#include <fmt/format.h>

#include <algorithm>
#include <array>
#include <cmath>
#include <limits>

namespace aureole::maps {

namespace {

constexpr double nothing = std::numeric_limits<double>::quiet_NaN();

[[noreturn]] void refuse(const Image& image, const std::string& text) {
    throw Error(ErrorKind::input, fmt::format("{}: {}", image.name.empty() ? "map" : image.name, text));
}

bool is_radio(const std::string& unit) {
    return unit == "Jy/beam" || unit == "Jy/pixel" || unit == "MJy/sr" || unit == "K";
}

bool is_gamma(const std::string& unit) {
    return unit == "cm-2 s-1 sr-1 MeV-1" || unit == "cm-2 s-1 sr-1 GeV-1";
}

void check_convertible(const Image& image, const std::string& unit) {
    if (!(is_radio(image.unit) && is_radio(unit)) && !(is_gamma(image.unit) && is_gamma(unit))) {
        refuse(image,
               fmt::format("found unit '{}', expected '{}' or one it can be had from", image.unit, unit));
    }
    if ((image.unit == "Jy/beam" || unit == "Jy/beam") && !image.beam) {
        refuse(image, fmt::format("found no beam, which is needed to go from {} to {}", image.unit, unit));
    }
    if ((image.unit == "K" || unit == "K") && !(image.frequency > 0)) {
        refuse(image,
               fmt::format("found no frequency, which is needed to go from {} to {}", image.unit, unit));
    }
}

double factor_of(const Image& image, const std::string& unit) {
    return is_gamma(unit) ? gamma_factor(unit)
                          : radio_factor(unit, image.frequency, image.beam, image.pixels.pixel_area());
}

/// Same frame as far as pixels go: FK5 and ICRS differ by 0.03 arcsec at most.
bool same_frame(const std::string& a, const std::string& b) {
    return (a == "GALACTIC") == (b == "GALACTIC");
}

/// Whether two grids agree to 1e-4 pixel at corners and middle.
bool same_pixels(const PixelGrid& a, const PixelGrid& b) {
    if (a.nx != b.nx || a.ny != b.ny || !same_frame(a.frame, b.frame)) {
        return false;
    }
    const auto right = static_cast<double>(a.nx) - 1;
    const auto top = static_cast<double>(a.ny) - 1;
    for (const auto& [i, j] :
         {std::array{0.0, 0.0}, {right, 0.0}, {0.0, top}, {right, top}, {right / 2, top / 2}}) {
        const auto there = pixel_position(b, sky_position(a, i, j));
        if (!there || !(std::hypot((*there)[0] - i, (*there)[1] - j) < 1e-4)) {
            return false;
        }
    }
    return true;
}

/// Weights of the Lagrange polynomial through `points` pixels in a row, the first at `first`, at `place`.
template <std::size_t points> std::array<double, points> lagrange(double place, std::ptrdiff_t first) {
    std::array<double, points> weight{};
    for (std::size_t k = 0; k < points; ++k) {
        weight[k] = 1;
        for (std::size_t m = 0; m < points; ++m) {
            if (m != k) {
                weight[k] *= (place - static_cast<double>(first) - static_cast<double>(m)) /
                             (static_cast<double>(k) - static_cast<double>(m));
            }
        }
    }
    return weight;
}

/// Rounding of positions on a pixel's centre must not make its neighbours count.
constexpr double negligible = 1e-9;

/// NaN where a pixel with a weight is blank or off the map.
template <std::size_t points> double interpolate(const Image& image, double i, double j) {
    constexpr auto before = static_cast<std::ptrdiff_t>(points / 2) - 1;
    const auto first_i = static_cast<std::ptrdiff_t>(std::floor(i)) - before;
    const auto first_j = static_cast<std::ptrdiff_t>(std::floor(j)) - before;
    const auto across = lagrange<points>(i, first_i);
    const auto along = lagrange<points>(j, first_j);
    const auto nx = static_cast<std::ptrdiff_t>(image.pixels.nx);
    const auto ny = static_cast<std::ptrdiff_t>(image.pixels.ny);
    double sum = 0;
    for (std::size_t n = 0; n < points; ++n) {
        const std::ptrdiff_t row = first_j + static_cast<std::ptrdiff_t>(n);
        for (std::size_t m = 0; m < points; ++m) {
            const double weight = along[n] * across[m];
            if (std::abs(weight) < negligible) {
                continue;
            }
            const std::ptrdiff_t column = first_i + static_cast<std::ptrdiff_t>(m);
            if (column < 0 || column >= nx || row < 0 || row >= ny) {
                return nothing;
            }
            sum += weight * static_cast<double>(image.value[static_cast<std::size_t>(column + nx * row)]);
        }
    }
    return sum;
}

double value_at(const Image& image, double i, double j) {
    double value = interpolate<6>(image, i, j);
    if (std::isnan(value)) {
        value = interpolate<4>(image, i, j);
    }
    return std::isnan(value) ? interpolate<2>(image, i, j) : value;
}

std::string describe(const Beam& beam) {
    return fmt::format("{:.4g} x {:.4g} arcsec at {:.4g} deg", beam.major / constants::arcsecond,
                       beam.minor / constants::arcsecond, beam.position_angle / constants::degree);
}

bool same_beam(const Beam& a, const Beam& b) {
    const double turned = std::remainder(a.position_angle - b.position_angle, constants::pi);
    return std::abs(a.major - b.major) <= 1e-6 * a.major && std::abs(a.minor - b.minor) <= 1e-6 * a.major &&
           (std::abs(a.major - a.minor) <= 1e-6 * a.major || std::abs(turned) <= 1e-6);
}

/// The beam all images are brought to; nothing if none has one and none is asked for.
std::optional<Beam> target_beam(const std::vector<Image>& images, const std::optional<Beam>& asked) {
    std::vector<Beam> beams;
    const Image* without = nullptr;
    for (const Image& image : images) {
        if (image.beam) {
            beams.push_back(*image.beam);
        } else {
            without = &image;
        }
    }
    if (without != nullptr && !beams.empty()) {
        refuse(*without, "found no beam while other maps have one, expected BMAJ, BMIN and BPA");
    }
    return beams.empty() || asked ? asked : smallest_common_beam(beams);
}

} // namespace

Image convert_unit(const Image& image, const std::string& unit) {
    if (image.unit == unit) {
        return image;
    }
    check_convertible(image, unit);
    const double factor = factor_of(image, unit) / factor_of(image, image.unit);
    Image result = image;
    result.unit = unit;
    for (float& value : result.value) {
        value = static_cast<float>(value * factor);
    }
    return result;
}

Image reproject(const Image& image, const PixelGrid& target) {
    if (!same_frame(image.pixels.frame, target.frame)) {
        refuse(image, fmt::format("found the frame {}, expected {} as of the first map", image.pixels.frame,
                                  target.frame));
    }
    Image result = image;
    result.pixels = target;
    result.value.assign(target.nx * target.ny, std::numeric_limits<float>::quiet_NaN());
    const double scale = image.unit == "Jy/pixel" ? target.pixel_area() / image.pixels.pixel_area() : 1;
    bool overlap = false;
    for (std::size_t j = 0; j < target.ny; ++j) {
        for (std::size_t i = 0; i < target.nx; ++i) {
            const SkyPosition sky = sky_position(target, static_cast<double>(i), static_cast<double>(j));
            const auto place = pixel_position(image.pixels, sky);
            const auto [x, y] = place.value_or(std::array{-9.0, -9.0});
            const bool inside = x > -1 && x < static_cast<double>(image.pixels.nx) && y > -1 &&
                                y < static_cast<double>(image.pixels.ny);
            const double value = inside ? scale * value_at(image, x, y) : nothing;
            overlap = overlap || !std::isnan(value);
            result.value[i + target.nx * j] = static_cast<float>(value);
        }
    }
    if (!overlap) {
        refuse(image, "does not overlap with the first map, expected maps of one part of the sky");
    }
    return result;
}

CommonMaps bring_to_common(std::vector<Image> images, const std::optional<Beam>& asked) {
    if (images.empty()) {
        throw Error(ErrorKind::input, "found no map, expected one or more");
    }
    const PixelGrid pixels = images.front().pixels;
    const std::string unit = images.front().unit;
    const std::string first_name = images.front().name;
    const std::optional<Beam> beam = target_beam(images, asked);
    CommonMaps common;
    for (Image& image : images) {
        if (beam && (!image.beam || !same_beam(*image.beam, *beam))) {
            common.notes.push_back(fmt::format("{} was smoothed from {} to a beam of {}.", image.name,
                                               image.beam ? describe(*image.beam) : std::string("no beam"),
                                               describe(*beam)));
            image = convolve(image, *beam);
        }
        image.beam = beam;
        if (image.unit != unit) {
            common.notes.push_back(
                fmt::format("{} was converted from {} to {}.", image.name, image.unit, unit));
            image = convert_unit(image, unit);
        }
        if (same_pixels(pixels, image.pixels)) {
            image.pixels = pixels;
        } else {
            image = reproject(image, pixels);
            common.notes.push_back(fmt::format("{} was put on the pixels of {}.", image.name, first_name));
        }
        common.images.push_back(std::move(image));
    }
    return common;
}

} // namespace aureole::maps
