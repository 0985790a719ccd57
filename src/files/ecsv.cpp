#include "aureole/files/ecsv.hpp"

#include "aureole/base/error.hpp"

#include <fmt/format.h>

#include <cmath>

namespace aureole::files {

namespace {

/// A text as a YAML double-quoted scalar.
std::string yaml_text(const std::string& text) {
    std::string quoted = "\"";
    for (const char c : text) {
        if (c == '"' || c == '\\') {
            quoted += '\\';
        }
        quoted += static_cast<unsigned char>(c) < 0x20 ? ' ' : c;
    }
    return quoted + '"';
}

std::string cell_text(const std::string& text) {
    if (!text.empty() && text.find_first_of(" ,\"#\t\n\r") == std::string::npos) {
        return text;
    }
    std::string quoted = "\"";
    for (const char c : text) {
        quoted += static_cast<unsigned char>(c) < 0x20 ? ' ' : c; // a row is one line
        if (c == '"') {
            quoted += '"';
        }
    }
    return quoted + '"';
}

struct TypeName {
    const char* operator()(const std::vector<double>&) const { return "float64"; }
    const char* operator()(const std::vector<long>&) const { return "int64"; }
    const char* operator()(const std::vector<std::string>&) const { return "string"; }
    const char* operator()(const std::vector<bool>&) const { return "bool"; }
};

struct CellOf {
    std::size_t row;
    std::string operator()(const std::vector<double>& v) const {
        return std::isnan(v[row]) ? "nan" : fmt::format("{}", v[row]);
    }
    std::string operator()(const std::vector<long>& v) const { return fmt::format("{}", v[row]); }
    std::string operator()(const std::vector<std::string>& v) const { return cell_text(v[row]); }
    std::string operator()(const std::vector<bool>& v) const { return v[row] ? "True" : "False"; }
};

} // namespace

std::string ecsv_text(const std::vector<EcsvColumn>& columns,
                      const std::vector<std::pair<std::string, std::string>>& meta) {
    std::string text = "# %ECSV 1.0\n# ---\n# delimiter: ','\n# datatype:\n";
    std::size_t rows = 0;
    for (std::size_t c = 0; c < columns.size(); ++c) {
        const EcsvColumn& column = columns[c];
        text += fmt::format("# - {{name: {}", yaml_text(column.name));
        if (!column.unit.empty()) {
            text += fmt::format(", unit: {}", yaml_text(column.unit));
        }
        text += fmt::format(", datatype: {}", std::visit(TypeName{}, column.values));
        if (!column.description.empty()) {
            text += fmt::format(", description: {}", yaml_text(column.description));
        }
        text += "}\n";
        const std::size_t length =
            std::visit([](const auto& values) { return values.size(); }, column.values);
        if (c > 0 && length != rows) {
            throw Error(ErrorKind::runtime, fmt::format("table column {}: found {} rows, expected {}",
                                                        column.name, length, rows));
        }
        rows = length;
    }
    if (!meta.empty()) {
        text += "# meta:\n";
        for (const auto& [key, value] : meta) {
            text += fmt::format("#   {}: {}\n", yaml_text(key), yaml_text(value));
        }
    }
    text += "# schema: astropy-2.0\n";
    for (std::size_t c = 0; c < columns.size(); ++c) {
        text += c > 0 ? "," : "";
        text += cell_text(columns[c].name);
    }
    text += '\n';
    for (std::size_t row = 0; row < rows; ++row) {
        for (std::size_t c = 0; c < columns.size(); ++c) {
            text += c > 0 ? "," : "";
            text += std::visit(CellOf{row}, columns[c].values);
        }
        text += '\n';
    }
    return text;
}

} // namespace aureole::files
