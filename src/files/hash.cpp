#include "aureole/files/hash.hpp"

#include <fmt/format.h>

namespace aureole::files {

std::uint64_t fnv1a(std::string_view text, std::uint64_t start) {
    std::uint64_t hash = start;
    for (const char c : text) {
        hash = (hash ^ static_cast<unsigned char>(c)) * 0x100000001b3U;
    }
    return hash;
}

std::string hex(std::uint64_t hash) {
    return fmt::format("{:016x}", hash);
}

} // namespace aureole::files
