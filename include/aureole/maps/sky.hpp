#pragma once

#include "aureole/maps/image.hpp"

#include <array>
#include <optional>
#include <string>
#include <string_view>

namespace aureole::maps {

/// A place on the sphere, rad: right ascension and declination, or Galactic longitude and latitude.
struct SkyPosition {
    double lon = 0, lat = 0;
};

/// Position of a pixel, counted from 0, fractions allowed. Exact spherical formulae for TAN and SIN. NaN
/// where a SIN map shows no sky. Throws Error(input) for another projection.
/// Source  Calabretta & Greisen 2002, A&A 395, 1077, eqs. 2, 54, 59, 60.
SkyPosition sky_position(const PixelGrid& pixels, double i, double j);

/// Pixel {i, j} of a position, counted from 0. Nothing on the far hemisphere.
std::optional<std::array<double, 2>> pixel_position(const PixelGrid& pixels, const SkyPosition& sky);

/// Offset {east, north} of `sky` from `centre` in the gnomonic plane, rad. Nothing on the far hemisphere.
std::optional<std::array<double, 2>> gnomonic_offset(const SkyPosition& centre, const SkyPosition& sky);

double angular_distance(const SkyPosition& a, const SkyPosition& b); ///< rad

/// ICRS (or FK5, which is the same to 0.03 arcsec) to Galactic and back; unchanged where the frames are
/// alike. Throws Error(input) for another frame. Source: Murray 1989, A&A 218, 325 (FK5), as in the Hipparcos
/// Catalogue, vol. 1, sec. 1.5.3 (ICRS).
SkyPosition change_frame(const SkyPosition& sky, const std::string& from_frame, const std::string& to_frame);

/// "12:34:56.7", "12h34m56.7s", "188.5", "188.5d", "-12:23:28", "+12d23m28s" -> rad. `hours`: whether
/// sexagesimal numbers with colons count hours. Nothing where it is no angle.
std::optional<double> read_angle(std::string_view text, bool hours);

} // namespace aureole::maps
