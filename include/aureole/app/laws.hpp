#pragma once

#include "aureole/transport/law_catalogue.hpp"

#include <string>

namespace aureole::app {

/// One scattering law a line: its name and what it stands for.
std::string law_list();

/// All about one law in lines of 80 columns: formula, parameters with units, ranges and defaults, media,
/// slope, source, caution, and an example. Plain ASCII.
std::string law_text(const transport::LawEntry& law);

/// A [law.NAME] of the kind that a scenario can hold, with its other laws where it is made of any.
std::string law_example(const transport::LawEntry& law);

/// docs/laws.md: all laws, their parameters, anchors and the variables of formulas.
std::string laws_page();

/// `aureole laws [NAME]`: prints the list, or the law. Throws Error(usage) for a name that is not in it.
int laws(const std::string& name);

} // namespace aureole::app
