#pragma once

#include "aureole/base/run_context.hpp"
#include "aureole/emission/emissivity.hpp"
#include "aureole/maps/image.hpp"
#include "aureole/sight/view.hpp"

#include <cstddef>
#include <vector>

namespace aureole::maps {

struct RenderOptions {
    double tolerance = 1e-3; ///< on the total flux, and on each pixel relative to itself where it is over
                             ///< `floor` of the peak
    double floor =
        1e-4; ///< pixels below this fraction of the peak need not be refined; of signed planes at least 0.01
    int max_level = 5; ///< a pixel is split at most into 4^max_level parts
};

/// Intensities on the pixel grid, all planes with one sampling plan.
struct Rendered {
    PixelGrid pixels;
    std::size_t planes = 0;
    std::vector<float>
        value; ///< [plane][pixel]: integral of the stored emissivity along the line, (stored unit) cm
    std::vector<double> flux; ///< [plane] sum over pixels of value x solid angle, (stored unit) cm sr
    std::vector<double> flux_expected; ///< [plane] integral of emissivity over the cells / distance^2
                                       ///< (perspective: / |r - observer|^2)
    std::vector<double> flux_outside;  ///< [plane] the part of flux_expected whose lines of sight miss the
                                      ///< map; cells cut by the border count by 512 points (8 along each edge
                                      ///< of a box; rings: 2 along R and z, 128 around)
    std::vector<double> sampling_error; ///< [plane] estimated error from finite sampling of the pixels over
                                        ///< half the peak, relative to the peak
    std::size_t rays = 0;
    int levels = 0; ///< deepest level used
};

/// Integrates the emissivity along the line of sight through every pixel, averaged over the pixel: exact
/// chords through the cells, sampling refined per pixel on its own estimate (the worst plane decides) until
/// the tolerance holds, checked by the total flux. Method     Pixels of the tangent plane: offsets (xi, eta)
/// from the reference point, which is the galaxy's centre. Rays at pixel centres, more where
///            bright cells are narrower than a pixel; pixels whose error of the midpoint rule, (second
///            differences)/24, exceeds the tolerance, and their neighbours, are split into quarters again and
///            again while the mean of the quarters differs. If flux + flux_outside then misses flux_expected,
///            everything is sampled one level deeper, at most twice. A miss that stays is to be read from the
///            result: |flux + flux_outside - flux_expected| is the achieved value.
/// emissivity value.size() is planes.size() * cells.size()
/// Memory     the result, one byte per pixel and small buffers per thread. The result does not depend on the
/// number of threads. Throws     Error(scenario) if the distance is not positive, the pixels have no area, or
/// a perspective observer is not farther away than the
///            half-diagonal of the grid; Error(interrupted).
Rendered render(const emission::Emissivity& emissivity,
                const sight::View& view,
                const PixelGrid& pixels,
                const RenderOptions& options,
                const RunContext& context);

} // namespace aureole::maps
