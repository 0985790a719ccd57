#pragma once

#include "aureole/maps/image.hpp"

#include <string>
#include <string_view>
#include <vector>

namespace aureole::maps {

/// Pixels to be left out, [nx x ny], non-zero where the pixel centre lies in a region. From a FITS image
/// (non-zero and not blank: leave out; another pixel grid is sampled at the nearest pixel) or a text of
/// regions, see region_mask. Throws Error(input) naming the file.
std::vector<unsigned char> read_mask(const std::string& path, const PixelGrid& pixels);

/// Regions as text, in the plain form most sky viewers write (common practice):
///   icrs | fk5 | galactic           the frame of what follows; icrs at the start
///   circle(lon,lat,radius)
///   ellipse(lon,lat,semi-axis,semi-axis,angle)
///   box(lon,lat,width,height,angle)
///   polygon(lon,lat,lon,lat,...)    three corners or more
/// one or more per line (';' between), '#' starts a comment, lines of "global" settings are passed over. A
/// '-' in front takes the shape out of what came before. Positions in degrees, or sexagesimal (hours for
/// right ascensions with ':' or 'h'); lengths in degrees or with " ' d. `angle` in degrees from West over
/// North: the first axis runs along right ascension at 0. name     for messages. Throws Error(input) with the
/// line number of what is not understood.
std::vector<unsigned char>
region_mask(std::string_view text, const std::string& name, const PixelGrid& pixels);

} // namespace aureole::maps
