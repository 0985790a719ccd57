#pragma once

#include <span>
#include <string_view>

namespace aureole::scenario {

/// A complete scenario to start from.
struct Starter {
    std::string_view name, line, text;
};

std::span<const Starter> starters();

} // namespace aureole::scenario
