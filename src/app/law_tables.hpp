#pragma once

#include "sky.hpp"

#include "aureole/files/ecsv.hpp"
#include "aureole/transport/solve.hpp"

#include <optional>
#include <string>
#include <vector>

namespace aureole::app {

/// One scattering law of a run: what was solved for, and what it looks like.
struct LawResult {
    std::string name;
    transport::Solution solution;
    std::optional<transport::AnchorReport> coarse; ///< of the solution on cells twice as wide
    Sky sky;
};

/// laws.ecsv, budgets.ecsv, pressure.ecsv, local_spectra.ecsv and, for several laws, law_heights.ecsv
/// (docs/results.md), side by side in tables/.
void write_law_tables(const std::vector<LawResult>& laws,
                      const grid::Grid& grid,
                      const media::Media& media,
                      const std::string& hash,
                      files::RunFolder& folder);

/// The same for the terminal: one line a law, and where the energy went.
std::vector<std::string> law_lines(const std::vector<LawResult>& laws);

/// False where an iteration of the solver was left unfinished.
bool has_converged(const LawResult& law);

/// What a reader must know of a solution.
std::vector<std::string> law_warnings(const LawResult& law);

} // namespace aureole::app
