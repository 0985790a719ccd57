#pragma once

#include "aureole/base/run_context.hpp"
#include "aureole/emission/emissivity.hpp"
#include "aureole/maps/image.hpp"
#include "aureole/sight/view.hpp"

#include <cstddef>
#include <vector>

namespace aureole::maps {

struct RenderOptions {
    double tolerance = 1e-3;     ///< on the total flux, and on each pixel relative to itself where it is over `floor` of the peak
    double floor = 1e-4;         ///< pixels below this fraction of the peak need not be refined
    int max_level = 5;           ///< a pixel is split at most into 4^max_level parts
};

/// Intensities on the pixel grid, all planes with one sampling plan.
struct Rendered {
    PixelGrid pixels;
    std::size_t planes = 0;
    std::vector<float> value;           ///< [plane][pixel]: integral of the stored emissivity along the line, (stored unit) cm
    std::vector<double> flux;           ///< [plane] sum over pixels of value x solid angle, (stored unit) cm sr
    std::vector<double> flux_expected;  ///< [plane] integral of emissivity over the cells / distance^2 (perspective: / |r - observer|^2)
    std::vector<double> flux_outside;   ///< [plane] the part of flux_expected whose lines of sight miss the map
    std::vector<double> sampling_error; ///< [plane] estimated error of the brightest pixels from finite sampling, relative to the peak
    std::size_t rays = 0;
    int levels = 0;                     ///< deepest level used
};

/// Integrates the emissivity along the line of sight through every pixel, averaged over the pixel: exact chords through the cells,
/// sampling refined per pixel on its own estimate (the worst plane decides) until the tolerance holds, checked by the total flux.
/// The result does not depend on the number of threads.
Rendered render(const emission::Emissivity& emissivity, const sight::View& view, const PixelGrid& pixels, const RenderOptions& options,
                const RunContext& context);

} // namespace aureole::maps
