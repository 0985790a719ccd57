#pragma once

#include "aureole/grid/grid.hpp"

#include <array>
#include <cstddef>
#include <cstdint>
#include <vector>

namespace aureole::transport {

/// The gradient at one corner of the mesh as weighted sums over the four cells around it, and the volume it
/// stands for. At an edge of the grid the missing cells are mirror images of those inside.
struct Corner {
    std::array<std::uint32_t, 4>
        cell{};                       ///< lower left, lower right, upper left, upper right (R to the right)
    std::array<double, 4> radial{};   ///< cm-1: dN/dR = sum of radial[i] N[cell[i]]
    std::array<double, 4> vertical{}; ///< cm-1
    double volume = 0;                ///< cm3 of the dual cell
    double radius = 0, height = 0;    ///< cm, where the tensor is wanted
};

/// The symmetric part K_RR, K_Rz, K_zz [cm2 s-1] of a diffusion tensor at one corner.
using CornerTensor = std::array<double, 3>;

/// All corners of an axisymmetric grid, (nR + 1) x (nz + 1), R fastest. The symmetric corner scheme of
/// Guenter et al. 2005, J. Comp. Phys. 209, 354, with the parts of the dual cells as weights, so that a
/// density linear in R or z is differentiated exactly and a diagonal tensor meets the true face areas. On the
/// corners of outer sides only the derivative along the side is kept: the caller gives the full diffusivity
/// across outer sides as boundary diffusivity. Throws Error(input) for another geometry.
std::vector<Corner> make_corners(const grid::Grid& grid);

} // namespace aureole::transport
