#pragma once

#include "aureole/scenario/keys.hpp"

#include <limits>
#include <string>
#include <utility>
#include <vector>

/// Rows of the table of keys.
namespace aureole::scenario {

inline constexpr double infinity = std::numeric_limits<double>::infinity();
inline constexpr double tiny = above_zero;

inline Key quantity(std::string path,
                    const Dimension& dimension,
                    double least,
                    double greatest,
                    std::string otherwise,
                    std::string help) {
    return {std::move(path), Kind::quantity,       dimension, least,
            greatest,        std::move(otherwise), {},        std::move(help)};
}

inline Key number(std::string path, double least, double greatest, std::string otherwise, std::string help) {
    return {std::move(path), Kind::number, {}, least, greatest, std::move(otherwise), {}, std::move(help)};
}

inline Key integer(std::string path, double least, double greatest, std::string otherwise, std::string help) {
    return {std::move(path), Kind::integer, {}, least, greatest, std::move(otherwise), {}, std::move(help)};
}

inline Key boolean(std::string path, bool otherwise, std::string help) {
    return {std::move(path), Kind::boolean, {}, -infinity, infinity, otherwise ? "true" : "false", {},
            std::move(help)};
}

inline Key other(std::string path, Kind kind, std::string otherwise, std::string help) {
    return {std::move(path), kind, {}, -infinity, infinity, std::move(otherwise), {}, std::move(help)};
}

inline Key
choice(std::string path, std::vector<std::string> choices, std::string otherwise, std::string help) {
    return {std::move(path),    Kind::choice,   {}, -infinity, infinity, std::move(otherwise),
            std::move(choices), std::move(help)};
}

} // namespace aureole::scenario
