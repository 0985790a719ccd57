#pragma once

#include "aureole/base/error.hpp"
#include "aureole/scenario/scenario.hpp"

#include <fmt/format.h>

#include <algorithm>
#include <string>
#include <string_view>
#include <tuple>
#include <vector>

namespace aureole::transport {

/// Problems of a scenario, collected and thrown as one, as the reader of the scenario words them.
class ScenarioProblems {
  public:
    explicit ScenarioProblems(const scenario::Scenario& scenario) : scenario_(scenario) {}

    /// The key is a key or a table.
    void add(const std::string& key, std::string_view what) {
        const auto& entries = scenario_.entries();
        auto place = entries.find(key);
        if (place == entries.end()) {
            for (auto below = entries.lower_bound(key + ".");
                 below != entries.end() && below->first.starts_with(key + "."); ++below) {
                const bool earlier = place == entries.end() || below->second.line < place->second.line;
                place = below->second.line > 0 && earlier ? below : place;
            }
        }
        const long line = place != entries.end() ? place->second.line : 0;
        const long column = place != entries.end() ? place->second.column : 0;
        const std::string file = scenario_.file().string();
        const std::string where = line > 0 ? fmt::format("{}:{}:{}", file, line, column) : file;
        problems_.push_back({line, column, fmt::format("{}: {}: {}", where, key, what)});
    }

    bool any() const { return !problems_.empty(); }

    /// Throws Error(scenario) if there are any.
    void report() {
        if (problems_.empty()) {
            return;
        }
        std::stable_sort(problems_.begin(), problems_.end(), [](const Problem& a, const Problem& b) {
            return std::tuple(a.line == 0, a.line, a.column) < std::tuple(b.line == 0, b.line, b.column);
        });
        std::string text;
        for (const Problem& problem : problems_) {
            text += (text.empty() ? "" : "\n") + problem.text;
        }
        throw Error(ErrorKind::scenario, text);
    }

  private:
    struct Problem {
        long line, column;
        std::string text;
    };
    const scenario::Scenario& scenario_;
    std::vector<Problem> problems_;
};

} // namespace aureole::transport
