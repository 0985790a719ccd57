#include "aureole/grid/grid_file.hpp"

#include "hdu_table.hpp"

#include "aureole/base/constants.hpp"
#include "aureole/base/error.hpp"
#include "aureole/base/parallel.hpp"
#include "aureole/base/pool.hpp"
#include "aureole/files/fits_reader.hpp"

#include <fmt/format.h>
#include <fmt/ranges.h>

#include <algorithm>
#include <cmath>
#include <cstdio>
#include <limits>

namespace aureole::grid {

namespace {

using files::FitsReader;
using files::HduInfo;

std::vector<std::string> split(const std::string& text) {
    std::vector<std::string> parts(1);
    for (const char c : text) {
        if (c == ',') {
            parts.emplace_back();
        } else if (c != ' ') {
            parts.back() += c;
        }
    }
    return parts;
}

/// Reads and checks the headers, collecting every problem.
class HeaderCheck {
  public:
    explicit HeaderCheck(const std::string& path) : reader_(path) { file_.path = path; }

    GridFile run() {
        read_format();
        read_edges();
        for (const HduInfo& hdu : reader_.hdus()) {
            if (hdu.number > 1) {
                attempt("", [&] { reader_.find(hdu.name); });
            }
        }
        read_energy_axes();
        for (const HduInfo& hdu : reader_.hdus()) {
            if (hdu.number > 1 && !is_axis(hdu.name)) {
                attempt(hdu.name, [&] { read_data_header(hdu); });
            }
        }
        check_together();
        throw_problems();
        return std::move(file_);
    }

  private:
    void throw_problems() const {
        std::vector<std::string> once; // a doubled HDU is met at several places
        for (const std::string& text : problems_) {
            if (std::find(once.begin(), once.end(), text) == once.end()) {
                once.push_back(text);
            }
        }
        if (!once.empty()) {
            throw Error(ErrorKind::input, fmt::format("{}", fmt::join(once, "\n")));
        }
    }
    void problem(const std::string& hdu, const std::string& what) {
        problems_.push_back(hdu.empty() ? fmt::format("{}: {}", file_.path, what)
                                        : fmt::format("{}: HDU {}: {}", file_.path, hdu, what));
    }
    template <class Body> void attempt(const std::string& hdu, Body&& body) {
        try {
            body();
        } catch (const Error& error) {
            const std::string text = error.what();
            if (text.starts_with(file_.path)) {
                problems_.push_back(text);
            } else {
                problem(hdu, text);
            }
        }
    }

    void read_format() {
        const HduInfo& primary = reader_.hdus().front();
        const auto name = reader_.text(primary, "FMTNAME");
        if (name != "HALO-GRID") {
            throw Error(ErrorKind::input,
                        fmt::format("{}: HDU PRIMARY: FMTNAME: found {}, expected 'HALO-GRID'", file_.path,
                                    name ? fmt::format("'{}'", *name) : "none"));
        }
        file_.version = reader_.text(primary, "FMTVERS").value_or("");
        int major = 0;
        int minor = 0;
        char rest = 0;
        if (std::sscanf(file_.version.c_str(), "%d.%d%c", &major, &minor, &rest) != 2) {
            problem("PRIMARY",
                    fmt::format("FMTVERS: found '{}', expected a version such as '1.0'", file_.version));
        } else if (major != 1) {
            throw Error(
                ErrorKind::input,
                fmt::format(
                    "{}: HDU PRIMARY: FMTVERS: found '{}', expected version 1 (this program reads 1.0)",
                    file_.path, file_.version));
        } else if (minor > 0) {
            file_.warnings.push_back(fmt::format(
                "{}: FMTVERS {} is newer than 1.0; what it added is not read", file_.path, file_.version));
        }
        attempt("PRIMARY", [&] { file_.object = reader_.text(primary, "OBJECT").value_or(""); });
        const auto geometry = reader_.text(primary, "GEOMETRY");
        if (geometry == "RZ" || geometry == "XYZ") {
            file_.grid.geometry = geometry == "RZ" ? Geometry::rz : Geometry::xyz;
        } else {
            problem("PRIMARY", fmt::format("GEOMETRY: found {}, expected 'XYZ' or 'RZ'",
                                           geometry ? fmt::format("'{}'", *geometry) : "none"));
            throw_problems(); // without it nothing else can be judged
        }
        attempt("PRIMARY", [&] { file_.grid.mirrored = reader_.flag(primary, "ZMIRROR").value_or(false); });
        attempt("PRIMARY", [&] { file_.field_parity = reader_.text(primary, "BPARITY").value_or(""); });
        attempt("PRIMARY", [&] { file_.cmb_temperature = reader_.number(primary, "TCMB").value_or(2.7255); });
        if (!file_.field_parity.empty() && file_.field_parity != "EVEN" && file_.field_parity != "ODD") {
            problem("PRIMARY",
                    fmt::format("BPARITY: found '{}', expected 'EVEN' or 'ODD'", file_.field_parity));
        }
        if (!(file_.cmb_temperature > 0)) {
            problem("PRIMARY",
                    fmt::format("TCMB: found {}, expected a temperature above 0 K", file_.cmb_temperature));
        }
    }

    bool is_axis(const std::string& name) const {
        return name.ends_with("_EDGES") || name.starts_with("E_") || name == "EPS_PHOTON" ||
               name == "FREQUENCY";
    }

    static double bunit_factor(const std::string& unit, const Dimension& dimension) {
        try {
            return unit_factor(unit, dimension);
        } catch (Error& error) {
            error.in("BUNIT");
            throw;
        }
    }

    std::vector<double> axis_values(const std::string& name, const Dimension& dimension) {
        const HduInfo* hdu = reader_.find(name);
        if (hdu == nullptr) {
            problem("", fmt::format("HDU {}: missing", name));
            return {};
        }
        if (!hdu->is_image || hdu->shape.size() != 1) {
            problem(name, fmt::format("found {} dimensions, expected an image of one", hdu->shape.size()));
            return {};
        }
        const auto unit = reader_.text(*hdu, "BUNIT");
        if (!unit) {
            problem(name, fmt::format("BUNIT: missing, expected a unit of {}", describe(dimension).name));
            return {};
        }
        const double factor = bunit_factor(*unit, dimension);
        auto values = reader_.read_all(*hdu);
        for (std::size_t i = 0; i < values.size(); ++i) {
            values[i] *= factor;
            if (!std::isfinite(values[i])) {
                problem(name, fmt::format("value {}: found {}, expected a finite number", i + 1, values[i]));
                return {};
            }
            if (i == 0 && !name.ends_with("_EDGES") && !(values[i] > 0)) {
                problem(name, fmt::format("value 1: found {:g} {}, expected more than 0", values[i] / factor,
                                          *unit));
                return {};
            }
            if (i > 0 && !(values[i] > values[i - 1])) {
                problem(name, fmt::format("value {}: found {:g} after {:g} {}, expected rising values", i + 1,
                                          values[i] / factor, values[i - 1] / factor, *unit));
                return {};
            }
        }
        return values;
    }

    void read_edges() {
        const bool rz = file_.grid.geometry == Geometry::rz;
        const std::size_t before = problems_.size();
        attempt(rz ? "R_EDGES" : "X_EDGES",
                [&] { file_.grid.x = axis_values(rz ? "R_EDGES" : "X_EDGES", dimension::length); });
        if (!rz) {
            attempt("Y_EDGES", [&] { file_.grid.y = axis_values("Y_EDGES", dimension::length); });
        }
        attempt("Z_EDGES", [&] { file_.grid.z = axis_values("Z_EDGES", dimension::length); });
        if (problems_.size() == before) {
            attempt("", [&] { validate(file_.grid); });
        }
        if (problems_.size() != before) {
            throw_problems(); // without a grid nothing else can be judged
        }
        warn_of_steps(rz ? "R_EDGES" : "X_EDGES", file_.grid.x);
        warn_of_steps("Y_EDGES", file_.grid.y);
        warn_of_steps("Z_EDGES", file_.grid.z);
    }

    void warn_of_steps(const std::string& name, const std::vector<double>& edges) {
        for (std::size_t i = 2; i < edges.size(); ++i) {
            const double ratio = (edges[i] - edges[i - 1]) / (edges[i - 1] - edges[i - 2]);
            if (ratio > 2.001 || ratio < 0.4998) {
                file_.warnings.push_back(
                    fmt::format("{}: HDU {}: cells {} and {} differ in width by a factor {:.3g}", file_.path,
                                name, i - 1, i, ratio));
                return;
            }
        }
    }

    void read_energy_axes() {
        for (const HduInfo& hdu : reader_.hdus()) {
            if (hdu.name == "FREQUENCY") {
                attempt(hdu.name,
                        [&] { file_.axes[hdu.name] = axis_values(hdu.name, dimension::frequency); });
                continue;
            }
            if (!hdu.name.starts_with("E_") && hdu.name != "EPS_PHOTON") {
                continue;
            }
            attempt(hdu.name, [&] {
                auto values = kinetic_energies(hdu);
                if (values.empty()) {
                    return;
                }
                if (values.size() < 2) {
                    problem(hdu.name, "found one energy node, expected at least 2");
                    return;
                }
                warn_of_few_nodes(hdu.name, values);
                file_.axes[hdu.name] = std::move(values);
            });
        }
    }

    /// Energies of an axis, turned to kinetic ones as EKIND says; empty where there is a problem.
    std::vector<double> kinetic_energies(const HduInfo& hdu) {
        auto values = axis_values(hdu.name, dimension::energy);
        const auto kind = reader_.text(hdu, "EKIND").value_or("KINETIC");
        const bool particles = hdu.name != "EPS_PHOTON" && hdu.name != "E_GAMMA";
        const bool known = kind == "KINETIC" || (particles && kind == "TOTAL") ||
                           (particles && hdu.name != "E_LEPTON" && kind == "PER_NUCLEON");
        if (!known) {
            problem(hdu.name, fmt::format("EKIND: found '{}', expected 'KINETIC'{}", kind,
                                          hdu.name == "E_LEPTON" ? " or 'TOTAL'"
                                          : particles            ? ", 'TOTAL' or 'PER_NUCLEON'"
                                                                 : ""));
            return {};
        }
        if (kind != "TOTAL" || values.empty()) {
            return values;
        }
        constexpr double helium_rest_energy = 3.7273794066 * constants::gigaelectronvolt; // CODATA 2018
        const double rest = hdu.name == "E_LEPTON"   ? constants::electron_rest_energy
                            : hdu.name == "E_HELIUM" ? helium_rest_energy
                                                     : constants::proton_rest_energy;
        for (double& value : values) {
            value -= rest;
        }
        if (!(values.front() > 0)) {
            problem(hdu.name,
                    fmt::format("value 1: found a total energy of {:g} GeV, expected more than the rest "
                                "energy of {:g} GeV",
                                (values.front() + rest) / constants::gigaelectronvolt,
                                rest / constants::gigaelectronvolt));
            return {};
        }
        return values;
    }

    void warn_of_few_nodes(const std::string& name, const std::vector<double>& values) {
        const double per_decade =
            static_cast<double>(values.size() - 1) / std::log10(values.back() / values.front());
        if (per_decade < 4) {
            file_.warnings.push_back(
                fmt::format("{}: HDU {}: found {:.2g} nodes per decade, expected 4 or more; "
                            "spectra between them are guesses",
                            file_.path, name, per_decade));
        }
    }

    std::size_t axis_length(const std::string& axis) const {
        if (axis == "COMP") {
            return 3;
        }
        if (axis == "X" || axis == "R") {
            return file_.grid.nx();
        }
        if (axis == "Y") {
            return file_.grid.ny();
        }
        if (axis == "Z") {
            return file_.grid.nz();
        }
        const auto found = file_.axes.find(axis);
        return found == file_.axes.end() ? 0 : found->second.size();
    }

    void read_data_header(const HduInfo& hdu) {
        const KnownHdu* known = find_known(hdu.name);
        if (known == nullptr) {
            file_.warnings.push_back(fmt::format("{}: HDU {}: not known, ignored", file_.path, hdu.name));
            return;
        }
        if (!hdu.is_image) {
            problem(hdu.name, "found a table, expected an image");
            return;
        }
        if (hdu.lossy) {
            problem(hdu.name,
                    "found lossy (quantised) compression, expected plain or losslessly compressed data");
            return;
        }
        const auto axes_text = reader_.text(hdu, "AXES");
        std::vector<std::string> expected;
        if (!known->first_axis.empty()) {
            expected.push_back(known->first_axis);
        }
        const bool rz = file_.grid.geometry == Geometry::rz;
        expected.push_back(rz ? "R" : "X");
        if (!rz) {
            expected.push_back("Y");
        }
        expected.push_back("Z");
        const std::string expected_text = fmt::format("{}", fmt::join(expected, ","));
        if (!axes_text) {
            problem(hdu.name, fmt::format("AXES: missing, expected '{}'", expected_text));
            return;
        }
        const auto axes = split(*axes_text);
        if (axes != expected) {
            problem(hdu.name, fmt::format("AXES: found '{}', expected '{}'", *axes_text, expected_text));
            return;
        }
        if (hdu.shape.size() != axes.size()) {
            problem(hdu.name, fmt::format("NAXIS: found {}, expected {} for AXES '{}'", hdu.shape.size(),
                                          axes.size(), *axes_text));
            return;
        }
        for (std::size_t a = 0; a < axes.size(); ++a) {
            const std::size_t wanted = axis_length(axes[a]);
            if (wanted == 0) {
                problem(hdu.name,
                        fmt::format("AXES: found {}, but there is no usable HDU {}", axes[a], axes[a]));
            } else if (hdu.shape[a] != wanted) {
                problem(hdu.name, fmt::format("NAXIS{}: found {}, expected {} ({})", a + 1, hdu.shape[a],
                                              wanted, axes[a]));
            }
        }
        const auto unit = reader_.text(hdu, "BUNIT");
        if (!unit) {
            problem(hdu.name, fmt::format("BUNIT: missing, expected {}, as in '{}'",
                                          describe(known->dimension).name, known->example_unit));
        } else {
            attempt(hdu.name, [&] { bunit_factor(*unit, known->dimension); });
        }
        if (known->first_axis == "COMP") {
            const std::string components = rz ? "R,PHI,Z" : "X,Y,Z";
            const auto found = reader_.text(hdu, "COMPS");
            if (!found || split(*found) != split(components)) {
                problem(hdu.name, fmt::format("COMPS: found {}, expected '{}'",
                                              found ? fmt::format("'{}'", *found) : "none", components));
            }
        }
        if (hdu.name == "RADIATION") {
            file_.radiation_includes_cmb = reader_.flag(hdu, "CMBINCL").value_or(false);
        }
        if (!reader_.text(hdu, "DATASUM")) {
            without_checksum_.push_back(hdu.name);
        }
        file_.data.push_back(
            {hdu.name, hdu.number, axes, hdu.shape, unit.value_or(""), hdu.bitpix, hdu.compressed});
    }

    /// Axes that nothing uses are told of, as every HDU that is not read.
    void warn_of_unused_axes() {
        for (const HduInfo& hdu : reader_.hdus()) {
            if (hdu.number == 1 || !is_axis(hdu.name)) {
                continue;
            }
            const bool edges = hdu.name.ends_with("_EDGES");
            const bool used =
                edges ? axis_length(hdu.name.substr(0, hdu.name.size() - 6)) > 0 &&
                            (hdu.name == "Z_EDGES" ||
                             (hdu.name == "R_EDGES") == (file_.grid.geometry == Geometry::rz))
                      : std::any_of(file_.data.begin(), file_.data.end(), [&](const DataHdu& data) {
                            return std::find(data.axes.begin(), data.axes.end(), hdu.name) != data.axes.end();
                        });
            if (!used) {
                file_.warnings.push_back(
                    fmt::format("{}: HDU {}: no data use it, ignored", file_.path, hdu.name));
            }
        }
    }

    void check_together() {
        warn_of_unused_axes();
        if (file_.grid.mirrored && file_.has("B_VECTOR") && file_.field_parity.empty()) {
            problem("B_VECTOR", "found on a mirrored grid (ZMIRROR = T) without BPARITY, expected 'EVEN' or "
                                "'ODD' in the primary header");
        }
        if (file_.has("CR_LEPTON") && (file_.has("CR_ELECTRON") || file_.has("CR_POSITRON"))) {
            problem("CR_LEPTON", "found beside CR_ELECTRON or CR_POSITRON, expected one or the other");
        }
        if (file_.has("CR_ENERGY_LEPTON") && file_.has("CR_ENERGY_ELECTRON")) {
            problem("CR_ENERGY_LEPTON", "found beside CR_ENERGY_ELECTRON, expected one or the other");
        }
        if (!without_checksum_.empty()) {
            file_.warnings.push_back(fmt::format("{}: no checksum (DATASUM) in HDU {}", file_.path,
                                                 fmt::join(without_checksum_, ", ")));
        }
    }

    FitsReader reader_;
    GridFile file_;
    std::vector<std::string> problems_, without_checksum_;
};

} // namespace

const std::vector<KnownHdu>& known_hdus() {
    using namespace dimension;
    static const std::vector<KnownHdu> table{
        {"CR_ELECTRON", "E_LEPTON", spectral_density, "cm-3 GeV-1", false},
        {"CR_POSITRON", "E_LEPTON", spectral_density, "cm-3 GeV-1", false},
        {"CR_LEPTON", "E_LEPTON", spectral_density, "cm-3 GeV-1", false},
        {"CR_PROTON", "E_PROTON", spectral_density, "cm-3 GeV-1", false},
        {"CR_HELIUM", "E_HELIUM", spectral_density, "cm-3 GeV-1", false},
        {"CR_ENERGY_ELECTRON", "", energy_density, "eV cm-3", false},
        {"CR_ENERGY_LEPTON", "", energy_density, "eV cm-3", false},
        {"CR_ENERGY_PROTON", "", energy_density, "eV cm-3", false},
        {"B_VECTOR", "COMP", magnetic_field, "uG", true},
        {"B_TURB", "", magnetic_field, "uG", false},
        {"GAS_HI", "", number_density, "cm-3", false},
        {"GAS_H2", "", number_density, "cm-3", false},
        {"GAS_HII", "", number_density, "cm-3", false},
        {"N_E", "", number_density, "cm-3", false},
        {"T_E", "", temperature, "K", false},
        {"VELOCITY", "COMP", speed, "km s-1", true},
        {"V_TURB", "", speed, "km s-1", false},
        {"L_TURB", "", length, "kpc", false},
        {"RADIATION", "EPS_PHOTON", spectral_density, "cm-3 eV-1", false},
    };
    return table;
}

const KnownHdu* find_known(const std::string& name) {
    const auto& table = known_hdus();
    const auto found =
        std::find_if(table.begin(), table.end(), [&](const KnownHdu& hdu) { return hdu.name == name; });
    return found == table.end() ? nullptr : &*found;
}

bool GridFile::has(const std::string& name) const {
    return std::any_of(data.begin(), data.end(), [&](const DataHdu& hdu) { return hdu.name == name; });
}

const DataHdu& GridFile::hdu(const std::string& name) const {
    const auto found =
        std::find_if(data.begin(), data.end(), [&](const DataHdu& hdu) { return hdu.name == name; });
    if (found == data.end()) {
        throw Error(ErrorKind::input, fmt::format("{}: HDU {}: missing", path, name));
    }
    return *found;
}

GridFile open_grid_file(const std::string& path) {
    return HeaderCheck(path).run();
}

std::string cell_text(const Grid& grid, std::size_t cell) {
    const std::size_t i = cell % grid.nx();
    const std::size_t j = cell / grid.nx() % grid.ny();
    const std::size_t k = cell / grid.plane_cells();
    return grid.geometry == Geometry::rz ? fmt::format("cell (R {}, Z {})", i + 1, k + 1)
                                         : fmt::format("cell (X {}, Y {}, Z {})", i + 1, j + 1, k + 1);
}

namespace {

/// Reads an HDU of `per_cell` values a cell plane by plane, in CGS, with a handle for every thread.
template <class Store>
void read_planes(const GridFile& file,
                 const std::string& name,
                 const Dimension& dimension,
                 bool allow_negative,
                 std::size_t per_cell,
                 const RunContext& context,
                 const Store& store) {
    const DataHdu& data = file.hdu(name);
    const double factor = unit_factor(data.unit, dimension);
    const std::size_t plane = file.grid.plane_cells() * per_cell;
    struct Handle {
        std::unique_ptr<FitsReader> reader;
        std::vector<double> values;
    };
    Pool<Handle> handles([&] {
        return Handle{std::make_unique<FitsReader>(file.path), std::vector<double>(plane)};
    });
    const auto read_plane = [&](Handle& handle, std::size_t k) {
        std::vector<double>& values = handle.values;
        handle.reader->read(*handle.reader->find(name), k * plane, plane, values.data());
        for (std::size_t v = 0; v < plane; ++v) {
            const double value = values[v] * factor;
            if (!std::isfinite(value) || (value < 0 && !allow_negative)) {
                throw Error(ErrorKind::input,
                            fmt::format("{}: HDU {}: {}: found {}, expected a finite value{}", file.path,
                                        name, cell_text(file.grid, (k * plane + v) / per_cell), values[v],
                                        allow_negative ? "" : " that is not negative"));
            }
            if (std::abs(value) > std::numeric_limits<float>::max()) {
                throw Error(ErrorKind::input,
                            fmt::format("{}: HDU {}: {}: found {} {}, expected a value below 3e38 in CGS",
                                        file.path, name, cell_text(file.grid, (k * plane + v) / per_cell),
                                        values[v], data.unit));
            }
            store(k * plane + v, value);
        }
    };
    for_each_block(context, file.grid.nz(),
                   [&](std::size_t k) { handles.with([&](Handle& handle) { read_plane(handle, k); }); });
    FitsReader reader(file.path);
    const HduInfo& hdu = *reader.find(name);
    if (reader.verify_checksum(hdu) == false) {
        throw Error(ErrorKind::input,
                    fmt::format("{}: HDU {}: the checksum does not match the data, expected an intact file",
                                file.path, name));
    }
}

} // namespace

std::vector<float> read_scalar(const GridFile& file,
                               const std::string& hdu,
                               const Dimension& dimension,
                               const RunContext& context) {
    std::vector<float> values(file.grid.stored_cells());
    read_planes(file, hdu, dimension, false, 1, context,
                [&](std::size_t v, double value) { values[v] = static_cast<float>(value); });
    return values;
}

std::vector<std::array<float, 3>> read_vector(const GridFile& file,
                                              const std::string& hdu,
                                              const Dimension& dimension,
                                              const RunContext& context) {
    std::vector<std::array<float, 3>> values(file.grid.stored_cells());
    read_planes(file, hdu, dimension, true, 3, context,
                [&](std::size_t v, double value) { values[v / 3][v % 3] = static_cast<float>(value); });
    return values;
}

std::vector<float> read_spectra_of_cells(const GridFile& file,
                                         const std::string& hdu,
                                         const Dimension& dimension,
                                         const RunContext& context) {
    const std::size_t energies = file.hdu(hdu).shape.front();
    std::vector<float> values(file.grid.stored_cells() * energies);
    read_planes(file, hdu, dimension, false, energies, context,
                [&](std::size_t v, double value) { values[v] = static_cast<float>(value); });
    return values;
}

} // namespace aureole::grid
