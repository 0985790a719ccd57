#pragma once

#include "products.hpp"

#include "aureole/emission/emit.hpp"

#include <array>
#include <vector>

namespace aureole::emission {

/// Fills, for the total plane of each channel, the share missing because the spectra end and the error from
/// the energy nodes, from the mean spectrum behind each contribution in a sample of the cells.
///   missing: the spectrum goes on as the power law through its last (first) two nodes for 4 decades up (down
///   to 1e-3 of the first node). energy error: largest change under halved nodes, even or odd ones, added up
///   without sign over the contributions, over `coarsening`. A cubic basis gains 2^4 from halved nodes where
///   the spectrum is smooth; the smaller divisor leaves room for spectra that are not. Changes that cancel
///   by chance are rare with two choices of nodes.
/// sets: those of the electrons and of the protons.
/// Returns the largest share, over the channels, of inverse-Compton emission that comes from electrons below
/// gamma = 10.
double check_spectra(std::vector<PlaneReport>& planes,
                     const grid::Grid& grid,
                     const media::Media& media,
                     const ProductPlan& plan,
                     const std::array<const ProductSet*, 2>& sets,
                     const std::vector<spectra::Source>& sources,
                     const std::vector<Channel>& channels,
                     bool synchrotron,
                     const RunContext& context);

} // namespace aureole::emission
