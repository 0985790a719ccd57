#pragma once

#include <cstddef>
#include <optional>
#include <string>
#include <vector>

namespace aureole::maps {

/// Gaussian beam: full widths at half maximum in rad, position angle of the major axis in rad, North through
/// East.
struct Beam {
    double major = 0, minor = 0, position_angle = 0;
    friend bool operator==(const Beam&, const Beam&) = default;
};

/// Solid angle pi a b / (4 ln 2) of a Gaussian beam [sr].
double solid_angle(const Beam& beam);

/// Pixels of a gnomonic (TAN) or other celestial map near its reference point. Pixel (i, j), counted from 0,
/// has its centre at the offsets  east = step_x (i - centre_x),  north = step_y (j - centre_y)  from the
/// reference point before `rotation` turns the pixel axes on the sky (PCi_j matrix of Greisen & Calabretta
/// 2002, A&A 395, 1061).
struct PixelGrid {
    std::size_t nx = 0, ny = 0;
    double step_x = 0, step_y = 0;     ///< rad per pixel; step_x is negative (East to the left) on usual maps
    double centre_x = 0, centre_y = 0; ///< pixel of the reference point, counted from 0 (CRPIX - 1)
    double lon = 0, lat = 0;           ///< reference point, rad (CRVAL)
    double rotation = 0;               ///< rad; PC = [[cos, -sin], [sin, cos]]
    std::string projection = "TAN";    ///< TAN, SIN, ...
    std::string frame = "ICRS";        ///< RADESYS, or GALACTIC
    double pixel_area() const {
        return (step_x < 0 ? -step_x : step_x) * (step_y < 0 ? -step_y : step_y);
    } ///< sr
    friend bool operator==(const PixelGrid&, const PixelGrid&) = default;
};

/// One plane of a map. value[i + nx * j]; NaN marks a blank.
struct Image {
    PixelGrid pixels;
    std::vector<float> value;
    std::string unit; ///< FITS unit string, e.g. "Jy/beam"
    std::optional<Beam> beam;
    double frequency = 0; ///< Hz; 0 where unknown or not a radio map
    std::string name;     ///< where it came from, for messages
};

/// The image as seen with `beam`: same pixels and unit (a "Jy/beam" map is rescaled to the new beam's solid
/// angle). Without blanks the sum of the surface brightness is kept. Kernel covariance C(beam) -
/// C(image.beam), applied by FFT on a map padded by 5 sigma, so that nothing wraps around. NaN pixels stay
/// NaN and weigh nothing (the kernel is renormalised around them). Throws Error(input) naming both beams if
/// the target is narrower than the image's beam in any direction.
Image convolve(const Image& image, const Beam& beam);

} // namespace aureole::maps
