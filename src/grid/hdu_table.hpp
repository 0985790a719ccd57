#pragma once

#include "aureole/base/units.hpp"

#include <string>
#include <vector>

namespace aureole::grid {

/// A data HDU of the HALO-GRID format.
struct KnownHdu {
    std::string name;
    std::string first_axis; ///< energy axis or COMP; empty: none
    Dimension dimension;
    std::string example_unit;
    bool any_sign = false;
};

const std::vector<KnownHdu>& known_hdus();
const KnownHdu* find_known(const std::string& name);

} // namespace aureole::grid
