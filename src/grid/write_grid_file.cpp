#include "aureole/grid/write_grid_file.hpp"

#include "hdu_table.hpp"

#include "aureole/base/constants.hpp"
#include "aureole/base/error.hpp"
#include "aureole/base/units.hpp"
#include "aureole/grid/grid_file.hpp"

#include <fmt/format.h>
#include <fmt/ranges.h>

#include <algorithm>
#include <cmath>
#include <set>

namespace aureole::grid {

namespace {

using files::Card;
using files::FitsWriter;
using files::Header;

constexpr std::size_t components = 3;

bool is_vector(const KnownHdu& known) {
    return known.first_axis == "COMP";
}

std::string axis_unit(const std::string& name) {
    return name == "EPS_PHOTON" ? "eV" : "GeV";
}

/// Collects what a reader would refuse.
class OutputCheck {
  public:
    explicit OutputCheck(const GridFileOutput& output) : output_(output) {}

    std::vector<std::string> problems() {
        try {
            validate(output_.grid);
        } catch (const Error& error) {
            return {error.what()}; // without a grid nothing else can be judged
        }
        std::for_each(output_.data.begin(), output_.data.end(), [&](const auto& data) { check_data(data); });
        std::for_each(output_.axes.begin(), output_.axes.end(), [&](const auto& axis) { check_axis(axis); });
        check_together();
        return std::move(problems_);
    }

  private:
    void problem(const std::string& hdu, const std::string& what) {
        problems_.push_back(fmt::format("HDU {}: {}", hdu, what));
    }

    void check_data(const GridFileData& data) {
        const KnownHdu* known = find_known(data.name);
        if (known == nullptr) {
            problem(data.name,
                    "found a name that the format does not have, expected one of docs/grid_file.md");
            return;
        }
        if (!names_.insert(data.name).second) {
            problem(data.name, "found twice, expected once");
        }
        try {
            unit_factor(data.unit, known->dimension);
        } catch (const Error& error) {
            problem(data.name, fmt::format("BUNIT: {}", error.what()));
        }
        check_values(data, *known);
    }

    void check_values(const GridFileData& data, const KnownHdu& known) {
        std::size_t per_cell = is_vector(known) ? components : 1;
        if (!is_vector(known) && !known.first_axis.empty()) {
            used_axes_.insert(known.first_axis);
            const auto axis = output_.axes.find(known.first_axis);
            if (axis == output_.axes.end()) {
                problem(data.name, fmt::format("found no axis {}, expected one", known.first_axis));
                return;
            }
            per_cell = axis->second.size();
        }
        const std::size_t expected = output_.grid.stored_cells() * per_cell;
        if (data.values.size() != expected) {
            problem(data.name,
                    fmt::format("found {} values, expected {}, {} in each of {} cells", data.values.size(),
                                expected, per_cell, output_.grid.stored_cells()));
            return;
        }
        const auto bad = std::find_if(data.values.begin(), data.values.end(), [&](float value) {
            return !std::isfinite(value) || (value < 0 && !known.any_sign);
        });
        if (bad != data.values.end()) {
            const auto at = static_cast<std::size_t>(bad - data.values.begin());
            problem(data.name, fmt::format("{}: found {}, expected a finite value{}",
                                           cell_text(output_.grid, at / per_cell), *bad,
                                           known.any_sign ? "" : " that is not negative"));
        }
    }

    void check_axis(const std::pair<const std::string, std::vector<double>>& axis) {
        const auto& [name, values] = axis;
        if (!used_axes_.contains(name)) {
            problem(name, "found an axis that no data use, expected only such as are used");
        }
        const bool rising = std::adjacent_find(values.begin(), values.end(),
                                               [](double a, double b) { return !(b > a); }) == values.end();
        if (values.size() < 2 || !rising || !(values.front() > 0) || !std::isfinite(values.back())) {
            problem(name, fmt::format("found {}, expected 2 or more energies above 0 that rise",
                                      fmt::join(values, ", ")));
        }
    }

    void check_together() {
        const auto has = [&](const char* name) { return names_.contains(name); };
        const std::string& parity = output_.field_parity;
        if (!parity.empty() && parity != "EVEN" && parity != "ODD") {
            problem("PRIMARY", fmt::format("BPARITY: found '{}', expected 'EVEN' or 'ODD'", parity));
        }
        if (output_.grid.mirrored && has("B_VECTOR") && parity.empty()) {
            problem("B_VECTOR", "found on a mirrored grid without a parity, expected EVEN or ODD");
        }
        if (!(output_.cmb_temperature > 0) || !std::isfinite(output_.cmb_temperature)) {
            problem("PRIMARY",
                    fmt::format("TCMB: found {}, expected a temperature above 0 K", output_.cmb_temperature));
        }
        if (has("CR_LEPTON") && (has("CR_ELECTRON") || has("CR_POSITRON"))) {
            problem("CR_LEPTON", "found beside CR_ELECTRON or CR_POSITRON, expected one or the other");
        }
        if (has("CR_ENERGY_LEPTON") && has("CR_ENERGY_ELECTRON")) {
            problem("CR_ENERGY_LEPTON", "found beside CR_ENERGY_ELECTRON, expected one or the other");
        }
    }

    const GridFileOutput& output_;
    std::set<std::string> names_, used_axes_;
    std::vector<std::string> problems_;
};

Header primary_header(const GridFileOutput& output) {
    Header header;
    header.cards = {{"FMTNAME", std::string("HALO-GRID"), "format of this file"},
                    {"FMTVERS", std::string("1.0"), "version of the format"},
                    {"GEOMETRY", std::string(output.grid.geometry == Geometry::rz ? "RZ" : "XYZ"), ""},
                    {"ZMIRROR", output.grid.mirrored, "only z >= 0 is stored"},
                    {"TCMB", output.cmb_temperature, "[K] microwave background"}};
    if (!output.field_parity.empty()) {
        header.cards.push_back({"BPARITY", output.field_parity, "of the ordered field about z = 0"});
    }
    if (!output.object.empty()) {
        header.cards.push_back({"OBJECT", output.object, ""});
    }
    header.cards.insert(header.cards.end(), output.primary.cards.begin(), output.primary.cards.end());
    header.history = output.primary.history;
    return header;
}

void write_axis(FitsWriter& writer,
                const std::string& name,
                const std::vector<double>& cgs,
                const std::string& unit,
                const Dimension& dimension,
                std::vector<Card> more) {
    const double factor = unit_factor(unit, dimension);
    std::vector<double> values(cgs.size());
    std::transform(cgs.begin(), cgs.end(), values.begin(), [&](double value) { return value / factor; });
    more.insert(more.begin(), {"BUNIT", unit, ""});
    writer.image(name, {values.size()}, values, {std::move(more), {}});
}

void write_axes(FitsWriter& writer, const GridFileOutput& output) {
    const auto edges = [&](const char* name, const std::vector<double>& cgs) {
        write_axis(writer, name, cgs, "kpc", dimension::length, {});
    };
    if (output.grid.geometry == Geometry::rz) {
        edges("R_EDGES", output.grid.x);
    } else {
        edges("X_EDGES", output.grid.x);
        edges("Y_EDGES", output.grid.y);
    }
    edges("Z_EDGES", output.grid.z);
    for (const auto& [name, energy] : output.axes) {
        write_axis(writer, name, energy, axis_unit(name), dimension::energy,
                   {{"EKIND", std::string("KINETIC"), ""}});
    }
}

void write_data(FitsWriter& writer, const GridFileOutput& output, const GridFileData& data) {
    const KnownHdu& known = *find_known(data.name);
    const Grid& grid = output.grid;
    const bool rings = grid.geometry == Geometry::rz;
    std::vector<std::size_t> shape{grid.nx()};
    std::string axes = rings ? "R" : "X";
    if (!rings) {
        shape.push_back(grid.ny());
        axes += ",Y";
    }
    shape.push_back(grid.nz());
    axes += ",Z";
    if (!known.first_axis.empty()) {
        shape.insert(shape.begin(), is_vector(known) ? components : output.axes.at(known.first_axis).size());
        axes.insert(0, known.first_axis + ",");
    }
    Header header{{{"BUNIT", data.unit, ""}, {"AXES", axes, "axes of the array, fastest first"}}, {}};
    if (is_vector(known)) {
        header.cards.push_back({"COMPS", std::string(rings ? "R,PHI,Z" : "X,Y,Z"), ""});
    }
    header.cards.insert(header.cards.end(), data.more.begin(), data.more.end());
    writer.image(data.name, shape, data.values, header);
}

} // namespace

std::vector<float> in_unit(const std::vector<float>& cgs, double factor) {
    std::vector<float> values(cgs.size());
    std::transform(cgs.begin(), cgs.end(), values.begin(),
                   [&](float value) { return static_cast<float>(static_cast<double>(value) / factor); });
    return values;
}

std::vector<float> in_unit(const std::vector<std::array<float, 3>>& cgs, double factor) {
    std::vector<float> values;
    values.reserve(components * cgs.size());
    for (const auto& vector : cgs) {
        for (const float value : vector) {
            values.push_back(static_cast<float>(static_cast<double>(value) / factor));
        }
    }
    return values;
}

void write_grid_file(const std::filesystem::path& target, const GridFileOutput& output, bool replace) {
    auto problems = OutputCheck(output).problems();
    for (std::string& line : problems) {
        line.insert(0, target.string() + ": ");
    }
    if (!problems.empty()) {
        throw Error(ErrorKind::output, fmt::format("{}", fmt::join(problems, "\n")));
    }
    FitsWriter writer(target, replace);
    writer.image("", {}, std::vector<float>{}, primary_header(output));
    write_axes(writer, output);
    for (const GridFileData& data : output.data) {
        write_data(writer, output, data);
    }
    writer.commit();
}

} // namespace aureole::grid
