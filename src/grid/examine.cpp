#include "hdu_table.hpp"

#include "aureole/base/constants.hpp"
#include "aureole/base/error.hpp"
#include "aureole/files/fits_reader.hpp"
#include "aureole/grid/grid_file.hpp"

#include <fmt/format.h>

#include <algorithm>
#include <cmath>

namespace aureole::grid {

namespace {

using files::FitsReader;
using files::HduInfo;

/// What is seen of one HDU while its planes go by.
struct Tally {
    std::size_t not_finite = 0, negative = 0, empty_cells = 0, cells = 0;
    std::string first_bad; ///< "cell (R 3, Z 5): found -1"
    double least = HUGE_VAL, greatest = -HUGE_VAL;
    std::vector<double> volume_sum; ///< [values of a cell] integral over the volume, in the file's unit cm3

    void add_value(double value, bool any_sign, const auto& place) {
        const bool finite = std::isfinite(value);
        const bool bad = !finite || (value < 0 && !any_sign);
        if (bad && first_bad.empty()) {
            first_bad = fmt::format("{}: found {}", place(), value);
        }
        not_finite += finite ? 0 : 1;
        negative += finite && bad ? 1 : 0;
        if (finite) {
            least = std::min(least, value);
            greatest = std::max(greatest, value);
        }
    }
};

double length_of(const double* components) {
    return std::hypot(components[0], components[1], components[2]);
}

/// Reads the HDU once, plane by plane.
Tally tally_of(FitsReader& reader, const GridFile& file, const HduInfo& hdu, const KnownHdu& known) {
    const bool vector = known.first_axis == "COMP";
    const std::size_t per_cell = known.first_axis.empty() ? 1 : hdu.shape.front();
    const std::size_t cells = file.grid.plane_cells();
    const auto volume = cell_volumes(file.grid);
    std::vector<double> values(cells * per_cell);
    Tally tally;
    tally.volume_sum.assign(per_cell, 0.0);
    for (std::size_t k = 0; k < file.grid.nz(); ++k) {
        reader.read(hdu, k * values.size(), values.size(), values.data());
        for (std::size_t c = 0; c < cells; ++c) {
            const std::size_t cell = k * cells + c;
            const double* of_cell = values.data() + c * per_cell;
            const auto cell_name = [&] { return cell_text(file.grid, cell); };
            bool empty = true;
            if (vector) {
                tally.add_value(length_of(of_cell), true, cell_name);
                continue;
            }
            for (std::size_t i = 0; i < per_cell; ++i) {
                tally.add_value(of_cell[i], known.any_sign, [&] {
                    return per_cell > 1 ? fmt::format("{}, energy node {}", cell_name(), i + 1) : cell_name();
                });
                empty = empty && of_cell[i] == 0;
                tally.volume_sum[i] += of_cell[i] * volume[cell];
            }
            tally.empty_cells += empty ? 1 : 0;
            ++tally.cells;
        }
    }
    return tally;
}

/// Integral of y(x) x dx through the points as power laws between them; 0 where an end is 0.
double energy_integral(const std::vector<double>& x, const std::vector<double>& y) {
    double sum = 0;
    for (std::size_t i = 0; i + 1 < x.size(); ++i) {
        if (!(y[i] > 0) || !(y[i + 1] > 0)) {
            continue;
        }
        const double log_step = std::log(x[i + 1] / x[i]);
        const double from = x[i] * x[i] * y[i];
        const double to = x[i + 1] * x[i + 1] * y[i + 1];
        const double log_ratio = std::log(to / from);
        sum += log_step * (std::abs(log_ratio) < 1e-6 ? 0.5 * (from + to) : (to - from) / log_ratio);
    }
    return sum;
}

void add_total(const GridFile& file,
               const KnownHdu& known,
               const Tally& tally,
               double factor,
               GridFileContents::Range& range) {
    if (known.first_axis.starts_with("E_")) {
        auto spectrum = tally.volume_sum;
        for (double& value : spectrum) {
            value *= factor;
        }
        range.total = energy_integral(file.axes.at(known.first_axis), spectrum);
        range.total_text = "erg";
    } else if (known.dimension == dimension::energy_density) {
        range.total = tally.volume_sum.front() * factor;
        range.total_text = "erg";
    } else if (known.dimension == dimension::number_density) {
        range.total = tally.volume_sum.front() * factor;
        range.total_text = known.name == "N_E" ? "electrons" : "H nuclei";
    }
}

void examine_hdu(FitsReader& reader, const GridFile& file, const DataHdu& data, GridFileContents& contents) {
    const auto place = fmt::format("{}: HDU {}", file.path, data.name);
    const KnownHdu& known = *find_known(data.name);
    const HduInfo& hdu = reader.hdus()[static_cast<std::size_t>(data.number) - 1];
    const Tally tally = tally_of(reader, file, hdu, known);
    if (tally.not_finite + tally.negative > 0) {
        contents.problems.push_back(fmt::format(
            "{}: {}, expected a finite value{} ({} values not finite, {} negative)", place, tally.first_bad,
            known.any_sign ? "" : " that is not negative", tally.not_finite, tally.negative));
    }
    if (known.first_axis.starts_with("E_") && 2 * tally.empty_cells > tally.cells) {
        contents.warnings.push_back(
            fmt::format("{}: the spectrum is zero in {} of {} cells", place, tally.empty_cells, tally.cells));
    }
    GridFileContents::Range range;
    range.hdu = data.name;
    range.unit = data.unit;
    range.least = tally.least;
    range.greatest = tally.greatest;
    add_total(file, known, tally, unit_factor(data.unit, known.dimension), range);
    contents.ranges.push_back(std::move(range));
}

} // namespace

GridFileContents examine(const GridFile& file) {
    GridFileContents contents;
    contents.warnings = file.warnings;
    FitsReader reader(file.path);
    for (const DataHdu& data : file.data) {
        try {
            examine_hdu(reader, file, data, contents);
        } catch (const Error& error) {
            contents.problems.emplace_back(error.what());
        }
    }
    for (const HduInfo& hdu : reader.hdus()) {
        try {
            if (reader.verify_checksum(hdu) == false) {
                contents.problems.push_back(
                    fmt::format("{}: HDU {}: the checksum does not match the data, expected an intact file",
                                file.path, hdu.name));
            }
        } catch (const Error& error) {
            contents.problems.emplace_back(error.what());
        }
    }
    return contents;
}

} // namespace aureole::grid
