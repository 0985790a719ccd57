#pragma once

#include "aureole/base/run_context.hpp"

#include <memory>

namespace aureole::app {

enum class Colour { automatic, always, never };

struct TerminalOptions {
    bool quiet = false;
    int verbosity = 0;
    Colour colour = Colour::automatic;
};

/// Log and progress on the terminal. Messages go to stderr; a progress line is drawn only where stderr is a
/// terminal and not quiet.
class Terminal {
  public:
    explicit Terminal(const TerminalOptions& options);
    ~Terminal();
    Terminal(const Terminal&) = delete;
    Terminal& operator=(const Terminal&) = delete;

    /// Hooks for a RunContext; they refer to this object.
    void attach(RunContext& context);
    void error(const char* message);
    /// Wipes the progress line, so that other output starts clean.
    void clear_progress();

  private:
    struct State;
    std::unique_ptr<State> state_;
};

} // namespace aureole::app
