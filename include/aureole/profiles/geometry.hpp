#pragma once

#include "aureole/maps/image.hpp"

#include <array>
#include <cstddef>
#include <optional>
#include <vector>

namespace aureole::profiles {

/// Place on the plane of the sky, rad from the reference point of the map.
struct SkyOffset {
    double east = 0, north = 0;
};

/// Offset of a sky position (rad) from the reference point of a TAN or SIN map. Throws Error(input) for other
/// projections and for a position on the far hemisphere. Source: Calabretta & Greisen 2002, A&A 395, 1077,
/// eqs. 54, 59.
SkyOffset offset_of(const maps::PixelGrid& pixels, double lon, double lat);

/// What the value of a pixel stands for: the sky (seen with the beam) at the pixel centre, or its mean over
/// the pixel.
enum class PixelMeaning { samples, averages };

/// Where the errors of the box means come from.
enum class NoiseFrom {
    beam, ///< rms times the correlation that natural weighting gives, which is the shape of the beam
    autocorrelation, ///< rms and correlation both measured in source-free pixels
    scatter,         ///< scatter of the pixels inside a box over the square root of its number of beams
};

enum class BackgroundFrom { given, measured, fitted };

/// Strips along the projected major axis, bins in height. X runs along the position angle, Y (the height)
/// along position angle + 90 deg. Lengths are cm in the plane of the sky at `distance`.
struct ProfileSpec {
    SkyOffset centre;                        ///< of the galaxy
    double position_angle = 0;               ///< of the major axis, rad, North through East
    double inclination = 1.5707963267948966; ///< rad; pi/2 is edge-on
    double distance = 0;                     ///< cm, > 0
    double distance_error = 0;   ///< cm; a common fraction of all heights, never part of an exponent
    std::size_t strips = 1;      ///< side by side, centred on X = 0
    double strip_width = 0;      ///< cm
    double bin_height = 0;       ///< cm; half the beam or more is wise
    double half_range = 0;       ///< cm; bins fill [-half_range, half_range], one edge at 0
    double least_coverage = 0.5; ///< boxes with less of their area on good pixels are left out
    PixelMeaning pixel_meaning = PixelMeaning::samples;
    NoiseFrom noise = NoiseFrom::beam;
    std::optional<double>
        rms; ///< of a pixel, map unit; 0 says noiseless; empty: measured in source-free pixels
    double source_free_height =
        0; ///< cm; |Y| beyond it is free of sources; 0: the outer tenth of the map on each side
    BackgroundFrom background = BackgroundFrom::given;
    double background_level = 0;     ///< map unit; taken away first where `background` is given
    double calibration_error = 0;    ///< fraction; widens the errors of amplitudes only
    std::vector<unsigned char> mask; ///< [pixels] non-zero: leave out; empty: none
};

/// Throws Error(scenario) naming every value of the spec that cannot be used.
void check(const ProfileSpec& spec);

/// X and Y (cm) of a pixel position, counted from 0, fractions allowed: {X, Y}.
std::array<double, 2>
strip_position(const maps::PixelGrid& pixels, const ProfileSpec& spec, double i, double j);

/// The pixels of one box and the area of each inside it (cm2).
struct Box {
    double x_low = 0, x_high = 0, y_low = 0, y_high = 0; ///< cm
    std::vector<std::size_t> pixel;                      ///< ascending
    std::vector<double> area;
};

/// One strip: boxes by ascending height.
struct Strip {
    double x_low = 0, x_high = 0;
    std::vector<Box> box;
};

/// Exact overlap areas of the (turned, sheared) pixels with the boxes of every strip; what lies off the map
/// or under the mask has no pixels. `whole_only` lays a single strip as wide as all of them. Throws
/// Error(scenario), see check, and Error(input) for a mask of another size.
std::vector<Strip>
lay_strips(const maps::PixelGrid& pixels, const ProfileSpec& spec, bool whole_only = false);

/// Covariance of a Gaussian beam in the frame of the strips, cm2.
struct BeamCovariance {
    double xx = 0, xy = 0, yy = 0;
};
BeamCovariance beam_in_strips(const maps::Beam& beam, const ProfileSpec& spec);

} // namespace aureole::profiles
