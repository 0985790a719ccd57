#pragma once

#include "aureole/maps/image.hpp"
#include "aureole/maps/sky.hpp"

#include <optional>
#include <string>
#include <vector>

namespace aureole::maps {

/// The planes of a telescope's map (or one of ours): the primary image, or the first image of the file.
/// Axes      right ascension and declination, or Galactic longitude and latitude, in any place; of a STOKES
/// axis
///           the plane I (or the only one); a spectral axis gives one Image per channel; other axes have
///           length 1.
/// Pixels    CDELT with CROTA2, PC or CD matrix. TAN and SIN exactly; ARC, STG, ZEA and NCP where they stay
///           within 0.05 pixel of them over the whole map, else refused. Frames ICRS, FK5 (J2000), GALACTIC.
/// Values    in "Jy/beam", "Jy/pixel", "MJy/sr", "K", "cm-2 s-1 sr-1 MeV-1" or "cm-2 s-1 sr-1", converted
/// from
///           the usual spellings and prefixes of BUNIT. What is not finite is a blank (NaN).
/// Beam      BMAJ, BMIN, BPA (deg), else the last "CLEAN BMAJ=" of the HISTORY (common practice), else none.
/// Frequency FREQ or WAVE axis, else RESTFRQ, RESTFREQ or FREQ (Hz), else 0; 0 for gamma rays.
/// Throws    Error(input) naming file, keyword, what was found and what was expected; also for a sheared
/// pixel
///           matrix (rows not at right angles to 1e-6) and a plane without any value.
std::vector<Image> read_maps(const std::string& path);

/// What a header says about the galaxy; nothing where it does not.
struct MapFacts {
    std::optional<SkyPosition> pointing;  ///< OBSRA, OBSDEC: right ascension and declination
    std::optional<double> inclination;    ///< rad; INCLDEG
    std::optional<double> position_angle; ///< rad; PADEG
    std::optional<double> distance;       ///< cm; DISTKPC
};
MapFacts read_facts(const std::string& path);

} // namespace aureole::maps
