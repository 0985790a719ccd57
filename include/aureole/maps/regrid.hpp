#pragma once

#include "aureole/maps/image.hpp"

#include <optional>
#include <span>
#include <string>
#include <vector>

namespace aureole::maps {

/// The Gaussian beam of least solid angle from which every one of `beams` can be had by smoothing: least
/// det C with C - C_k positive for all k, by an interior-point method (solid angle within 1e-7 of the least;
/// one that holds all others is returned as it is). At least one beam, all with widths > 0.
Beam smallest_common_beam(std::span<const Beam> beams);

/// The image in another unit of the same kind: Jy/beam, Jy/pixel, MJy/sr and K (Rayleigh-Jeans; needs the
/// frequency) into each other, cm-2 s-1 sr-1 MeV-1 and GeV-1 into each other. Throws Error(input) with the
/// reason where it cannot be done.
Image convert_unit(const Image& image, const std::string& unit);

/// The image on other pixels: its values interpolated at the centres of `target`, by exact spherical
/// formulae. Lagrange interpolation through 6 x 6 pixels, through 4 x 4 or 2 x 2 where blanks or the border
/// are near; blank where none of these is whole. Jy/pixel is scaled with the pixel areas.
/// Accuracy  of a point source seen with a beam (FWHM) of 3, 4, 5, 6 pixels: 1.7e-2, 4e-3, 1.2e-3, 4e-4 of
///           its peak at worst; what is broader than the beam fares better by the sixth power.
/// Throws    Error(input) if the frames differ or the maps do not overlap.
Image reproject(const Image& image, const PixelGrid& target);

struct CommonMaps {
    std::vector<Image> images;      ///< one beam, one unit, one grid of pixels
    std::vector<std::string> notes; ///< what was done to them, full sentences
};

/// Brings maps to one beam (the smallest common one, or `beam`), to the unit and to the pixels of the first.
/// Smoothed where they are, then interpolated. Maps that are alike already stay untouched. Maps of a model
/// without beams may be smoothed with `beam` if none of them has one. Throws Error(input) with the reason:
/// a beam missing, `beam` too narrow, units of two kinds, frames that differ, no overlap.
CommonMaps bring_to_common(std::vector<Image> images, const std::optional<Beam>& beam = std::nullopt);

} // namespace aureole::maps
