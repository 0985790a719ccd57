#pragma once

#include <filesystem>
#include <string>
#include <utility>
#include <variant>
#include <vector>

namespace aureole::files {

/// A column of a table: the type follows from the values. NaN stands for "no value".
struct EcsvColumn {
    std::string name, unit, description;
    std::variant<std::vector<double>, std::vector<long>, std::vector<std::string>, std::vector<bool>> values;
};

/// A table as text in the ECSV format 1.0 (astropy APE 6): comma-separated, numbers with the fewest digits
/// that read back exactly. meta: texts.
std::string ecsv_text(const std::vector<EcsvColumn>& columns,
                      const std::vector<std::pair<std::string, std::string>>& meta);

} // namespace aureole::files
