#include "aureole/transport/read_scenario.hpp"

#include "read_laws.hpp"
#include "scenario_problems.hpp"

#include "aureole/base/constants.hpp"
#include "aureole/grid/scenario_grid.hpp"
#include "aureole/physics/star_formation.hpp"
#include "aureole/transport/axisymmetric_media.hpp"
#include "aureole/transport/sources.hpp"

#include <fmt/format.h>

#include <algorithm>
#include <array>
#include <optional>
#include <string_view>

namespace aureole::transport {

namespace {

using scenario::Scenario;

constexpr double share_rigidity = 10 * constants::gigaelectronvolt / constants::elementary_charge; // 10 GV

/// The value of a choice by its place in the list of the key.
template <class Enum, std::size_t n>
Enum chosen(const Scenario& scenario, const std::string& key, const std::array<std::string_view, n>& names) {
    return static_cast<Enum>(std::find(names.begin(), names.end(), scenario.text(key)) - names.begin());
}

/// In the order of the enumerations.
constexpr std::array<std::string_view, 3> mass_functions{"salpeter_1955", "kroupa_2001", "chabrier_2003"};
constexpr std::array<std::string_view, 5> edges{"free_escape", "marshak", "one_over_r", "outflow", "closed"};
constexpr std::array<std::string_view, 4> secondary_models{"isospin_kelner_2006", "isospin",
                                                           "kelner_2006_direct", "kelner_2006"};
constexpr std::array<std::string_view, 6> pion_models{"kafexhiu_2014_continuous", "kafexhiu_2014",
                                                      "kafexhiu_2014_geant4",     "kafexhiu_2014_sibyll",
                                                      "kafexhiu_2014_qgsjet",     "kelner_2006"};

SourceShape read_shape(const Scenario& scenario, const std::string& table) {
    SourceShape shape;
    shape.kind = scenario.text(table + ".distribution");
    shape.radius = scenario.quantity(table + ".radius");
    shape.width = scenario.quantity(table + ".width");
    shape.height = scenario.quantity(table + ".height");
    return shape;
}

SourceSpectrum read_spectrum(const Scenario& scenario, const std::string& table, ScenarioProblems& problems) {
    const auto if_positive = [&](const char* key) {
        const double value = scenario.quantity(table + key);
        return value > 0 ? std::optional(value) : std::nullopt;
    };
    SourceSpectrum spectrum;
    spectrum.slope = scenario.number(table + ".slope");
    spectrum.break_rigidity = if_positive(".break_rigidity");
    spectrum.slope_above = scenario.number(table + ".slope_above");
    spectrum.break_smoothness = scenario.number(table + ".break_smoothness");
    spectrum.cutoff_rigidity = if_positive(".cutoff_rigidity");
    spectrum.least_rigidity = scenario.quantity(table + ".least_rigidity");
    if (spectrum.break_rigidity && !scenario.is_set(table + ".slope_above")) {
        problems.add(table + ".break_rigidity",
                     fmt::format("found a break without {}.slope_above, expected a slope there", table));
    }
    // The scenario that a run leaves behind gives every default: those change nothing and pass.
    if (!spectrum.break_rigidity && spectrum.slope_above != SourceSpectrum{}.slope_above) {
        problems.add(table + ".slope_above",
                     fmt::format("found without {}.break_rigidity, expected a rigidity there", table));
    }
    if (spectrum.cutoff_rigidity && !(spectrum.least_rigidity < *spectrum.cutoff_rigidity)) {
        problems.add(table + ".least_rigidity", "found no less than cutoff_rigidity, expected less");
    }
    return spectrum;
}

constexpr std::array<const char*, 4> power_keys{".power", ".supernova_rate", ".star_formation_rate",
                                                ".electron_share"};

/// The power of a population that does not depend on another; 0 for an electron share.
double
read_power(const Scenario& scenario, const std::string& table, bool electrons, ScenarioProblems& problems) {
    std::vector<std::string> given;
    for (const char* key : power_keys) {
        if (scenario.has(table + key)) {
            given.push_back(table + key);
        }
    }
    if (given.size() != 1) {
        const std::string expected =
            fmt::format("expected one of power, supernova_rate{} star_formation_rate{}",
                        electrons ? "," : " and", electrons ? " and electron_share" : "");
        problems.add(given.empty() ? table : given[1],
                     given.empty() ? fmt::format("found no power, {}", expected)
                                   : fmt::format("found beside {}, {}", given[0], expected));
        return 0;
    }
    const auto of_supernovae = [&](double per_year) {
        return physics::cosmic_ray_power(per_year, scenario.number(table + ".fraction"),
                                         scenario.quantity(table + ".supernova_energy"));
    };
    if (scenario.has(table + ".power")) {
        return scenario.quantity(table + ".power");
    }
    if (scenario.has(table + ".supernova_rate")) {
        return of_supernovae(scenario.quantity(table + ".supernova_rate") * constants::year);
    }
    if (scenario.has(table + ".star_formation_rate")) {
        const double formed = scenario.quantity(table + ".star_formation_rate") /
                              unit_factor("solMass yr-1", {.mass = 1, .time = -1});
        const auto function =
            chosen<physics::InitialMassFunction>(scenario, table + ".initial_mass_function", mass_functions);
        return of_supernovae(formed * physics::supernovae_per_solar_mass(function));
    }
    return 0;
}

/// Particles injected at share_rigidity per momentum [s-1 (g cm s-1)-1].
double injected_at_share(const SourceSpec& source, const grid::Grid& grid, double rest_energy) {
    constexpr double momentum = share_rigidity * constants::elementary_charge / constants::speed_of_light;
    constexpr double sharp = 1e-6; // of the edge at the least rigidity
    return injected(source_term(source, grid, rest_energy), momentum, sharp);
}

std::vector<SourceSpec> read_sources(const Scenario& scenario,
                                     const std::string& species,
                                     const grid::Grid& grid,
                                     ScenarioProblems& problems) {
    std::vector<SourceSpec> sources;
    const std::string prefix = "transport." + species + ".source";
    for (const std::string& name : scenario.names(prefix)) {
        const std::string table = prefix + "." + name;
        sources.push_back({.shape = read_shape(scenario, table),
                           .spectrum = read_spectrum(scenario, table, problems),
                           .power = read_power(scenario, table, species == "electrons", problems)});
        if (grid.geometry != grid::Geometry::rz) {
            continue;
        }
        try {
            SourceSpec unit = sources.back();
            unit.power = 1;
            (void)source_term(unit, grid, constants::proton_rest_energy);
        } catch (const Error& error) {
            problems.add(table, error.what());
        }
    }
    return sources;
}

/// Powers of the electron populations that are given as shares, from the protons of all populations.
void set_shares(const Scenario& scenario,
                const grid::Grid& grid,
                TransportSpec& spec,
                ScenarioProblems& problems) {
    const std::string prefix = "transport.electrons.source";
    const auto names = scenario.names(prefix);
    for (std::size_t i = 0; i < spec.electron_sources.size(); ++i) {
        const std::string key = prefix + "." + names[i] + ".electron_share";
        if (!scenario.has(key)) {
            continue;
        }
        if (spec.proton_sources.empty()) {
            problems.add(key, "found without a source of protons to take a share of, expected one, or power");
            continue;
        }
        double protons = 0;
        for (const SourceSpec& source : spec.proton_sources) {
            protons += injected_at_share(source, grid, constants::proton_rest_energy);
        }
        SourceSpec& source = spec.electron_sources[i];
        source.power = 1;
        const double electrons = injected_at_share(source, grid, constants::electron_rest_energy);
        if (!(protons > 0) || !(electrons > 0)) {
            problems.add(key, fmt::format("found no {} at 10 GV, expected some to compare",
                                          protons > 0 ? "electrons" : "protons"));
            continue;
        }
        source.power = scenario.number(key) * protons / electrons;
    }
}

WindSpec read_wind(const Scenario& scenario, const grid::GridFile* file, ScenarioProblems& problems) {
    WindSpec wind;
    wind.kind = scenario.text("transport.wind.kind");
    wind.speed = scenario.quantity("transport.wind.speed");
    wind.height = scenario.quantity("transport.wind.height");
    wind.base = scenario.quantity("transport.wind.base");
    if (wind.kind == "file") {
        if (file == nullptr || !file->has("VELOCITY")) {
            problems.add("transport.wind.kind",
                         "found \"file\" without an HDU VELOCITY in input.grid, expected another kind or a "
                         "grid file with it");
        }
    } else if (wind.kind == "none") {
        if (wind.speed > 0) {
            problems.add("transport.wind.speed",
                         "found a speed without transport.wind.kind, expected a kind such as \"linear\"");
        }
    } else if (!(wind.speed > 0)) {
        problems.add("transport.wind.kind",
                     fmt::format("found \"{}\" without transport.wind.speed, expected a speed such as "
                                 "\"100 km s-1\" there",
                                 wind.kind));
    }
    return wind;
}

void check_sources(const TransportSpec& spec, ScenarioProblems& problems) {
    if (!spec.electrons && !spec.protons) {
        problems.add("transport.species", "found no species to solve for, expected electrons or protons");
    }
    if (spec.protons && spec.proton_sources.empty()) {
        problems.add("transport.species",
                     "found protons without sources, expected [transport.protons.source.NAME] with a power");
    }
    if (spec.electrons && spec.electron_sources.empty() && !spec.secondaries) {
        problems.add("transport.species", "found electrons without sources and secondaries, expected "
                                          "[transport.electrons.source.NAME] with a power");
    }
}

/// The energies of the spectra.
void check_energies(const TransportSpec& spec, const Scenario& scenario, ScenarioProblems& problems) {
    if (!(spec.energy_from < spec.energy_to)) {
        const std::string from = "transport.energy_from";
        const std::string to = "transport.energy_to";
        problems.add(scenario.is_set(from) ? from : to,
                     fmt::format("found energies from {} to {}, expected rising ones",
                                 format_quantity(spec.energy_from, dimension::energy),
                                 format_quantity(spec.energy_to, dimension::energy)));
    }
}

/// Spectra in the file and in the solver, and no word which of them is meant.
void check_file(const TransportSpec& spec, const Scenario& scenario, const grid::GridFile& file) {
    const auto refuse = [&](const char* species, std::initializer_list<const char*> hdus) {
        for (const char* hdu : hdus) {
            if (file.has(hdu) && !scenario.is_set(std::string(species) + ".source")) {
                throw Error(ErrorKind::input,
                            fmt::format("{0}: found spectra in HDU {1}, and [transport] solves for {2}, "
                                        "expected {2}.source = \"transport\" or \"file\" in {3}",
                                        file.path, hdu, species, scenario.file().string()));
            }
        }
    };
    if (spec.electrons) {
        refuse("electrons", {"CR_ELECTRON", "CR_POSITRON", "CR_LEPTON"});
    }
    if (spec.protons) {
        refuse("protons", {"CR_PROTON"});
    }
}

} // namespace

TransportSpec read_transport(const Scenario& scenario) {
    ScenarioProblems problems(scenario);
    const auto solved = [&](const char* species) {
        return scenario.text(std::string(species) + ".source") == "transport";
    };
    TransportSpec spec;
    spec.electrons = solved("electrons");
    spec.protons = solved("protons");
    if (!scenario.has_transport()) {
        throw Error(ErrorKind::scenario,
                    fmt::format("{}: found no [transport], expected one, or a species with source = "
                                "\"transport\"",
                                scenario.file().string()));
    }
    const auto file = grid::scenario_grid_file(scenario);
    // Spectra for a Cartesian grid are solved for on rings around its axis.
    const grid::Grid grid = axisymmetric_grid(file ? file->grid : grid::scenario_grid(scenario));
    spec.secondaries = scenario.boolean("transport.secondaries") && spec.electrons && spec.protons;
    spec.proton_sources = read_sources(scenario, "protons", grid, problems);
    spec.electron_sources = read_sources(scenario, "electrons", grid, problems);
    check_sources(spec, problems);
    if (!problems.any()) {
        set_shares(scenario, grid, spec, problems);
    }
    spec.laws = read_laws(scenario,
                          {.radius = grid.x.back(),
                           .bottom = grid.mirrored ? -grid.z.back() : grid.z.front(),
                           .top = grid.z.back(),
                           .protons = spec.protons},
                          problems);
    spec.wind = read_wind(scenario, file ? &*file : nullptr, problems);
    spec.perpendicular = scenario.number("transport.perpendicular");
    spec.edge_z = chosen<Edge>(scenario, "transport.edge_z", edges);
    spec.edge_r = chosen<Edge>(scenario, "transport.edge_r", edges);
    spec.limiter = scenario.text("transport.limiter");
    spec.streaming = scenario.boolean("transport.streaming");
    spec.energy_from = scenario.quantity("transport.energy_from");
    spec.energy_to = scenario.quantity("transport.energy_to");
    spec.bins_per_decade = scenario.number("transport.bins_per_decade");
    spec.headroom = scenario.number("transport.headroom");
    spec.source_age = scenario.quantity("transport.source_age");
    spec.helium_fraction = scenario.number("emission.helium_fraction");
    spec.nuclear_enhancement = scenario.number("emission.nuclear_enhancement");
    spec.pion_model = chosen<physics::PionModel>(scenario, "emission.pion_model", pion_models);
    spec.secondary_model =
        chosen<physics::SecondaryModel>(scenario, "transport.secondary_model", secondary_models);
    spec.pion_loss_is_catastrophic = scenario.text("transport.pion_loss") == "catastrophic";
    check_energies(spec, scenario, problems);
    problems.report();
    if (file) {
        check_file(spec, scenario, *file);
    }
    return spec;
}

} // namespace aureole::transport
