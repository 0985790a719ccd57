#include "inspect_emissivity.hpp"

#include "aureole/base/error.hpp"
#include "aureole/base/units.hpp"
#include "aureole/files/fits_reader.hpp"

#include <fmt/format.h>
#include <fmt/ranges.h>

#include <algorithm>
#include <cctype>
#include <cmath>
#include <optional>

namespace aureole::app {

namespace {

using files::FitsReader;
using files::HduInfo;
using grid::GridFile;

const std::string prefix = "EMISSIVITY_";

bool is_label(const std::string& text) {
    return !text.empty() && std::all_of(text.begin(), text.end(),
                                        [](unsigned char c) { return std::isalnum(c) != 0 || c == '_'; });
}

/// One HDU under examination.
class Check {
  public:
    Check(FitsReader& reader, const GridFile& file, const HduInfo& hdu)
        : reader_(reader), file_(file), hdu_(hdu) {}

    void run() {
        const std::string label = hdu_.name.substr(prefix.size());
        if (!is_label(label)) {
            problem(fmt::format("EXTNAME: found the label '{}', expected letters, digits and _", label));
        }
        if (!hdu_.is_image) {
            problem("found a table, expected an image");
            return;
        }
        if (hdu_.lossy) {
            problem("found lossy (quantised) compression, expected plain or losslessly compressed data");
            return;
        }
        if (check_axes()) {
            check_values();
        }
    }
    std::vector<std::string> lines, problems;
    std::string axis; ///< FREQUENCY or E_GAMMA

  private:
    void problem(const std::string& what) {
        problems.push_back(fmt::format("{}: HDU {}: {}", file_.path, hdu_.name, what));
    }

    /// AXES, NAXISn and BUNIT; true where the values can be read.
    bool check_axes() {
        const bool rings = file_.grid.geometry == grid::Geometry::rz;
        const std::string space = rings ? "R,Z" : "X,Y,Z";
        std::string axes = reader_.text(hdu_, "AXES").value_or("");
        axes.erase(std::remove(axes.begin(), axes.end(), ' '), axes.end());
        if (axes != "FREQUENCY," + space && axes != "E_GAMMA," + space) {
            problem(fmt::format("AXES: found {}, expected 'FREQUENCY,{}' or 'E_GAMMA,{}'",
                                axes.empty() ? "none" : "'" + axes + "'", space, space));
            return false;
        }
        axis = axes.substr(0, axes.find(','));
        check_unit();
        const auto nodes = file_.axes.find(axis);
        if (nodes == file_.axes.end()) {
            problem(fmt::format("AXES: found {}, but there is no usable HDU {}", axis, axis));
            return false;
        }
        std::vector<std::size_t> shape{nodes->second.size(), file_.grid.nx()};
        if (!rings) {
            shape.push_back(file_.grid.ny());
        }
        shape.push_back(file_.grid.nz());
        if (hdu_.shape != shape) {
            problem(fmt::format("NAXISn: found {}, expected {} for AXES '{}'", fmt::join(hdu_.shape, " x "),
                                fmt::join(shape, " x "), axes));
            return false;
        }
        return true;
    }

    void check_unit() {
        const bool radio = axis == "FREQUENCY";
        const std::string example = radio ? "erg s-1 cm-3 Hz-1 sr-1" : "GeV-1 cm-3 s-1 sr-1";
        const auto unit = reader_.text(hdu_, "BUNIT");
        if (!unit) {
            problem(fmt::format("BUNIT: missing, expected a unit such as '{}'", example));
            return;
        }
        unit_ = *unit;
        std::optional<Unit> parsed;
        try {
            parsed = parse_unit(unit_);
        } catch (const Error& error) {
            problem(fmt::format("BUNIT: {}", error.what()));
            return;
        }
        if (parsed->dimension != (radio ? dimension::radio_emissivity : dimension::photon_emissivity)) {
            problem(fmt::format("BUNIT: found '{}', expected a unit such as '{}' beside {}", unit_, example,
                                axis));
        }
    }

    void check_values() {
        constexpr std::size_t portion = 1 << 20;
        std::vector<double> values;
        double least = HUGE_VAL;
        double greatest = -HUGE_VAL;
        std::size_t not_finite = 0;
        std::size_t negative = 0;
        std::string first_bad;
        for (std::size_t first = 0; first < hdu_.values(); first += portion) {
            values.resize(std::min(portion, hdu_.values() - first));
            reader_.read(hdu_, first, values.size(), values.data());
            for (std::size_t v = 0; v < values.size(); ++v) {
                const bool finite = std::isfinite(values[v]);
                if ((!finite || values[v] < 0) && first_bad.empty()) {
                    first_bad = place_of(first + v, values[v]);
                }
                not_finite += finite ? 0 : 1;
                negative += finite && values[v] < 0 ? 1 : 0;
                least = finite ? std::min(least, values[v]) : least;
                greatest = finite ? std::max(greatest, values[v]) : greatest;
            }
        }
        if (not_finite + negative > 0) {
            problem(fmt::format(
                "{}, expected a finite value that is not negative ({} values not finite, {} negative)",
                first_bad, not_finite, negative));
        }
        lines.push_back(fmt::format("{:<18} {}{}  {:.6g} to {:.6g} {}, along {}", hdu_.name,
                                    hdu_.bitpix == -64   ? "float64"
                                    : hdu_.bitpix == -32 ? "float32"
                                                         : "integer",
                                    hdu_.compressed ? " compressed" : "", least, greatest, unit_, axis));
    }

    std::string place_of(std::size_t value, double found) const {
        const std::size_t nodes = hdu_.shape.front();
        return fmt::format("{}, {} {}: found {:g}", cell_text(file_.grid, value / nodes),
                           axis == "FREQUENCY" ? "frequency" : "energy", value % nodes + 1, found);
    }

    FitsReader& reader_;
    const GridFile& file_;
    const HduInfo& hdu_;
    std::string unit_;
};

} // namespace

EmissivityFindings examine_emissivities(const GridFile& file, const std::vector<std::string>& warnings) {
    EmissivityFindings findings;
    std::vector<std::string> settled; // HDUs that the file need not be warned of
    FitsReader reader(file.path);
    for (const HduInfo& hdu : reader.hdus()) {
        if (!hdu.name.starts_with(prefix) || file.has(hdu.name)) {
            continue;
        }
        Check check(reader, file, hdu);
        try {
            check.run();
            if (hdu.is_image && !reader.text(hdu, "DATASUM")) {
                findings.warnings.push_back(
                    fmt::format("{}: no checksum (DATASUM) in HDU {}", file.path, hdu.name));
            }
        } catch (const Error& error) {
            check.problems.emplace_back(error.what());
        }
        settled.push_back(fmt::format("{}: HDU {}: not known", file.path, hdu.name));
        if (!check.axis.empty()) {
            settled.push_back(fmt::format("{}: HDU {}: no data use it", file.path, check.axis));
        }
        findings.lines.insert(findings.lines.end(), check.lines.begin(), check.lines.end());
        findings.problems.insert(findings.problems.end(), check.problems.begin(), check.problems.end());
    }
    std::copy_if(warnings.begin(), warnings.end(), std::back_inserter(findings.warnings),
                 [&](const std::string& warning) {
                     return std::none_of(settled.begin(), settled.end(),
                                         [&](const std::string& text) { return warning.starts_with(text); });
                 });
    return findings;
}

} // namespace aureole::app
