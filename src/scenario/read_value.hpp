#pragma once

#include "aureole/scenario/scenario.hpp"

#include <toml++/toml.h>

#include <string>
#include <string_view>

namespace aureole::scenario {

/// The value of a key from TOML, checked against its kind, dimension, range and choices. Throws
/// Error(scenario): what was found, what was expected.
Value read_value(const Key& key, const toml::node& node);

/// The same from an override or a default, which may leave out the quotes of texts and the brackets of lists.
Value read_typed(const Key& key, const std::string& typed);

/// The node as it would be typed, cut where it is long, for messages.
std::string node_text(const toml::node& node);

/// A text in TOML quotes, with what needs it escaped.
std::string in_quotes(std::string_view text);

} // namespace aureole::scenario
