#include "read_laws.hpp"

#include "aureole/base/error.hpp"
#include "aureole/base/units.hpp"

#include <fmt/format.h>
#include <fmt/ranges.h>

#include <algorithm>
#include <array>
#include <charconv>
#include <cmath>
#include <fstream>
#include <map>
#include <optional>
#include <string>
#include <string_view>

namespace aureole::transport {

namespace {

constexpr std::uintmax_t largest_file = 500'000'000; // bytes

struct Column {
    std::string_view name;
    Dimension dimension;
};

constexpr std::array columns{Column{"R", dimension::length}, Column{"z", dimension::length},
                             Column{"rigidity", rigidity_dimension}, Column{"rate", dimension::frequency}};

std::string trimmed(std::string_view text) {
    constexpr std::string_view blanks = " \t\r\"'";
    const std::size_t from = text.find_first_not_of(blanks);
    return from == std::string_view::npos
               ? std::string()
               : std::string(text.substr(from, text.find_last_not_of(blanks) + 1 - from));
}

std::vector<std::string> cells_of(const std::string& line, bool commas) {
    std::vector<std::string> cells;
    const std::string_view separators = commas ? "," : " \t\r";
    for (std::size_t from = 0; from <= line.size();) {
        const std::size_t to = std::min(line.size(), line.find_first_of(separators, from));
        if (commas || to > from) {
            cells.push_back(trimmed(std::string_view(line).substr(from, to - from)));
        }
        from = to + 1;
    }
    return cells;
}

/// The value of `key: value` in a line of the YAML head of ECSV; empty if it is not there.
std::string yaml_value(const std::string& line, std::string_view key) {
    const std::size_t at = line.find(fmt::format("{}:", key));
    if (at == std::string::npos) {
        return "";
    }
    const std::size_t from = at + key.size() + 1;
    return trimmed(std::string_view(line).substr(from, line.find_first_of(",}", from) - from));
}

/// Units by column from the comments of ECSV.
class UnitHead {
  public:
    void read(const std::string& line) {
        if (line.find("name:") != std::string::npos) {
            name_ = yaml_value(line, "name");
        }
        const std::string unit = yaml_value(line, "unit");
        if (!name_.empty() && !unit.empty()) {
            units_[name_] = unit.starts_with("1 /") ? unit.substr(2) : unit; // as astropy writes 1 / s
        }
    }
    std::string of(const std::string& name) const {
        const auto found = units_.find(name);
        return found == units_.end() ? "" : found->second;
    }

  private:
    std::string name_; ///< of the column whose lines are being read
    std::map<std::string, std::string> units_;
};

struct ColumnPlace {
    std::size_t index = 0;
    double factor = 1;
};

/// Where the columns stand, from the line of their heads.
std::array<ColumnPlace, columns.size()> find_columns(std::vector<std::string> heads, const UnitHead& units) {
    std::vector<std::string> found_units;
    for (std::string& head : heads) {
        const std::size_t bracket = head.find('[');
        std::string unit = units.of(head);
        if (bracket != std::string::npos && head.ends_with(']')) {
            unit = trimmed(std::string_view(head).substr(bracket + 1, head.size() - bracket - 2));
            head = trimmed(std::string_view(head).substr(0, bracket));
        }
        found_units.push_back(std::move(unit));
    }
    std::array<ColumnPlace, columns.size()> places;
    for (std::size_t i = 0; i < columns.size(); ++i) {
        const auto found = std::find(heads.begin(), heads.end(), columns[i].name);
        if (found == heads.end()) {
            throw Error(ErrorKind::input,
                        fmt::format("found the columns {}, expected R, z, rigidity and rate",
                                    fmt::join(heads, ", ")));
        }
        places[i].index = static_cast<std::size_t>(found - heads.begin());
        try {
            places[i].factor = unit_factor(found_units[places[i].index], columns[i].dimension);
        } catch (Error& error) {
            error.in(fmt::format("column {}", columns[i].name));
            throw;
        }
    }
    return places;
}

double number_of(const std::string& cell, std::string_view column) {
    double value = 0;
    const auto [end, failure] = std::from_chars(cell.data(), cell.data() + cell.size(), value);
    if (failure != std::errc() || end != cell.data() + cell.size() || !std::isfinite(value)) {
        throw Error(ErrorKind::input, fmt::format("column {}: found '{}', expected a number", column, cell));
    }
    return value;
}

} // namespace

LawSpec read_law_table(const std::filesystem::path& file) {
    std::ifstream stream(file);
    std::error_code failure;
    if (!stream || std::filesystem::is_directory(file, failure)) {
        throw Error(ErrorKind::input, fmt::format("{}: not found or not readable, expected a table of "
                                                  "scattering rates",
                                                  file.string()));
    }
    if (std::filesystem::file_size(file, failure) > largest_file && !failure) {
        throw Error(ErrorKind::input,
                    fmt::format("{}: found more than {} bytes, expected less", file.string(), largest_file));
    }
    UnitHead units;
    std::optional<std::array<ColumnPlace, columns.size()>> places;
    bool commas = false;
    std::size_t width = 0;
    std::array<std::vector<double>, columns.size()> values;
    std::size_t number = 0;
    for (std::string line; std::getline(stream, line);) {
        ++number;
        if (trimmed(line).empty()) {
            continue;
        }
        try {
            if (line.front() == '#') {
                units.read(line);
            } else if (!places) {
                commas = line.find(',') != std::string::npos;
                const auto heads = cells_of(line, commas);
                width = heads.size();
                places = find_columns(heads, units);
            } else {
                const auto cells = cells_of(line, commas);
                if (cells.size() != width) {
                    throw Error(ErrorKind::input,
                                fmt::format("found {} values, expected {}", cells.size(), width));
                }
                for (std::size_t i = 0; i < columns.size(); ++i) {
                    const ColumnPlace& place = (*places)[i];
                    values[i].push_back(number_of(cells[place.index], columns[i].name) * place.factor);
                }
            }
        } catch (Error& error) {
            error.in(fmt::format("{}:{}", file.string(), number));
            throw;
        }
    }
    if (values.front().empty()) {
        throw Error(ErrorKind::input, fmt::format("{}: found no rows, expected rates", file.string()));
    }
    try {
        return table_law(values[0], values[1], values[2], values[3]);
    } catch (const Error& error) {
        throw Error(ErrorKind::input, fmt::format("{}: {}", file.string(), error.what()));
    }
}

} // namespace aureole::transport
