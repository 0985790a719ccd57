#include "scenario/key_text.hpp"

#include "aureole/scenario/keys.hpp"

#include <fmt/format.h>
#include <fmt/ranges.h>

#include <algorithm>
#include <array>
#include <cmath>
#include <string_view>

namespace aureole::scenario {

namespace {

constexpr std::string_view introduction = R"(# Scenario keys

A scenario is a TOML file. Every key has a default unless this page says otherwise; unknown keys are refused.

- Quantities are texts with units: `"3 kpc"`, `"4.85 GHz"`, `"0.5 eV cm-3"`. Units follow the grammar of the FITS
  standard: products by blank, `/`, whole powers (`cm-3`), prefixes, case-sensitive. Pure numbers stand alone: `slope = 2.7`.
- Lists of quantities: `["1.4 GHz", "6 GHz"]`, in rising order, or a range
  `{ from = "0.1 GHz", to = "10 GHz", n = 5, spacing = "log" }` (`"log"` or `"linear"`).
- Paths are relative to the folder of the scenario file.
- On the command line: `--set view.inclination="85 deg"`, `--set radio.frequencies="1.4 GHz, 6 GHz"`.
- With `input.grid`, a `.profile` or `.source` that the scenario leaves out is taken from the file where the file holds
  that quantity.

This page is made from the table that the reader uses.

## Spatial profiles

Every table with a key `profile` describes a quantity in space as `value` times a shape of the radius R in the plane,
the height z and r = sqrt(R^2 + z^2). It takes, beside `profile` and `value`, which stand in the tables below:

)";

constexpr std::string_view shapes = R"(
| profile | shape |
|---|---|
| `none` | there is none of it |
| `constant` | 1 |
| `double_exponential` | exp(-R/radius - abs(z)/height) |
| `sech2` | exp(-R/radius) / cosh(z/height)^2 |
| `gaussian` | exp(-R^2/radius^2 - z^2/height^2) |
| `beta` | (1 + r^2/core^2)^(-1.5 slope) |
| `power_law` | (1 + r/core)^(-slope) |
| `file` | as `input.grid` holds it |
| `formula` | the expression in `formula`: + - * / ^, comparisons, `? :`, exp, log (natural), sqrt, abs, min, max, sin, ... |
)";

constexpr std::string_view key_head =
    "\n| key | value | range | default | meaning |\n|---|---|---|---|---|\n";
constexpr std::array<std::string_view, 6> shape_keys{"radius", "height", "core", "slope", "flare", "formula"};

constexpr std::string_view about_transport = R"(
Where this table stands, the spectra are not read but solved for: particles diffuse and lose energy from their sources to
the edge of the grid, in a steady state. Sources are populations with names of your choice, at least one for a species,
each with one of `power`, `supernova_rate`, `star_formation_rate` and, of electrons, `electron_share`. Without `[transport]`
none of these keys has a value.
)";

constexpr std::string_view about_law = R"(
Scattering laws with names of your choice. `kind` says which of the laws that `aureole laws` lists; [laws.md](laws.md) has
their formulas, the defaults of their parameters, and an example of each. Below, the kinds that take a parameter stand in
front of its meaning, and the range is that of all kinds together.
)";

std::string_view about(std::string_view section) {
    return section == "transport" ? about_transport : section == "law" ? about_law : "";
}

std::string without_article(const Dimension& dimension) {
    const std::string name = describe(dimension).name;
    return name.substr(name.find(' ') + 1);
}

std::string kind_text(const Key& key) {
    switch (key.kind) {
    case Kind::quantity:
        return without_article(key.dimension);
    case Kind::number:
        return "number";
    case Kind::integer:
        return "whole number";
    case Kind::boolean:
        return "`true` or `false`";
    case Kind::choice:
        return fmt::format("one of `{}`", fmt::join(key.choices, "`, `"));
    case Kind::formula:
        return "formula";
    case Kind::path:
        return "file";
    case Kind::quantity_list:
        return fmt::format("list: {}", without_article(key.dimension));
    case Kind::number_list:
        return "list of numbers";
    case Kind::choice_list:
        return fmt::format("list of `{}`", fmt::join(key.choices, "`, `"));
    case Kind::text_list:
        return "list of texts";
    case Kind::text:
        break;
    }
    return "text";
}

std::string row(const Key& key, std::string_view path) {
    const std::string otherwise = key.required            ? "must be given"
                                  : key.otherwise.empty() ? "none"
                                                          : fmt::format("`{}`", key.otherwise);
    return fmt::format("| `{}` | {} | {} | {} | {} |\n", path, kind_text(key), range_text(key), otherwise,
                       key.help);
}

/// The last part of a key that belongs to a profile and is told once for all of them; else nothing.
std::string_view shape_key(const Key& key) {
    const std::size_t dot = key.path.rfind('.');
    const std::string_view last = std::string_view(key.path).substr(dot + 1);
    const bool told_once = std::find(shape_keys.begin(), shape_keys.end(), last) != shape_keys.end();
    return told_once && find_key(key.path.substr(0, dot) + ".profile") != nullptr ? last : std::string_view();
}

/// Whether the page says of a whole table what this key is: those of factors but for their kind.
bool is_told_elsewhere(const Key& key) {
    return !shape_key(key).empty() ||
           (key.path.find(".factor.<name>.") != std::string::npos && !key.required);
}

} // namespace

std::string bound_text(const Key& key, double bound) {
    return key.dimension == dimension::none ? fmt::format("{:g}", bound)
                                            : format_quantity(bound, key.dimension);
}

std::string range_text(const Key& key) {
    std::string text = key.least == above_zero    ? "more than 0"
                       : std::isfinite(key.least) ? "at least " + bound_text(key, key.least)
                                                  : "";
    if (std::isfinite(key.greatest)) {
        text += (text.empty() ? "at most " : " and at most ") + bound_text(key, key.greatest);
    }
    return text;
}

std::string reference_page() {
    std::string page(introduction);
    page += key_head.substr(1);
    for (const std::string_view last : shape_keys) {
        const Key& key =
            *std::find_if(keys().begin(), keys().end(), [&](const Key& k) { return shape_key(k) == last; });
        page += row(key, last);
    }
    page += shapes;
    std::string section;
    for (const Key& key : keys()) {
        const std::string top = key.path.substr(0, key.path.find('.'));
        if (top != section) {
            section = top;
            page += fmt::format("\n## {}\n{}{}", section, about(section), key_head);
        }
        if (!is_told_elsewhere(key)) {
            page += row(key, key.path);
        }
    }
    return page;
}

} // namespace aureole::scenario
