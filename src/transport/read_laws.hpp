#pragma once

#include "aureole/scenario/scenario.hpp"
#include "aureole/transport/spec.hpp"

#include <filesystem>
#include <vector>

namespace aureole::transport {

class ScenarioProblems;

/// What anchors are checked against.
struct LawSurroundings {
    double radius = 0, bottom = 0, top = 0; ///< of the grid, cm
    bool protons = true;                    ///< are solved for
};

/// The laws to solve for, in the order of transport.laws (of "all": alphabetical), with their anchors. Every
/// [law.NAME] is checked, used or not.
std::vector<NamedLaw>
read_laws(const scenario::Scenario& scenario, const LawSurroundings& around, ScenarioProblems& problems);

/// Law `table` from a text file with columns R, z, rigidity and rate, in any order and among others: ECSV, or
/// CSV whose heads are "R [kpc]" and so on. Columns are parted by commas or blanks. Throws Error(input) with
/// file and line.
LawSpec read_law_table(const std::filesystem::path& file);

} // namespace aureole::transport
