#pragma once

#include "sky.hpp"

#include "aureole/transport/solve.hpp"

namespace aureole::app {

/// Adds to every map how much of its emission comes from particles whose diffusion had to be limited (L <
/// 1/2, LIMITED), and from particles older than the sources (NOTSTEAD), and warns where that is over 1 %.
/// Electrons count with the mean age of protons of their energy where they have none of their own, which is
/// an upper bound. Emission of the particles in question alone, over all emission, both summed over the
/// galaxy.
void note_shares(Sky& sky,
                 const std::string& law,
                 const transport::Solution& solution,
                 double source_age,
                 const Inputs& inputs,
                 const media::Media& media,
                 const RunContext& context);

} // namespace aureole::app
