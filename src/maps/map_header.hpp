#pragma once

#include "aureole/files/fits_reader.hpp"
#include "aureole/maps/image.hpp"

#include <cstddef>
#include <string>
#include <vector>

namespace aureole::maps {

/// Places in an image HDU: the celestial axes, the axis of channels and the plane of the others.
struct MapAxes {
    std::size_t lon = 0, lat = 1;    ///< axis numbers, counted from 0
    std::vector<std::size_t> stride; ///< of every axis, in values
    std::size_t fixed = 0;           ///< offset of the plane kept of a STOKES axis
    std::size_t channel_axis = 0;    ///< meaningful with more than one channel
    std::size_t channels = 1;
    std::vector<double> frequency; ///< [channels] Hz; 0 where unknown
};

const files::HduInfo& first_image(const files::FitsReader& file);
MapAxes read_axes(files::FitsReader& file, const files::HduInfo& hdu);
PixelGrid read_pixels(files::FitsReader& file, const files::HduInfo& hdu, const MapAxes& axes);
/// One channel, [nx x ny]; what is not finite is NaN.
std::vector<float>
read_plane(files::FitsReader& file, const files::HduInfo& hdu, const MapAxes& axes, std::size_t channel);

/// Error(input) "file: HDU name: KEYWORD: found ..., expected ...".
[[noreturn]] void refuse_card(const files::FitsReader& file,
                              const files::HduInfo& hdu,
                              const std::string& keyword,
                              const std::string& found_and_expected);

} // namespace aureole::maps
