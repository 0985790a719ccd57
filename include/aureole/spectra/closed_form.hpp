#pragma once

#include "aureole/base/run_context.hpp"
#include "aureole/grid/grid.hpp"
#include "aureole/scenario/scenario.hpp"
#include "aureole/spectra/source.hpp"

#include <functional>
#include <memory>
#include <string>
#include <vector>

namespace aureole::spectra {

/// Shape of a spectrum in the scenario: N(T) relative to N(reference_energy) = 1, for power laws, or a
/// published local interstellar spectrum in cm-3 erg-1.
///   power_law         (T/T0)^-slope exp(-T/cutoff)
///   broken_power_law  (T/T0)^-slope [1 + (T/T_break)^(1/w)]^(-(slope_above - slope) w) exp(-T/cutoff),
///   normalised at T0; w: break_smoothness local             potgieter_2015, vos_potgieter_2015, dermer_1986:
///   see physics/published_spectra.hpp
std::function<double(double kinetic_energy)> spectral_shape(const scenario::Scenario& scenario,
                                                            Species species);

/// Even in ln T from energy_from to energy_to.
std::shared_ptr<const Basis> scenario_basis(const scenario::Scenario& scenario, Species species);

/// Spectra from closed forms: norm x shape x a spatial profile, averaged over the cell; the height of the
/// profile may depend on energy as (T/reference_energy)^height_slope.
Source closed_form(const scenario::Scenario& scenario,
                   const grid::Grid& grid,
                   Species species,
                   const RunContext& context);

/// Spectra of one shape scaled so that their energy density, between the nodes, is that given per cell (erg
/// cm-3).
Source from_energy_density(std::vector<float> energy_density,
                           std::function<double(double)> shape,
                           std::shared_ptr<const Basis> basis,
                           Species species);

/// "electrons" or "protons": the part of the scenario.
std::string key_of(Species species);

} // namespace aureole::spectra
