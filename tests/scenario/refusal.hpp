#pragma once

#include "aureole/base/error.hpp"
#include "aureole/scenario/scenario.hpp"

#include <string>
#include <string_view>
#include <vector>

/// The message with which a scenario is refused; "accepted" if it is not, "another kind" if not as a
/// scenario.
inline std::string refusal(std::string_view text, const std::vector<std::string>& overrides = {}) {
    try {
        aureole::scenario::parse(text, "halo.toml", overrides);
    } catch (const aureole::Error& error) {
        return error.kind() == aureole::ErrorKind::scenario ? error.what() : "another kind";
    }
    return "accepted";
}
