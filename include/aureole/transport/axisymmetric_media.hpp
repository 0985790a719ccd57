#pragma once

#include "aureole/base/run_context.hpp"
#include "aureole/grid/grid.hpp"
#include "aureole/media/media.hpp"
#include "aureole/transport/place.hpp"

#include <array>
#include <cstddef>
#include <cstdint>
#include <span>
#include <string>
#include <vector>

namespace aureole::transport {

/// media::Radiation averaged over rings; energy_density and photon_density as there.
struct RingRadiation {
    std::string name;
    double temperature = 0;             ///< K; 0: tabulated
    double uniform_density = 0;         ///< erg cm-3
    std::vector<double> energy_density; ///< [cells] erg cm-3
    std::vector<double> photon_energy;  ///< [n] erg
    std::vector<double> photon_density; ///< [cells][n] cm-3 erg-1
};

/// How far a medium was from axisymmetric: relative rms deviation from the mean of its ring, rms over the
/// grid. 0 for media on an RZ grid. On XYZ cells the fall across a ring counts too, so that even an
/// axisymmetric medium has some, less on finer grids.
struct Unevenness {
    double by_volume = 0; ///< rings weighted with their volume
    double by_amount = 0; ///< with volume times mean
};

/// What the solver knows of a galaxy: averages over the cells of an RZ grid. Empty vectors where a medium is
/// absent.
struct AxisymmetricMedia {
    grid::Grid grid;
    std::vector<double> field;                    ///< G, rms of ordered and random together
    std::vector<double> ordered_field;            ///< G, rms of the ordered part
    std::vector<std::array<double, 3>> alignment; ///< means of b_R^2, b_R b_z, b_z^2, weighted with B^2
    std::vector<double> hi, h2, hii;              ///< H nuclei per cm3
    std::vector<double> electrons;                ///< cm-3
    std::vector<double> temperature;              ///< K
    std::vector<double> turbulent_speed;          ///< cm s-1
    std::vector<double> turbulent_scale;          ///< cm
    std::vector<double> velocity_r, velocity_z;   ///< cm s-1, so that the flux through a ring is kept
    std::vector<RingRadiation> radiation;
    Unevenness of_gas, of_field_energy, of_radiation;
};

/// An RZ grid itself. For an XYZ grid rings around it: planes as there, ring edges at the |x| or |y| edges of
/// the longest half axis and further with its last width out to the corners of the box; coarsened while it
/// has more than `most_cells` cells. Throws Error(input) for a box that does not surround the axis.
grid::Grid axisymmetric_grid(const grid::Grid& grid, std::size_t most_cells = 20000);

/// Averages over azimuth. XYZ cells are cut along 12 x 12 lines each to share them among rings; a ring that
/// lies partly outside the box has the average of what is inside.
AxisymmetricMedia axisymmetric_media(const media::Media& media, const grid::Grid& grid);

/// H nuclei in all phases [cells] cm-3; zeros without gas.
std::vector<double> hydrogen(const AxisymmetricMedia& media);

/// Four cells of an RZ grid around a point and their weights, which sum to 1: bilinear between cell centres,
/// constant outside them; |height| on a mirrored grid.
struct Surroundings {
    std::array<std::uint32_t, 4> cell{};
    std::array<double, 4> weight{};
};
Surroundings surroundings(const grid::Grid& grid, double radius, double height);

/// Value [of values[cell * stride + offset]] there: the weighted mean of the logarithms where all four are
/// > 0, else of the values.
double interpolated(std::span<const double> values,
                    const Surroundings& around,
                    std::size_t stride = 1,
                    std::size_t offset = 0);

/// What scattering laws ask, interpolated between cells. The Alfven speed has the ions alone, `helium` He+
/// per H+, and is at most c.
Place place_at(const AxisymmetricMedia& media, double radius, double height, double helium);

} // namespace aureole::transport
