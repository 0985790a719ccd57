#pragma once

#include <atomic>
#include <cstddef>
#include <functional>
#include <string>
#include <string_view>

namespace aureole {

enum class LogLevel { debug, info, warning };

/// What a run needs from its surroundings. Plain data handed down by value or const reference: the library
/// keeps no globals, so several runs can go on in one process.
struct RunContext {
    int threads = 1;
    bool reproducible = false; ///< pin the baseline kernels, so that all x86-64 machines give the same bits
    std::size_t memory_limit = 0;                             ///< bytes of working memory; 0: no limit
    std::function<void(LogLevel, std::string_view)> log = {}; ///< may be empty
    std::function<void(std::string_view stage, double fraction)> progress =
        {};                                       ///< may be empty; one thread at a time
    const std::atomic<bool>* interrupt = nullptr; ///< set by a signal handler

    void say(LogLevel level, std::string_view message) const {
        if (log) {
            log(level, message);
        }
    }
    void report(std::string_view stage, double fraction) const {
        if (progress) {
            progress(stage, fraction);
        }
    }
    /// Throws Error(interrupted) once the interrupt flag is set.
    void check_interrupt() const;
};

} // namespace aureole
