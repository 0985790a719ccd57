#pragma once

#include "aureole/files/fits_writer.hpp"
#include "aureole/grid/grid.hpp"

#include <array>
#include <filesystem>
#include <map>
#include <string>
#include <vector>

namespace aureole::grid {

/// A data HDU to be written.
struct GridFileData {
    std::string name;          ///< of the format: "CR_ELECTRON", "GAS_HI"
    std::string unit;          ///< BUNIT, of the dimension that the format asks for
    std::vector<float> values; ///< [cells][energies or components] in `unit`
    std::vector<files::Card> more;
};

/// What a HALO-GRID file is to hold (docs/grid_file.md).
struct GridFileOutput {
    Grid grid;
    std::string object;
    std::string field_parity;                        ///< EVEN, ODD, or empty
    double cmb_temperature = 2.7255;                 ///< K
    std::map<std::string, std::vector<double>> axes; ///< kinetic energies (photons: energies) in erg
    std::vector<GridFileData> data;
    files::Header primary; ///< further cards and HISTORY of the primary header
};

/// CGS values in a unit that is `factor` CGS units, as values to write.
std::vector<float> in_unit(const std::vector<float>& cgs, double factor);
std::vector<float> in_unit(const std::vector<std::array<float, 3>>& cgs, double factor);

/// Writes a HALO-GRID 1.0 file that open_grid_file() reads back: grid edges in kpc and energies in GeV
/// (EPS_PHOTON: eV) as 64-bit, data as 32-bit floats, BUNIT, AXES, COMPS, DATASUM and CHECKSUM everywhere.
/// The file gets its name when it is complete; before that nothing stands under it.
/// Accuracy   data as given; edges and energies read back to 3e-16.
/// Throws     Error(output) for a file that exists unless `replace`, or cannot be written; one Error(output)
///            with a line for every problem that a reader would refuse: names that the format does not have
///            or that come twice, values that are not finite or (other than components) negative, as many
///            values as the cells and the axis do not have, units of another dimension, axes missing, not
///            rising or unused, a grid that validate() refuses, a field on a mirrored grid without parity.
///            Ready-made emissivities are not written.
void write_grid_file(const std::filesystem::path& target, const GridFileOutput& output, bool replace);

} // namespace aureole::grid
