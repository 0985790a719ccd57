#pragma once

#include "aureole/scenario/keys.hpp"

#include <string>

namespace aureole::scenario {

/// The values a key takes, in words: "at least 0 kpc", "more than 0 and at most 1", or nothing where all are.
std::string range_text(const Key& key);

/// A bound of the key in its own unit.
std::string bound_text(const Key& key, double bound);

} // namespace aureole::scenario
