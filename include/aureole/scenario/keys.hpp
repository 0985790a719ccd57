#pragma once

#include "aureole/base/units.hpp"

#include <limits>
#include <optional>
#include <string>
#include <string_view>
#include <vector>

namespace aureole::scenario {

enum class Kind {
    quantity, ///< number with a unit, as a string
    number,
    integer,
    boolean,
    text,
    choice,        ///< one of Key::choices
    formula,       ///< muParser text
    path,          ///< relative to the scenario file
    quantity_list, ///< list of quantities, rising
    number_list,   ///< list of numbers
    choice_list,
    text_list,
};

/// Key::least of values that must be more than zero: less than any value in use.
inline constexpr double above_zero = 1e-300;

/// One key of a scenario: the reader, --set, the effective scenario and the reference page are made from it.
struct Key {
    std::string path; ///< dotted; every "<name>" stands for a name the user chooses
    Kind kind = Kind::number;
    Dimension dimension;                                     ///< of quantities
    double least = -std::numeric_limits<double>::infinity(); ///< CGS, inclusive
    double greatest = std::numeric_limits<double>::infinity();
    std::string otherwise; ///< default, as typed in TOML (texts without their quotes); empty: none
    std::vector<std::string> choices;
    std::string help;      ///< one line
    bool required = false; ///< must be given wherever its "<name>" is
};

/// All keys, in the order of the reference page.
const std::vector<Key>& keys();

/// The key a dotted path names, with "<name>" matching any one part. Nothing if there is none.
const Key* find_key(std::string_view path);

/// Whether the dotted path is that of a table of keys, such as "gas" or "gas.hi".
bool is_table(std::string_view path);

/// Whether the last part of the path of a table is a name the user chooses, as in "radiation.component.dust".
bool is_named_table(std::string_view path);

/// The known key, or table of keys, nearest to a path: fewest insertions, deletions, substitutions and swaps
/// of neighbours.
std::string nearest_key(std::string_view path);
std::string nearest_table(std::string_view path);

/// Every key in a table, for docs/scenario.md.
std::string reference_page();

} // namespace aureole::scenario
