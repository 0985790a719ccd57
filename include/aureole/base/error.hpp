#pragma once

#include <exception>
#include <string>
#include <string_view>

namespace aureole {

/// What went wrong, in the terms of the program's exit code.
enum class ErrorKind {
    runtime = 1,  ///< numerics or memory
    usage = 2,    ///< command line
    scenario = 3, ///< scenario file
    input = 4,    ///< data file
    accuracy = 5, ///< a conservation or convergence check failed
    output = 6,   ///< a result cannot be written
    interrupted = 130,
};

/// The only exception aureole throws. The message names what was found and what was expected; frames that
/// know a place (file, HDU, key) put it in front with in().
class Error : public std::exception {
  public:
    Error(ErrorKind kind, std::string message) : kind_(kind), message_(std::move(message)) {}

    /// Puts "place: " in front of the message.
    Error& in(std::string_view place) {
        message_.insert(0, std::string(place) + ": ");
        return *this;
    }
    ErrorKind kind() const noexcept { return kind_; }
    const char* what() const noexcept override { return message_.c_str(); }

  private:
    ErrorKind kind_;
    std::string message_;
};

} // namespace aureole
