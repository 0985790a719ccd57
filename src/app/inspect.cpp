#include "aureole/app/inspect.hpp"

#include "inspect_emissivity.hpp"
#include "inspect_physics.hpp"

#include "aureole/base/constants.hpp"
#include "aureole/base/error.hpp"
#include "aureole/files/fits_reader.hpp"
#include "aureole/grid/grid_file.hpp"
#include "aureole/scenario/scenario.hpp"
#include "aureole/transport/read_scenario.hpp"

#include <fmt/format.h>
#include <fmt/ranges.h>

#include <algorithm>
#include <cmath>
#include <cstdio>
#include <filesystem>
#include <fstream>
#include <sstream>

namespace aureole::app {

namespace {

using files::FitsReader;
using files::HduInfo;

/// Prints one line for each line of `text`.
void print_marked(const char* mark, const std::string& text) {
    std::istringstream lines(text);
    for (std::string line; std::getline(lines, line);) {
        fmt::print("{}: {}\n", mark, line);
    }
}

int count_lines(const std::string& text) {
    return 1 + static_cast<int>(std::count(text.begin(), text.end(), '\n'));
}

int verdict(int problems, ErrorKind kind, bool quiet) {
    if (!quiet) {
        fmt::print("{}\n", problems == 0   ? "no problems found"
                           : problems == 1 ? "1 problem found"
                                           : fmt::format("{} problems found", problems));
    }
    return problems > 0 ? static_cast<int>(kind) : 0;
}

void print_edges(const char* name, const std::vector<double>& edges) {
    if (edges.empty()) {
        return;
    }
    double narrowest = HUGE_VAL;
    double widest = 0;
    for (std::size_t i = 1; i < edges.size(); ++i) {
        narrowest = std::min(narrowest, edges[i] - edges[i - 1]);
        widest = std::max(widest, edges[i] - edges[i - 1]);
    }
    const double kpc = constants::kiloparsec;
    fmt::print("  {:<12} {:>6} cells   {:.6g} to {:.6g} kpc, {:.4g} to {:.4g} kpc wide\n", name,
               edges.size() - 1, edges.front() / kpc, edges.back() / kpc, narrowest / kpc, widest / kpc);
}

void print_axis(const std::string& name, const std::vector<double>& values) {
    const bool frequency = name == "FREQUENCY";
    const bool photon = name == "EPS_PHOTON";
    const double unit = frequency ? 1e9 : photon ? constants::electronvolt : constants::gigaelectronvolt;
    const double decades = std::log10(values.back() / values.front());
    fmt::print("  {:<12} {:>6} nodes   {:.6g} to {:.6g} {}{}, {:.3g} per decade\n", name, values.size(),
               values.front() / unit, values.back() / unit,
               frequency ? "GHz"
               : photon  ? "eV"
                         : "GeV",
               frequency || photon || name == "E_GAMMA" ? "" : " kinetic",
               static_cast<double>(values.size() - 1) / decades);
}

void print_grid_header(const grid::GridFile& file) {
    const bool rings = file.grid.geometry == grid::Geometry::rz;
    fmt::print("HALO-GRID {}: {}{}{}\n", file.version, rings ? "axisymmetric (RZ)" : "Cartesian (XYZ)",
               file.grid.mirrored ? ", z >= 0 stored for both sides" : "",
               file.object.empty() ? "" : ", " + file.object);
    print_edges(rings ? "R" : "X", file.grid.x);
    print_edges("Y", file.grid.y);
    print_edges("Z", file.grid.z);
    for (const auto& [name, values] : file.axes) {
        if (values.size() > 1) {
            print_axis(name, values);
        }
    }
}

void print_ranges(const grid::GridFile& file, const grid::GridFileContents& contents) {
    for (const auto& range : contents.ranges) {
        const auto& data = file.hdu(range.hdu);
        fmt::print(
            "  {:<18} {}{}  {:.6g} to {:.6g} {}{}\n", range.hdu,
            data.bitpix == -64   ? "float64"
            : data.bitpix == -32 ? "float32"
                                 : "integer",
            data.compressed ? " compressed" : "", range.least, range.greatest, range.unit,
            range.total_text.empty() ? "" : fmt::format("; in all {:.4g} {}", range.total, range.total_text));
    }
}

/// Field and pressures of a file whose values are all in order.
PhysicsFindings physics_of(const grid::GridFile& file, std::vector<std::string>& problems) {
    try {
        return problems.empty() ? examine_physics(file) : PhysicsFindings{};
    } catch (const Error& error) {
        problems.emplace_back(error.what());
        return {};
    }
}

int inspect_grid(const std::string& path, bool quiet) {
    grid::GridFile file;
    try {
        file = grid::open_grid_file(path);
    } catch (const Error& error) {
        print_marked("problem", error.what());
        return verdict(count_lines(error.what()), error.kind(), quiet);
    }
    const auto contents = grid::examine(file);
    const auto emissivities = examine_emissivities(file, contents.warnings);
    std::vector<std::string> problems = contents.problems;
    problems.insert(problems.end(), emissivities.problems.begin(), emissivities.problems.end());
    const auto physics = physics_of(file, problems);
    if (!quiet) {
        print_grid_header(file);
        print_ranges(file, contents);
        for (const auto* lines : {&emissivities.lines, &physics.lines}) {
            for (const std::string& line : *lines) {
                fmt::print("  {}\n", line);
            }
        }
        for (const auto* warnings : {&emissivities.warnings, &physics.warnings}) {
            for (const std::string& warning : *warnings) {
                print_marked("warning", warning);
            }
        }
    }
    for (const std::string& problem : problems) {
        print_marked("problem", problem);
    }
    return verdict(static_cast<int>(problems.size()), ErrorKind::input, quiet);
}

/// What the pixels of an image HDU hold.
struct PixelTally {
    double least = HUGE_VAL, greatest = -HUGE_VAL, sum = 0;
    std::size_t blank = 0, infinite = 0;
};

PixelTally tally_pixels(FitsReader& reader, const HduInfo& hdu) {
    constexpr std::size_t portion = 1 << 20;
    PixelTally tally;
    std::vector<double> values;
    for (std::size_t first = 0; first < hdu.values(); first += portion) {
        values.resize(std::min(portion, hdu.values() - first));
        reader.read(hdu, first, values.size(), values.data());
        for (const double value : values) {
            tally.blank += std::isnan(value) ? 1 : 0;
            tally.infinite += std::isinf(value) ? 1 : 0;
            if (std::isfinite(value)) {
                tally.least = std::min(tally.least, value);
                tally.greatest = std::max(tally.greatest, value);
                tally.sum += value;
            }
        }
    }
    return tally;
}

void print_beam(FitsReader& reader, const HduInfo& hdu) {
    const auto major = reader.number(hdu, "BMAJ");
    const auto minor = reader.number(hdu, "BMIN");
    if (major && minor) {
        fmt::print("    beam {:.5g} x {:.5g} arcsec, position angle {:.4g} deg\n", *major * 3600,
                   *minor * 3600, reader.number(hdu, "BPA").value_or(0));
    }
}

/// Prints one HDU of any FITS file; returns the problems.
std::vector<std::string> inspect_hdu(FitsReader& reader, const HduInfo& hdu, bool quiet) {
    std::vector<std::string> problems;
    const auto place = fmt::format("{}: HDU {}", reader.path(), hdu.name);
    const auto problem = [&](const std::string& what) {
        problems.push_back(fmt::format("{}: {}", place, what));
    };
    try {
        const bool has_pixels = hdu.is_image && hdu.values() > 0;
        if (!has_pixels && !quiet) {
            fmt::print("  {:<18} {}\n", hdu.name, hdu.is_image ? "header only" : "table");
        }
        if (has_pixels) {
            const auto tally = tally_pixels(reader, hdu);
            const bool any = tally.least <= tally.greatest;
            if (!quiet) {
                fmt::print("  {:<18} {}  {} {}; {} blank\n", hdu.name, fmt::join(hdu.shape, " x "),
                           any ? fmt::format("{:.6g} to {:.6g}", tally.least, tally.greatest) : "all blank",
                           reader.text(hdu, "BUNIT").value_or("(no unit)"), tally.blank);
                print_beam(reader, hdu);
            }
            if (!any) {
                problem("found no finite value, expected an image");
            }
            if (tally.infinite > 0) {
                problem(fmt::format("found {} infinite values, expected finite ones or blanks (NaN)",
                                    tally.infinite));
            }
        }
        const auto intact = reader.verify_checksum(hdu);
        if (intact == false) {
            problem("the checksum does not match the data, expected an intact file");
        }
    } catch (const Error& error) {
        problems.emplace_back(error.what());
    }
    return problems;
}

int inspect_fits(const std::string& path, bool quiet) {
    FitsReader reader(path);
    if (reader.text(reader.hdus().front(), "FMTNAME")) {
        return inspect_grid(path, quiet);
    }
    if (!quiet) {
        fmt::print("FITS file, {} HDUs\n", reader.hdus().size());
    }
    std::vector<std::string> problems;
    for (const HduInfo& hdu : reader.hdus()) {
        const auto found = inspect_hdu(reader, hdu, quiet);
        problems.insert(problems.end(), found.begin(), found.end());
    }
    for (const std::string& problem : problems) {
        print_marked("problem", problem);
    }
    return verdict(static_cast<int>(problems.size()), ErrorKind::input, quiet);
}

std::string joined_quantities(const std::vector<double>& values, const Dimension& dimension) {
    std::vector<std::string> texts;
    for (const double value : values) {
        texts.push_back(format_quantity(value, dimension));
    }
    return texts.empty() ? "none" : fmt::format("{}", fmt::join(texts, ", "));
}

void print_scenario(const scenario::Scenario& scenario) {
    fmt::print("scenario: {}\n",
               scenario.text("run.title").empty() ? scenario.text("run.object") : scenario.text("run.title"));
    if (scenario.path("input.grid").empty()) {
        const bool rings = scenario.text("grid.geometry") == "RZ";
        const auto across = rings ? scenario.quantity("grid.radius") : scenario.quantity("grid.half_width");
        fmt::print("  grid       {} {} x {} cells, out to {} and {} high\n", scenario.text("grid.geometry"),
                   scenario.integer(rings ? "grid.cells_r" : "grid.cells_xy"),
                   scenario.integer("grid.cells_z"), format_quantity(across, dimension::length),
                   format_quantity(scenario.quantity("grid.height"), dimension::length));
    } else {
        fmt::print("  grid       {}\n", scenario.path("input.grid").string());
    }
    fmt::print("  electrons  {}, protons {}\n", scenario.text("electrons.source"),
               scenario.text("protons.source"));
    fmt::print("  radio      {}\n",
               joined_quantities(scenario.quantities("radio.frequencies"), dimension::frequency));
    const auto bands = scenario.quantities("gamma.band_edges");
    fmt::print(
        "  gamma      {}{}\n", bands.empty() ? "" : "bands between ",
        joined_quantities(bands.empty() ? scenario.quantities("gamma.energies") : bands, dimension::energy));
    fmt::print("  view       inclination {}, distance {}\n",
               format_quantity(scenario.quantity("view.inclination"), dimension::angle),
               format_quantity(scenario.quantity("view.distance"), dimension::length));
}

void print_transport(const transport::TransportSpec& spec) {
    std::string laws;
    for (const auto& law : spec.laws) {
        laws += (laws.empty() ? "" : ", ") + law.name + " (" + law.law.name + ")";
    }
    const auto power = [](const std::vector<transport::SourceSpec>& sources) {
        double sum = 0;
        for (const auto& source : sources) {
            sum += source.power;
        }
        return sum;
    };
    fmt::print("  laws       {}\n", laws);
    fmt::print("  sources    protons {:.3g} erg/s, electrons {:.3g} erg/s\n", power(spec.proton_sources),
               power(spec.electron_sources));
}

int inspect_scenario(const std::string& path, bool quiet) {
    try {
        const auto scenario = scenario::load(path, {});
        if (!quiet) {
            print_scenario(scenario);
        }
        if (scenario.has_transport()) {
            const auto spec = transport::read_transport(scenario);
            if (!quiet) {
                print_transport(spec);
            }
        }
        const auto grid_path = scenario.path("input.grid");
        if (!grid_path.empty()) {
            const auto file = grid::open_grid_file(grid_path.string());
            if (!quiet) {
                print_grid_header(file);
            }
        }
    } catch (const Error& error) {
        print_marked("problem", error.what());
        return verdict(count_lines(error.what()), error.kind(), quiet);
    }
    return verdict(0, ErrorKind::scenario, quiet);
}

enum class Content { fits, text, other };

Content content_of(const std::string& path) {
    std::error_code failure;
    const auto kind = std::filesystem::status(path, failure);
    if (!std::filesystem::exists(kind)) {
        throw Error(ErrorKind::input, fmt::format("{}: not found, expected a FITS file or a scenario", path));
    }
    if (!std::filesystem::is_regular_file(kind)) {
        throw Error(ErrorKind::input,
                    fmt::format("{}: found {}, expected a FITS file or a scenario", path,
                                std::filesystem::is_directory(kind) ? "a folder" : "no regular file"));
    }
    std::ifstream stream(path, std::ios::binary);
    if (!stream) {
        throw Error(ErrorKind::input, fmt::format("{}: cannot be read", path));
    }
    std::string start(4096, '\0');
    stream.read(start.data(), static_cast<std::streamsize>(start.size()));
    start.resize(static_cast<std::size_t>(stream.gcount()));
    const bool packed = start.starts_with("\x1f\x8b"); // gzip, which the FITS reader unpacks
    if (packed || start.starts_with("SIMPLE")) {
        return Content::fits;
    }
    return start.find('\0') == std::string::npos && !start.empty() ? Content::text : Content::other;
}

} // namespace

int inspect(const std::string& file, bool quiet, const RunContext& context) {
    context.check_interrupt();
    int code = 0;
    switch (content_of(file)) {
    case Content::fits:
        code = inspect_fits(file, quiet);
        break;
    case Content::text:
        code = inspect_scenario(file, quiet);
        break;
    default:
        throw Error(
            ErrorKind::input,
            fmt::format("{}: found neither a FITS file nor text, expected a FITS file or a scenario", file));
    }
    std::fflush(stdout);
    return code;
}

} // namespace aureole::app
