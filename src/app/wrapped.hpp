#pragma once

#include <cstddef>
#include <sstream>
#include <string>

namespace aureole::app {

/// The text with lines of 80 columns at most: what is longer goes on below where its last column starts.
inline std::string wrapped(const std::string& text, std::size_t column) {
    constexpr std::size_t width = 80;
    std::string result;
    std::istringstream lines(text);
    for (std::string line; std::getline(lines, line);) {
        const std::size_t indent = line.starts_with(' ') ? column : 0;
        while (line.size() > width) {
            const std::size_t blank = line.rfind(' ', width);
            if (blank == std::string::npos || blank <= indent) {
                break;
            }
            result += line.substr(0, blank) + '\n';
            line = std::string(indent, ' ') + line.substr(blank + 1);
        }
        result += line + '\n';
    }
    return result;
}

} // namespace aureole::app
