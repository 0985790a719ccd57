#pragma once

#include "aureole/base/error.hpp"

#include <fstream>
#include <map>
#include <sstream>
#include <string>
#include <vector>

/// Rows of a CSV table below tests/data, by column name. Lines starting with '#' are comments; a missing
/// file, an empty table or a ragged row fails the test that asks.
inline std::vector<std::map<std::string, std::string>> read_table(const std::string& name) {
    const std::string path = std::string(AUREOLE_TEST_DATA) + "/" + name;
    std::ifstream file(path);
    if (!file) {
        throw aureole::Error(aureole::ErrorKind::input, path + ": missing test table");
    }
    const auto split = [](const std::string& line) {
        std::vector<std::string> cells;
        std::string cell;
        std::istringstream stream(line);
        while (std::getline(stream, cell, ',')) {
            cells.push_back(cell);
        }
        return cells;
    };
    std::vector<std::string> names;
    std::vector<std::map<std::string, std::string>> rows;
    std::string line;
    while (std::getline(file, line)) {
        if (line.empty() || line.front() == '#') {
            continue;
        }
        const auto cells = split(line);
        if (names.empty()) {
            names = cells;
            continue;
        }
        if (cells.size() != names.size()) {
            throw aureole::Error(aureole::ErrorKind::input, path + ": ragged row: " + line);
        }
        std::map<std::string, std::string> row;
        for (std::size_t i = 0; i < names.size(); ++i) {
            row[names[i]] = cells[i];
        }
        rows.push_back(row);
    }
    if (rows.empty()) {
        throw aureole::Error(aureole::ErrorKind::input, path + ": empty test table");
    }
    return rows;
}

inline double number(const std::map<std::string, std::string>& row, const std::string& column) {
    return std::stod(row.at(column));
}
