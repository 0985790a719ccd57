#pragma once

#include "aureole/base/units.hpp"
#include "aureole/scenario/keys.hpp"

#include <filesystem>
#include <map>
#include <span>
#include <string>
#include <string_view>
#include <variant>
#include <vector>

namespace aureole::scenario {

enum class ProfileKind {
    none,
    constant,
    double_exponential,
    sech2,
    gaussian,
    beta,
    power_law,
    file,
    formula
};

/// A spatial profile: an amplitude times a shape (see media/cell_average.hpp for the formulas). Lengths cm.
struct ProfileSpec {
    ProfileKind kind = ProfileKind::none;
    double value = 0; ///< CGS
    double radius = 0, height = 0, core = 0, slope = 0;
    double flare = 0; ///< 0: none
    std::string formula;
    std::string key; ///< where it stands in the scenario, for messages
};

/// A value as read: CGS for quantities.
using Value = std::variant<double, long, bool, std::string, std::vector<double>, std::vector<std::string>>;

/// A checked scenario: every key of the table has a value or is absent. Plain data.
class Scenario {
  public:
    const std::filesystem::path& file() const { return file_; }

    /// Whether the key has a value: given, or by default.
    bool has(std::string_view key) const;
    /// Whether the file or an override gives it.
    bool is_set(std::string_view key) const;

    /// Whether spectra are solved for: a key of [transport] is given, or a species has source = "transport".
    bool has_transport() const;

    // Values by dotted path. Error(scenario) naming the key where it has none; asking for another type than
    // the table of keys gives is a programmer's mistake.
    double quantity(std::string_view key) const; ///< CGS
    double number(std::string_view key) const;
    long integer(std::string_view key) const;
    bool boolean(std::string_view key) const;
    std::string text(std::string_view key) const; ///< text, choice, formula, path as typed; empty where unset
    std::vector<double> quantities(std::string_view key) const;
    std::vector<std::string> texts(std::string_view key) const;
    std::filesystem::path
    path(std::string_view key) const; ///< resolved against the scenario's folder; empty where unset
    ProfileSpec profile(const std::string& prefix) const;
    /// The names a user chose below a prefix, in alphabetical order: names("radiation.component").
    std::vector<std::string> names(const std::string& prefix) const;

    struct Entry {
        Value value;
        bool given = false;
        long line = 0, column = 0; ///< from 1; 0: from an override or a default
    };
    const std::map<std::string, Entry, std::less<>>& entries() const { return entries_; }

  private:
    friend struct Reader;
    const Value& value(std::string_view key) const;
    std::filesystem::path file_;
    std::map<std::string, Entry, std::less<>> entries_;
};

/// Reads a scenario file. overrides: "key=value", where the value may stand without quotes
/// ("view.inclination=85 deg") and a list without brackets ("radio.frequencies=1.4 GHz, 6 GHz"). Throws
/// Error(scenario) listing every problem, one a line, as FILE:LINE:COLUMN: KEY: what was found, what was
/// expected; Error(input) if the file cannot be read.
Scenario load(const std::filesystem::path& file, std::span<const std::string> overrides);

/// The same from text; `name` stands for the file in messages, its folder resolves relative paths.
Scenario
parse(std::string_view text, const std::filesystem::path& name, std::span<const std::string> overrides);

/// The whole scenario with its defaults as valid TOML, which reads back to the same values; paths become
/// absolute. A default that gives way to what input.grid holds stands as a comment, since writing it would
/// overrule the file.
std::string effective_toml(const Scenario& scenario);

} // namespace aureole::scenario
