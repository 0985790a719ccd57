#pragma once

#include "run.hpp"

#include "aureole/transport/solve.hpp"

#include <span>
#include <string>
#include <vector>

namespace aureole::transport {

/// Weights of M for the pressure and the energy density of protons.
std::vector<double> pressure_weights(const spectra::Basis& protons);
std::vector<double> energy_weights(const spectra::Basis& protons);

/// rms of ln(next/before) of protons [nodes][cells], weighted with their energy per ln p.
double density_change(const Problem& problem, std::span<const double> before, std::span<const double> next);

/// erg s-1 of all populations.
double power_of(const std::vector<SourceSpec>& sources);

MarchReport march_report(const Problem& problem,
                         const std::string& name,
                         const SpeciesProblem& species,
                         const SpeciesRun& run,
                         std::span<const double> density);

/// A budget of the mesh as that of the galaxy.
KindBudget whole_budget(const Problem& problem,
                        const std::string& name,
                        const SpeciesProblem& species,
                        const Budget& of_mesh,
                        double power);

} // namespace aureole::transport
