#pragma once

#include "aureole/base/run_context.hpp"
#include "aureole/grid/grid.hpp"
#include "aureole/grid/grid_file.hpp"
#include "aureole/scenario/scenario.hpp"

#include <array>
#include <optional>
#include <string>
#include <vector>

namespace aureole::media {

/// How the ordered field continues below the plane of a mirrored grid. Even: in-plane components keep their
/// sign, the vertical one turns; odd: the reverse.
enum class Parity { even, odd };

/// Magnetic field, averages over the stored cells. Empty vectors where a part is absent.
struct Field {
    std::vector<std::array<float, 3>> ordered; ///< G; components x, y, z, or R, phi, z on an RZ grid
    std::vector<float> random_rms; ///< G; rms of the three-dimensional, isotropic, Gaussian random part
    Parity parity = Parity::even;
};

/// Gas, averages over the stored cells. hi, h2, hii: hydrogen nuclei per cm3 (h2: twice the molecules).
struct Gas {
    std::vector<float> hi, h2, hii;
    std::vector<float> electrons;   ///< thermal electrons, cm-3
    std::vector<float> temperature; ///< of the ionised gas, K
};

/// A radiation field: a blackbody of any dilution, or (temperature == 0) a spectrum tabulated per cell.
struct Radiation {
    std::string name;
    double temperature = 0;     ///< K
    double uniform_density = 0; ///< erg cm-3, where it is the same everywhere (energy_density then is empty)
    std::vector<float> energy_density; ///< [cells] erg cm-3
    std::vector<double> photon_energy; ///< [n] erg
    std::vector<float>
        photon_density; ///< [cells][n] photons cm-3 erg-1, straight lines in energy between nodes
};

struct Media {
    Field field;
    Gas gas;
    std::vector<Radiation> radiation;
    std::vector<float> turbulent_speed;         ///< cm s-1
    std::vector<float> turbulent_scale;         ///< cm
    std::vector<std::array<float, 3>> velocity; ///< cm s-1, components as the field
};

/// Media from the grid file, from profiles, or from formulas, as the scenario says for each. A profile of
/// kind `file` without the HDU is an Error(scenario); HDUs the scenario does not ask for are used where the
/// key is left at its default.
Media load_media(const scenario::Scenario& scenario,
                 const grid::Grid& grid,
                 const grid::GridFile* file,
                 const RunContext& context);

/// Averages over the cells of grid::coarsened(fine), weighted with volume.
Media coarsened(const Media& media, const grid::Grid& fine, const RunContext& context = {});

} // namespace aureole::media
