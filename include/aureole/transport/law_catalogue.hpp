#pragma once

#include "aureole/base/units.hpp"

#include <span>
#include <string>
#include <string_view>

namespace aureole::transport {

/// Dimension of a rigidity p c/(Z e): statvolt = G cm; 1 GV is 3.3356e6 of them.
inline constexpr Dimension rigidity_dimension{.length = 1, .field = 1};

enum class ParameterKind {
    number, ///< a quantity, or a number where the dimension is none
    list,   ///< of such
    choice, ///< one of `choices`
    words,  ///< any of `choices`, with commas or blanks between
    text,   ///< a formula
};

/// A parameter of a law. Values CGS, limits inclusive.
struct LawParameter {
    std::string_view name;
    ParameterKind kind = ParameterKind::number;
    Dimension dimension;
    double least = 0;
    double greatest = 0;
    double otherwise = 0;       ///< default of a number; NaN: none
    std::string_view text = ""; ///< default of a choice, words or a text
    std::string_view choices = "";
    bool required = false;
    std::string_view help; ///< one line
};

/// What a law returns.
enum class LawClass {
    shape,    ///< dimensionless, times its own `rate`; can be a factor of another law
    physical, ///< a rate as it stands
    combined, ///< made of other laws
};

/// One scattering law: a row of the list that `aureole laws` prints. Plain ASCII.
struct LawEntry {
    std::string_view name;
    LawClass kind = LawClass::shape;
    std::string_view mechanism;
    std::string_view formula; ///< of the scattering rate nu, or of the shape S
    std::span<const LawParameter> parameters;
    std::string_view media;  ///< what it needs to know about a place
    std::string_view slope;  ///< delta of nu ~ rigidity^-delta
    std::string_view source; ///< author, year, journal
    std::string_view caution;
};

/// All laws, in the order of the list.
std::span<const LawEntry> law_catalogue();

/// The law of that name. Throws Error(scenario) naming the nearest one.
const LawEntry& find_law(std::string_view name);

/// The parameter of that name; null if there is none.
const LawParameter* find_parameter(const LawEntry& law, std::string_view name);

/// The candidate nearest to `word`: fewest insertions, deletions and substitutions; empty without candidates.
std::string_view nearest_word(std::string_view word, std::span<const std::string_view> candidates);

/// Names of the variables of a formula and their meaning with unit, in the order in which they are listed.
struct FormulaVariable {
    std::string_view name, help;
};
std::span<const FormulaVariable> formula_variables();

} // namespace aureole::transport
