#include "inspect_physics.hpp"

#include "aureole/base/constants.hpp"
#include "aureole/base/units.hpp"
#include "aureole/files/fits_reader.hpp"

#include <fmt/format.h>

#include <algorithm>
#include <array>
#include <cmath>

namespace aureole::app {

namespace {

using files::FitsReader;
using files::HduInfo;
using grid::Geometry;
using grid::Grid;
using grid::GridFile;

constexpr double divergence_limit = 0.1; ///< of the mean
constexpr double pressure_limit = 30;

const HduInfo& hdu_of(const FitsReader& reader, const GridFile& file, const std::string& name) {
    return reader.hdus()[static_cast<std::size_t>(file.hdu(name).number) - 1];
}

double width(const std::vector<double>& edges, std::size_t i) {
    return edges[i + 1] - edges[i];
}

/// Value on the face between two cells, on the straight line through their middles.
double between(double low, double high, double width_low, double width_high) {
    return (low * width_high + high * width_low) / (width_low + width_high);
}

/// Three planes of the field about the one in work.
class FieldPlanes {
  public:
    FieldPlanes(FitsReader& reader, const GridFile& file)
        : reader_(reader), hdu_(hdu_of(reader, file, "B_VECTOR")), grid_(file.grid),
          odd_(file.field_parity == "ODD") {
        for (auto& plane : planes_) {
            plane.resize(3 * grid_.plane_cells());
        }
    }
    /// The planes k - 1, k and k + 1 that exist are read, each once, as k rises.
    void move_to(std::size_t k) {
        for (; next_ < std::min(k + 2, grid_.nz()); ++next_) {
            auto& plane = planes_[next_ % 3];
            reader_.read(hdu_, next_ * plane.size(), plane.size(), plane.data());
        }
        middle_ = k;
    }
    double field(std::size_t k, std::size_t cell, std::size_t component) const {
        return planes_[k % 3][3 * cell + component];
    }
    double length(std::size_t k, std::size_t cell) const {
        return std::hypot(field(k, cell, 0), field(k, cell, 1), field(k, cell, 2));
    }
    std::size_t middle() const { return middle_; }
    bool odd() const { return odd_; }

  private:
    FitsReader& reader_;
    const HduInfo& hdu_;
    const Grid& grid_;
    bool odd_;
    std::array<std::vector<double>, 3> planes_;
    std::size_t next_ = 0, middle_ = 0;
};

/// Sums over the neighbours of a cell.
struct Around {
    double divergence = 0, strength = 0, neighbours = 0;
    void add_neighbour(double length) {
        strength += length;
        neighbours += 1;
    }
};

/// Along X, Y or R: `component` of the cells a step of `stride` apart.
void add_along(const FieldPlanes& planes,
               const std::vector<double>& edges,
               std::size_t i,
               std::size_t cell,
               std::size_t stride,
               std::size_t component,
               bool rings,
               Around& around) {
    const std::size_t k = planes.middle();
    const double here = planes.field(k, cell, component);
    const auto face = [&](std::size_t other, std::size_t at) {
        around.add_neighbour(planes.length(k, at));
        return between(here, planes.field(k, at, component), width(edges, i), width(edges, other));
    };
    const double high = face(i + 1, cell + stride);
    const double low = i == 0 ? 0 : face(i - 1, cell - stride); // i = 0: the axis
    if (rings) {
        const double inner = edges[i];
        const double outer = edges[i + 1];
        around.divergence += 2 * (outer * high - inner * low) / (outer * outer - inner * inner);
    } else {
        around.divergence += (high - low) / width(edges, i);
    }
}

void add_vertical(const FieldPlanes& planes, const Grid& grid, std::size_t cell, Around& around) {
    const std::size_t k = planes.middle();
    const double here = planes.field(k, cell, 2);
    const auto face = [&](std::size_t other) {
        around.add_neighbour(planes.length(other, cell));
        return between(here, planes.field(other, cell, 2), width(grid.z, k), width(grid.z, other));
    };
    const double high = face(k + 1);
    // At the plane of a mirrored grid the vertical component turns, or runs through.
    const double low = k > 0 ? face(k - 1) : planes.odd() ? here : 0;
    around.divergence += (high - low) / width(grid.z, k);
}

/// Whether the flux through all faces along an axis of n cells is known.
bool inside(std::size_t i, std::size_t n, bool low_known) {
    return i + 1 < n && (i > 0 || low_known);
}

void add_cell(const FieldPlanes& planes,
              const Grid& grid,
              std::size_t i,
              std::size_t j,
              FieldDivergence& result,
              double& volumes) {
    const std::size_t k = planes.middle();
    const bool rings = grid.geometry == Geometry::rz;
    const std::size_t cell = i + grid.nx() * j;
    Around around;
    around.add_neighbour(planes.length(k, cell));
    double size = width(grid.x, i) * width(grid.z, k);
    double volume = size;
    add_along(planes, grid.x, i, cell, 1, 0, rings, around);
    if (rings) {
        volume *= constants::pi * (grid.x[i] + grid.x[i + 1]);
        size = std::sqrt(size);
    } else {
        add_along(planes, grid.y, j, cell, grid.nx(), 1, false, around);
        volume *= width(grid.y, j);
        size = std::cbrt(volume);
    }
    add_vertical(planes, grid, cell, around);
    const double strength = around.strength / around.neighbours;
    const double part = std::abs(around.divergence) * size / strength;
    if (!(strength > 0) || !std::isfinite(part)) {
        return;
    }
    result.mean += part * volume;
    volumes += volume;
    if (result.cells == 0 || part > result.worst) {
        result.worst = part;
        result.worst_cell = cell + grid.plane_cells() * k;
    }
    ++result.cells;
}

/// A scalar of the file plane by plane, in CGS; zeros where the file has none.
class ScalarPlanes {
  public:
    ScalarPlanes(FitsReader& reader,
                 const GridFile& file,
                 const std::string& name,
                 const Dimension& dimension,
                 std::size_t per_cell = 1)
        : reader_(reader), values_(file.grid.plane_cells() * per_cell, 0.0) {
        if (file.has(name)) {
            hdu_ = &hdu_of(reader, file, name);
            factor_ = unit_factor(file.hdu(name).unit, dimension);
        }
    }
    void move_to(std::size_t k) {
        if (hdu_ != nullptr) {
            reader_.read(*hdu_, k * values_.size(), values_.size(), values_.data());
        }
    }
    double operator[](std::size_t v) const { return values_[v] * factor_; }

  private:
    FitsReader& reader_;
    const HduInfo* hdu_ = nullptr;
    double factor_ = 1;
    std::vector<double> values_;
};

/// Weights that turn densities at the nodes into a pressure: trapezoids in ln T of T (T + 2m)/(T + m) T/3.
std::vector<double> pressure_weights(const std::vector<double>& kinetic, double rest_energy) {
    std::vector<double> weight(kinetic.size(), 0.0);
    for (std::size_t e = 0; e < kinetic.size(); ++e) {
        const double t = kinetic[e];
        const double below = e > 0 ? std::log(t / kinetic[e - 1]) : 0;
        const double above = e + 1 < kinetic.size() ? std::log(kinetic[e + 1] / t) : 0;
        weight[e] = 0.5 * (below + above) * t * t * (t + 2 * rest_energy) / (3 * (t + rest_energy));
    }
    return weight;
}

/// A spectrum of the file and what its values weigh in the pressure.
struct Species {
    const HduInfo* hdu = nullptr;
    std::vector<double> weight;
};

std::vector<Species> species_of(FitsReader& reader, const GridFile& file) {
    constexpr double helium_rest_energy = 3.7273794066 * constants::gigaelectronvolt; // CODATA 2018
    std::vector<Species> all;
    for (const char* name : {"CR_ELECTRON", "CR_POSITRON", "CR_LEPTON", "CR_PROTON", "CR_HELIUM"}) {
        if (!file.has(name)) {
            continue;
        }
        const std::string& axis = file.hdu(name).axes.front();
        std::vector<double> energy = file.axes.at(axis);
        double rest = axis == "E_LEPTON" ? constants::electron_rest_energy : constants::proton_rest_energy;
        double nucleons = 1;
        if (axis == "E_HELIUM") {
            // Per nucleon: a quarter of everything, at a density that counts whole nuclei.
            const bool each = reader.text(*reader.find(axis), "EKIND") == "PER_NUCLEON";
            nucleons = each ? 4 : 1;
            rest = helium_rest_energy / nucleons;
        }
        Species species{&hdu_of(reader, file, name), pressure_weights(energy, rest)};
        const double factor = nucleons * unit_factor(file.hdu(name).unit, dimension::spectral_density);
        for (double& weight : species.weight) {
            weight *= factor;
        }
        all.push_back(std::move(species));
    }
    return all;
}

/// Adds the pressure of one species in the cells of a plane, reading a part of it at a time.
void add_pressure(FitsReader& reader,
                  const Species& species,
                  std::size_t k,
                  std::vector<double>& values,
                  std::vector<double>& pressure) {
    const std::size_t energies = species.weight.size();
    const std::size_t portion = std::max<std::size_t>(1, (std::size_t{1} << 20) / energies);
    for (std::size_t first = 0; first < pressure.size(); first += portion) {
        const std::size_t cells = std::min(portion, pressure.size() - first);
        values.resize(cells * energies);
        reader.read(*species.hdu, (k * pressure.size() + first) * energies, values.size(), values.data());
        for (std::size_t c = 0; c < cells; ++c) {
            double sum = 0;
            for (std::size_t e = 0; e < energies; ++e) {
                sum += species.weight[e] * values[c * energies + e];
            }
            pressure[first + c] += sum;
        }
    }
}

void raise(std::optional<GreatestRatio>& greatest, double above, double below, std::size_t cell) {
    const double ratio = above / below;
    if (below > 0 && std::isfinite(ratio) && (!greatest || ratio > greatest->value)) {
        greatest = GreatestRatio{ratio, cell};
    }
}

void tell_ratio(const GridFile& file,
                const std::optional<GreatestRatio>& ratio,
                const std::string& of_what,
                PhysicsFindings& findings) {
    if (!ratio) {
        return;
    }
    const std::string cell = cell_text(file.grid, ratio->cell);
    findings.lines.push_back(fmt::format("{:<18} at most {:.3g} times that of {}, in {}", "CR pressure",
                                         ratio->value, of_what, cell));
    if (ratio->value > pressure_limit) {
        findings.warnings.push_back(fmt::format(
            "{}: {}: the pressure of the cosmic rays is {:.3g} times that of {}, expected {} or less",
            file.path, cell, ratio->value, of_what, pressure_limit));
    }
}

} // namespace

std::optional<FieldDivergence> field_divergence(const GridFile& file) {
    if (!file.has("B_VECTOR")) {
        return std::nullopt;
    }
    const Grid& grid = file.grid;
    const bool rings = grid.geometry == Geometry::rz;
    FitsReader reader(file.path);
    FieldPlanes planes(reader, file);
    FieldDivergence result;
    double volumes = 0;
    for (std::size_t k = 0; k < grid.nz(); ++k) {
        planes.move_to(k);
        if (!inside(k, grid.nz(), grid.mirrored)) {
            continue;
        }
        for (std::size_t j = 0; j < grid.ny(); ++j) {
            for (std::size_t i = 0; i < grid.nx(); ++i) {
                if (inside(i, grid.nx(), rings) && (rings || inside(j, grid.ny(), false))) {
                    add_cell(planes, grid, i, j, result, volumes);
                }
            }
        }
    }
    if (result.cells == 0) {
        return std::nullopt;
    }
    result.mean /= volumes;
    return result;
}

PressureRatios pressure_ratios(const GridFile& file) {
    FitsReader reader(file.path);
    const auto species = species_of(reader, file);
    const std::string electrons = file.has("N_E") ? "N_E" : "GAS_HII";
    const bool gas = file.has("T_E") && file.has(electrons);
    if (species.empty() || (!gas && !file.has("B_VECTOR") && !file.has("B_TURB"))) {
        return {};
    }
    ScalarPlanes ordered(reader, file, "B_VECTOR", dimension::magnetic_field, 3);
    ScalarPlanes random(reader, file, "B_TURB", dimension::magnetic_field);
    ScalarPlanes density(reader, file, electrons, dimension::number_density);
    ScalarPlanes temperature(reader, file, "T_E", dimension::temperature);
    PressureRatios ratios;
    std::vector<double> values;
    std::vector<double> pressure(file.grid.plane_cells());
    for (std::size_t k = 0; k < file.grid.nz(); ++k) {
        std::fill(pressure.begin(), pressure.end(), 0.0);
        for (const Species& one : species) {
            add_pressure(reader, one, k, values, pressure);
        }
        for (ScalarPlanes* planes : {&ordered, &random, &density, &temperature}) {
            planes->move_to(k);
        }
        for (std::size_t c = 0; c < pressure.size(); ++c) {
            const std::size_t cell = c + k * pressure.size();
            const double field = std::hypot(ordered[3 * c], ordered[3 * c + 1], ordered[3 * c + 2]);
            const double squares = field * field + random[c] * random[c];
            raise(ratios.over_magnetic, pressure[c], squares / (8 * constants::pi), cell);
            raise(ratios.over_gas, pressure[c], 2 * density[c] * constants::boltzmann * temperature[c], cell);
        }
    }
    return ratios;
}

PhysicsFindings examine_physics(const GridFile& file) {
    PhysicsFindings findings;
    if (const auto divergence = field_divergence(file)) {
        const std::string worst = cell_text(file.grid, divergence->worst_cell);
        findings.lines.push_back(
            fmt::format("{:<18} {:.2g} of |B| per cell on average, at most {:.2g}, in {}", "div B",
                        divergence->mean, divergence->worst, worst));
        if (divergence->mean > divergence_limit) {
            findings.warnings.push_back(fmt::format(
                "{}: HDU B_VECTOR: found a divergence of {:.2g} of |B| per cell on average and {:.2g} "
                "in {}, expected {} or less on average",
                file.path, divergence->mean, divergence->worst, worst, divergence_limit));
        }
    }
    const auto ratios = pressure_ratios(file);
    tell_ratio(file, ratios.over_magnetic, "the magnetic field", findings);
    tell_ratio(file, ratios.over_gas, "the ionised gas", findings);
    return findings;
}

} // namespace aureole::app
