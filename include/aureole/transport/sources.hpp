#pragma once

#include "aureole/grid/grid.hpp"
#include "aureole/transport/spec.hpp"

#include <vector>

namespace aureole::transport {

/// Where sources are, as averages over cells.
struct SourceDensity {
    std::vector<double> density; ///< [cells] cm-3; its integral over the galaxy (both sides) is 1
    double inside = 1;           ///< part of the shape's integral over all space that lies in the grid
};

/// Cell averages of a shape: integrals over z in closed form, over R in closed form or by Gauss-Legendre
/// quadrature to 1e-9; a shell by quadrature to 1e-8 of its total.
/// Kinds      exponential exp(-R/radius); green_2015 and the other fits of physics/star_formation.hpp; ring
/// exp(-(R - radius)^2/(2 width^2)): times exp(-|z|/height). nucleus exp(-r^2/(2 width^2)), shell exp(-(r -
///            radius)^2/(2 width^2)), r^2 = R^2 + z^2
/// Throws     Error(scenario) for an unknown kind, a length that is not positive, or less than 1e-3 of the
///            sources inside the grid; Error(input) for an XYZ grid
SourceDensity source_density(const SourceShape& shape, const grid::Grid& grid);

/// Sources of one population at all momenta.
struct SourceTerm {
    SourceDensity where;
    SourceSpectrum spectrum;
    double rest_energy = 0; ///< erg
    double norm = 0;        ///< s-1 (g cm s-1)-1 where the spectrum's shape is 1
};

/// Scaled so that int T Q dp over the galaxy, all rigidities, is the power with the rise of injected() for
/// that step. Throws Error(scenario) where that integral is infinite, the power is not positive, or the
/// spectrum is not valid.
SourceTerm
source_term(const SourceSpec& spec, const grid::Grid& grid, double rest_energy, double step_ln = 1e-6);

/// Particles injected over the galaxy [s-1 (g cm s-1)-1] at a momentum [g cm s-1]. The shape is
///   x^-slope [1 + (R/break)^(1/w)]^(-(slope_above - slope) w) exp(-R/cutoff)/[1 + (least/R)^(1.73/step_ln)],
///   x = R/1 GV:
/// the rise at the least rigidity is as steep as steps of that size in ln p resolve.
double injected(const SourceTerm& term, double momentum, double step_ln);

} // namespace aureole::transport
