#pragma once

#include "aureole/files/fits_writer.hpp"
#include "aureole/maps/image.hpp"

#include <filesystem>
#include <string>
#include <vector>

namespace aureole::maps {

/// What the headers of all maps of a run say.
struct MapOrigin {
    std::string object = "MODEL";
    std::string title;
    double inclination = 0, position_angle = 0, azimuth = 0; ///< rad
    double distance = 0;                                     ///< cm
    bool perspective = false;
    std::string scenario_hash;
    std::vector<std::string> history; ///< command line and the like
};

/// What belongs to one plane.
struct MapNotes {
    std::string process = "total";
    std::string type = "Intensity"; ///< BTYPE
    double width = 0;               ///< Hz; of a radio channel, 0: a single frequency
    double flux = 0;                ///< of the map, in flux_unit
    std::string flux_unit;
    double flux_error = 0;      ///< relative miss of the flux check (FLUXCHK)
    double flux_outside = 0;    ///< share of the flux whose lines of sight miss the map (FLUXOUT)
    double numerical_error = 0; ///< relative to the peak (NUMERR); 0: not estimated
    double error_energy = 0, error_cells = 0, error_sight = 0;
    double missing = 0; ///< share missing because the spectra end (SPECMISS)
    std::vector<files::Card> more;
};

/// Radio map: one file per frequency, axes RA, DEC and a FREQ axis of length 1, so that the usual readers
/// take it as a cube. WCS: Greisen & Calabretta 2002, A&A 395, 1061; Calabretta & Greisen 2002, A&A 395,
/// 1077; Greisen et al. 2006, A&A 446, 747. The alternate WCS "A" gives offsets in kpc.
void write_radio_map(const std::filesystem::path& path,
                     const Image& image,
                     const MapOrigin& origin,
                     const MapNotes& notes,
                     bool replace);

/// Map without a spectral axis of its own meaning (spectral index between two frequencies).
void write_plane(const std::filesystem::path& path,
                 const Image& image,
                 const MapOrigin& origin,
                 const MapNotes& notes,
                 bool replace);

/// Gamma-ray cube: the planes at photon energies with a table ENERGIES, or of neighbouring bands with a table
/// EBOUNDS (open gamma-astro-data-formats, "skymaps"). energies: n for n planes, or n + 1 band edges; erg.
/// notes: one per plane; the totals go into the table NOTES.
void write_gamma_cube(const std::filesystem::path& path,
                      const std::vector<Image>& planes,
                      const std::vector<double>& energies,
                      const MapOrigin& origin,
                      const std::vector<MapNotes>& notes,
                      bool replace);

/// Frequencies of a run whose steps are uneven, as a binary table CHANNELS (FREQ, WIDTH in Hz; FILE).
void write_channel_table(const std::filesystem::path& path,
                         const std::vector<double>& frequency,
                         const std::vector<double>& width,
                         const std::vector<std::string>& file,
                         bool replace);

} // namespace aureole::maps
