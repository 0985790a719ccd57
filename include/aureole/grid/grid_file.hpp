#pragma once

#include "aureole/base/run_context.hpp"
#include "aureole/base/units.hpp"
#include "aureole/grid/grid.hpp"

#include <array>
#include <cstddef>
#include <map>
#include <string>
#include <vector>

namespace aureole::grid {

/// A data HDU of a grid file, as its header describes it.
struct DataHdu {
    std::string name;
    int number = 0;                 ///< HDU, counted from 1
    std::vector<std::string> axes;  ///< AXES, fastest first: {"E_LEPTON", "R", "Z"}
    std::vector<std::size_t> shape; ///< NAXISn, fastest first
    std::string unit;               ///< BUNIT
    int bitpix = -32;
    bool compressed = false;
};

/// What a HALO-GRID file holds (docs/grid_file.md): the grid, its axes, and where the data are. No data are
/// kept.
struct GridFile {
    std::string path, object, version;
    Grid grid;
    std::string field_parity;            ///< EVEN, ODD, or empty
    double cmb_temperature = 2.7255;     ///< K
    bool radiation_includes_cmb = false; ///< CMBINCL
    std::map<std::string, std::vector<double>>
        axes; ///< energies as kinetic energy in erg (photons: energy in erg; FREQUENCY: Hz)
    std::vector<DataHdu> data;
    std::vector<std::string> warnings;

    bool has(const std::string& hdu) const;
    const DataHdu&
    hdu(const std::string& name) const; ///< throws Error(input) naming the file if there is none
};

/// Reads headers and axes and checks them whole; every problem is listed in one Error(input) that names file,
/// HDU, keyword, what was found and what was expected. Data values are checked when they are read.
GridFile open_grid_file(const std::string& path);

/// Problems of the data themselves, for `aureole inspect`: values that are negative or not finite (HDU, first
/// cell, how many), checksums that do not match, and, as warnings, few nodes per decade, neighbouring cells
/// of very different widths, spectra that are mostly zero. Reads the whole file.
struct GridFileContents {
    struct Range {
        std::string hdu, unit;
        double least = 0, greatest = 0; ///< in `unit`; vectors: of their length
        double total =
            0; ///< integral over the volume of what is stored, CGS; spectra: of T N dT between the nodes
        std::string total_text; ///< what the total counts: "erg", "H nuclei"; empty: no total
    };
    std::vector<Range> ranges;
    std::vector<std::string> problems, warnings;
};
GridFileContents examine(const GridFile& file);

/// Values of a scalar HDU over the stored cells, in CGS. Throws Error(input) naming HDU, cell and value where
/// one is negative or not finite, or where the unit does not fit.
std::vector<float> read_scalar(const GridFile& file,
                               const std::string& hdu,
                               const Dimension& dimension,
                               const RunContext& context = {});

/// The same for HDUs of three components (COMP axis first); any sign.
std::vector<std::array<float, 3>> read_vector(const GridFile& file,
                                              const std::string& hdu,
                                              const Dimension& dimension,
                                              const RunContext& context = {});

/// The same for HDUs with an energy axis first: [cells][energies].
std::vector<float> read_spectra_of_cells(const GridFile& file,
                                         const std::string& hdu,
                                         const Dimension& dimension,
                                         const RunContext& context = {});

/// Name of a cell for messages, counted from 1: "cell (X 3, Y 4, Z 5)".
std::string cell_text(const Grid& grid, std::size_t cell);

} // namespace aureole::grid
