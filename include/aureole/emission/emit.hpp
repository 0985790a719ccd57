#pragma once

#include "aureole/base/run_context.hpp"
#include "aureole/emission/channels.hpp"
#include "aureole/emission/emissivity.hpp"
#include "aureole/media/media.hpp"
#include "aureole/spectra/source.hpp"

#include <array>
#include <cstddef>
#include <memory>
#include <optional>
#include <string>
#include <vector>

namespace aureole::emission {

/// Where the observer is, as a cell needs to know it: unit vectors in the galaxy frame. Stokes Q and U follow
/// the IAU convention.
struct Orientation {
    std::array<double, 3> towards{0, -1, 0}; ///< to the observer
    std::array<double, 3> right{1, 0, 0};    ///< X of the sky plane
    std::array<double, 3> up{0, 0, 1};       ///< Y of the sky plane
    /// Cosine and sine of twice the position angle of `right` on the sky; `up` lies 90 deg further, through
    /// East.
    double cos_double_angle = 1, sin_double_angle = 0;
    std::optional<std::array<double, 3>>
        observer; ///< cm; where set, `towards` is taken from each cell to here, `right` and `up` turn with it
};

/// What is emitted and how it is kept.
struct Processes {
    bool synchrotron = true, inverse_compton = true, bremsstrahlung = true, pion_decay = true;
    std::string pion_model = "kafexhiu_2014_continuous";
    double nuclear_enhancement =
        1.8; ///< pp -> all nuclei of beam and target, Mori 2009, Astropart. Phys. 31, 341
    double helium_fraction = 0.1; ///< by number, of the gas, for bremsstrahlung
    bool separate = false;        ///< a plane for each process beside the totals
    bool polarisation =
        false; ///< planes for Stokes Q and U of the synchrotron emission, without Faraday rotation
    std::size_t sectors = 32; ///< of azimuth on an RZ grid with an ordered field
};

Processes processes(const scenario::Scenario& scenario);

/// What a reader of the result should know about one plane.
struct PlaneReport {
    double luminosity =
        0; ///< integral over the galaxy of 4 pi x emissivity, CGS (per Hz, per erg, or of the band)
    double missing_above = 0; ///< estimated share lost because the spectra end, if they went on as power laws
    double missing_below = 0;
    double energy_error = 0; ///< estimated relative error from the energy nodes
};

struct EmissionReport {
    std::vector<PlaneReport> planes;
    std::size_t cells_with_fallback = 0; ///< spectra that use the straight line somewhere
    double share_below_gamma_10 =
        0; ///< largest share, over the channels, of inverse-Compton emission from electrons of gamma < 10
};

/// Weights of a run that do not depend on the cells.
struct Tables;

struct Emitted {
    Emissivity emissivity;
    EmissionReport report;
    std::shared_ptr<const Tables> tables;
};

/// Fills the emissivity of all channels in one pass through the spectra. The result does not depend on the
/// number of threads. alike: an earlier run with the same channels, processes, radiation fields and energy
/// nodes on other cells; its tables are used again, and of the report only the luminosities are filled.
Emitted emit(const grid::Grid& grid,
             const media::Media& media,
             const std::vector<spectra::Source>& sources,
             const std::vector<Channel>& channels,
             const Processes& processes,
             const Orientation& orientation,
             const RunContext& context,
             const Emitted* alike = nullptr);

} // namespace aureole::emission
