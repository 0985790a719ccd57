#pragma once

#include <cstdint>
#include <string>
#include <string_view>

namespace aureole::files {

/// FNV-1a, 64 bits (Fowler, Noll & Vo): to tell texts apart, not for security.
/// start: hash of the text in front, for texts in pieces.
std::uint64_t fnv1a(std::string_view text, std::uint64_t start = 0xcbf29ce484222325U);
std::string hex(std::uint64_t hash); ///< 16 digits

} // namespace aureole::files
