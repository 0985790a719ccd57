#pragma once

#include "aureole/grid/grid_file.hpp"

#include <cstddef>
#include <optional>
#include <string>
#include <vector>

namespace aureole::app {

/// Divergence of the ordered field that a grid file stores, times the size of a cell over |B|: 0 for a field
/// without sources, about 1 where it changes wholly from one cell to the next.
struct FieldDivergence {
    double mean = 0, worst = 0; ///< mean weighted by volume
    std::size_t worst_cell = 0, cells = 0;
};

/// From the flux through the faces of each cell, where the field is the straight line between the
/// neighbouring cells' averages. Size of a cell: cube root of dx dy dz, root of dR dz for rings; |B|: mean
/// over the cell and its neighbours. On rings the azimuthal component has no flux and counts in |B| alone.
/// Cells at the border are left out, except at the axis and at the plane of a mirrored grid, where BPARITY
/// tells the flux. Reads three planes at a time. Nothing without B_VECTOR, or where no cell has neighbours. A
/// field that is smooth over L has (size/L)^2 at most. Throws Error(input) where the file cannot be read.
std::optional<FieldDivergence> field_divergence(const grid::GridFile& file);

/// The greatest ratio and the cell it is found in.
struct GreatestRatio {
    double value = 0;
    std::size_t cell = 0;
};

struct PressureRatios {
    std::optional<GreatestRatio> over_magnetic, over_gas;
};

/// Pressure of the cosmic rays that are given as spectra (electrons, positrons, protons, helium),
///   P = 1/3 int N(T) T (T + 2 m c^2)/(T + m c^2) dT
/// between the first and the last node (trapezoids in ln T: 1 % at 4 nodes per decade), over B^2/8 pi of both
/// fields and over 2 n k T_E of the ionised gas, n from N_E or GAS_HII. Cells without field or without gas
/// are passed over. A plane of the fields and a million values of the spectra are held at a time. Nothing
/// where spectra, field or gas are missing. Throws Error(input) where the file cannot be read.
PressureRatios pressure_ratios(const grid::GridFile& file);

/// What `aureole inspect` tells of both: lines of results, and warnings where the mean of the divergence is
/// over 0.1 or a ratio of pressures over 30.
struct PhysicsFindings {
    std::vector<std::string> lines, warnings;
};
PhysicsFindings examine_physics(const grid::GridFile& file);

} // namespace aureole::app
