#pragma once

#include "aureole/scenario/keys.hpp"

#include <vector>

namespace aureole::scenario {

/// Appends the keys of steady transport, [transport] and [law], to the table.
void add_transport_keys(std::vector<Key>& keys);

} // namespace aureole::scenario
