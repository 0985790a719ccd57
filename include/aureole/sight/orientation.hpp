#pragma once

#include "aureole/emission/emit.hpp"
#include "aureole/sight/view.hpp"

namespace aureole::sight {

/// The view as emission needs it: unit vectors of the sky plane and to the observer in the galaxy frame.
emission::Orientation orientation(const View& view);

} // namespace aureole::sight
