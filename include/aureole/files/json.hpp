#pragma once

#include <string>
#include <utility>
#include <variant>
#include <vector>

namespace aureole::files {

/// A JSON value to be written. Objects keep the order of their members; numbers that are not finite become
/// null.
class Json {
  public:
    using Array = std::vector<Json>;
    using Object = std::vector<std::pair<std::string, Json>>;

    Json() = default;
    Json(double value) : value_(value) {}
    Json(long value) : value_(value) {}
    Json(int value) : value_(static_cast<long>(value)) {}
    Json(std::size_t value) : value_(static_cast<long>(value)) {}
    Json(bool value) : value_(value) {}
    Json(std::string value) : value_(std::move(value)) {}
    Json(const char* value) : value_(std::string(value)) {}
    Json(Array value) : value_(std::move(value)) {}
    Json(Object value) : value_(std::move(value)) {}

    /// Indented by two blanks a level, UTF-8. Bytes that are not UTF-8 are written as U+FFFD.
    std::string text() const;

  private:
    void append(std::string& out, int level) const;
    std::variant<std::nullptr_t, double, long, bool, std::string, Array, Object> value_ = nullptr;
};

} // namespace aureole::files
