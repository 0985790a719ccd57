#pragma once

#include <array>
#include <string_view>

namespace aureole::scenario {

/// What the user types for each ProfileKind, in its order.
inline constexpr std::array<std::string_view, 9> profile_names{
    "none", "constant", "double_exponential", "sech2", "gaussian", "beta", "power_law", "file", "formula"};

} // namespace aureole::scenario
