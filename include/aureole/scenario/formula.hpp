#pragma once

#include <memory>
#include <span>
#include <string>
#include <vector>

namespace aureole::scenario {

/// An expression in named variables (muParser: + - * / ^, comparison, ? :, exp, log = ln, sqrt, abs, min,
/// max, sin, ..., _pi). One object per thread.
class Formula {
  public:
    /// Throws Error(scenario): what was found at which place; for an unknown name, the names that are known.
    /// Assignment and lists of expressions are refused.
    Formula(const std::string& text, std::vector<std::string> variables);
    ~Formula();
    Formula(Formula&&) noexcept;
    Formula& operator=(Formula&&) noexcept;

    /// Value for the variables in their order; may be infinite or NaN.
    double eval(std::span<const double> values);

  private:
    struct State;
    std::unique_ptr<State> state_;
};

} // namespace aureole::scenario
