#include "law_tables.hpp"

#include "predict_tables.hpp"

#include "aureole/base/constants.hpp"
#include "aureole/physics/published_spectra.hpp"

#include <fmt/format.h>

#include <algorithm>
#include <cmath>
#include <limits>
#include <string_view>

namespace aureole::app {

namespace {

using emission::Band;
using files::EcsvColumn;
using transport::KindBudget;
using transport::Solution;
using transport::Spectra;

constexpr double megayear = 3.15576e13; // s
constexpr double nothing = std::numeric_limits<double>::quiet_NaN();

std::string anchor_name(transport::AnchorSpec::Kind kind) {
    using Kind = transport::AnchorSpec::Kind;
    switch (kind) {
    case Kind::rate:
        return "rate";
    case Kind::energy_density:
        return "energy_density";
    case Kind::grammage:
        return "grammage";
    case Kind::gamma_luminosity:
        return "gamma_luminosity";
    case Kind::absolute:
        break;
    }
    return "absolute";
}

/// The total map nearest to 1.4 GHz; null without radio maps.
const MapProduct* near_21_cm(const Sky& sky) {
    const MapProduct* nearest = nullptr;
    const auto distance = [](const MapProduct& map) {
        return std::abs(std::log(map.channel.centre() / 1.4e9));
    };
    for (const MapProduct& map : sky.fine.products) {
        if (map.plane.band == Band::radio && map.plane.process == "total" &&
            (nearest == nullptr || distance(map) < distance(*nearest))) {
            nearest = &map;
        }
    }
    return nearest;
}

std::vector<EcsvColumn> laws_table(const std::vector<LawResult>& laws) {
    std::vector<std::string> name, anchor;
    std::vector<double> density_error, gamma_error;
    std::vector<double> factor, rate, over, density, gamma, radio, frequency, power, protons, electrons;
    std::vector<std::vector<double>> grammage(3), age(3), residence(3);
    const auto left = [](const Solution& solution, const char* kind) {
        for (const KindBudget& budget : solution.budgets) {
            if (budget.name == kind && budget.budget.injected.energy > 0) {
                double escaped = 0;
                for (const auto& side : budget.budget.escaped) {
                    escaped += side.energy;
                }
                return escaped / budget.budget.injected.energy;
            }
        }
        return nothing;
    };
    for (const LawResult& law : laws) {
        const auto& report = law.solution.anchor;
        name.push_back(law.name);
        anchor.push_back(anchor_name(report.kind));
        factor.push_back(report.factor);
        rate.push_back(report.rate);
        over.push_back(report.over_empirical);
        density.push_back(report.energy_density / constants::electronvolt);
        gamma.push_back(report.gamma_luminosity);
        density_error.push_back(law.coarse ? std::abs(law.coarse->energy_density - report.energy_density) /
                                                 constants::electronvolt
                                           : nothing);
        gamma_error.push_back(law.coarse ? std::abs(law.coarse->gamma_luminosity - report.gamma_luminosity)
                                         : nothing);
        power.push_back(report.proton_power);
        protons.push_back(left(law.solution, "protons"));
        electrons.push_back(left(law.solution, "electrons"));
        const MapProduct* map = near_21_cm(law.sky);
        radio.push_back(map != nullptr ? map->luminosity : nothing);
        frequency.push_back(map != nullptr ? map->channel.centre() : nothing);
        for (std::size_t r = 0; r < 3; ++r) {
            grammage[r].push_back(report.grammage[r]);
            age[r].push_back(report.age[r] / megayear);
            residence[r].push_back(report.residence[r] / megayear);
        }
    }
    std::vector<EcsvColumn> table{
        {"law", "", "", name},
        {"anchor", "", "how the law was scaled", anchor},
        {"factor", "", "the law was multiplied by it", factor},
        {"rate", "s-1", "scattering rate at 1 GV at the reference place", rate},
        {"over_empirical", "", "that of the law as it stood over 1e-9 s-1", over},
        {"energy_density", "eV cm-3", "cosmic-ray protons at the reference place", density},
        {"energy_density_error", "eV cm-3", "numerical: its change on cells twice as wide", density_error},
        {"gamma_luminosity", "erg s-1", "pion decay, 0.1 to 100 GeV, whole galaxy", gamma},
        {"gamma_luminosity_error", "erg s-1", "numerical: its change on cells twice as wide", gamma_error},
        {"proton_power", "erg s-1", "kinetic energy injected", power},
        {"protons_escaped", "", "share of the injected energy", protons},
        {"electrons_escaped", "", "share of the injected energy", electrons},
        {"radio_luminosity", "erg s-1 Hz-1", "at radio_frequency", radio},
        {"radio_frequency", "Hz", "of the map nearest to 1.4 GHz", frequency}};
    const char* at[3] = {"1gv", "10gv", "100gv"};
    for (std::size_t r = 0; r < 3; ++r) {
        table.push_back(
            {fmt::format("grammage_{}", at[r]), "g cm-2", "of protons at the reference place", grammage[r]});
        table.push_back(
            {fmt::format("age_{}", at[r]), "Myr", "mean, of protons at the reference place", age[r]});
        table.push_back({fmt::format("residence_{}", at[r]), "Myr",
                         "protons in the grid over protons injected per time", residence[r]});
    }
    return table;
}

/// Calls visit(process, erg s-1) for each way energy of one kind leaves.
template <class Visit> void visit_budget(const KindBudget& kind, Visit&& visit) {
    const auto& budget = kind.budget;
    for (std::size_t p = 0; p < kind.processes.size(); ++p) {
        visit(kind.processes[p], budget.lost[p]);
    }
    visit("adiabatic", budget.adiabatic);
    for (std::size_t s = 0; s < kind.sides.size(); ++s) {
        visit("escape: " + kind.sides[s], budget.escaped[s].energy);
    }
    visit("catastrophic", budget.catastrophic.energy);
    visit("cooled below the lowest energy", budget.remaining.energy);
}

std::vector<EcsvColumn> budgets_table(const std::vector<LawResult>& laws) {
    std::vector<std::string> name, kind, process;
    std::vector<double> power, share;
    for (const LawResult& law : laws) {
        for (const KindBudget& of_kind : law.solution.budgets) {
            const double injected = of_kind.budget.injected.energy;
            const auto add = [&](const std::string& what, double value) {
                name.push_back(law.name);
                kind.push_back(of_kind.name);
                process.push_back(what);
                power.push_back(value);
                share.push_back(injected > 0 ? value / injected : nothing);
            };
            add("injected", injected);
            visit_budget(of_kind, add);
            add("defect of the sum", of_kind.budget.defect.energy * injected);
        }
    }
    return {{"law", "", "", name},
            {"particles", "", "", kind},
            {"process", "", "", process},
            {"power", "erg s-1", "kinetic energy, whole galaxy", power},
            {"share", "", "of the injected power", share}};
}

/// Cell of a mirrored or two-sided RZ grid that holds a place.
std::size_t cell_at(const grid::Grid& grid, double radius, double height) {
    const auto find = [](const std::vector<double>& edges, double at) {
        const auto above = std::upper_bound(edges.begin(), edges.end(), at);
        const auto index = std::max<std::ptrdiff_t>(1, above - edges.begin()) - 1;
        return std::min(static_cast<std::size_t>(index), edges.size() - 2);
    };
    return find(grid.x, radius) + grid.nx() * find(grid.z, height);
}

double middle(const std::vector<double>& edges, std::size_t cell) {
    return 0.5 * (edges[cell] + edges[cell + 1]);
}

/// Node of the spectra nearest to a rigidity of 1 GV.
std::size_t node_of_1gv(const Spectra& protons) {
    const double wanted = transport::empirical_rigidity() * constants::elementary_charge /
                          constants::speed_of_light; // momentum
    const auto above = std::lower_bound(protons.momentum.begin(), protons.momentum.end(), wanted);
    const auto place = static_cast<std::size_t>(above - protons.momentum.begin());
    return std::min(place, protons.momentum.size() - 1);
}

/// What is known of a cell beside its pressure.
struct CellState {
    double pressure = 0;
    double free_path = nothing; ///< cm, of protons of 1 GV
    double gas_pressure = nothing;
};

CellState state_of(const Solution& solution, const media::Media& media, bool own_grid, std::size_t cell) {
    CellState state;
    state.pressure = solution.pressure.empty() ? nothing : solution.pressure[cell];
    if (solution.protons && !solution.protons->scattering_rate.empty()) {
        const Spectra& protons = *solution.protons;
        const std::size_t node = node_of_1gv(protons);
        const double rate = static_cast<double>(protons.scattering_rate[cell * protons.energy.size() + node]);
        const auto particle =
            transport::particle_of_momentum(protons.momentum[node], constants::proton_rest_energy);
        state.free_path = rate > 0 ? particle.speed / rate : nothing;
    }
    const auto& gas = media.gas;
    if (own_grid && !gas.temperature.empty() && (!gas.electrons.empty() || !gas.hii.empty())) {
        const auto of = [&](const std::vector<float>& values) {
            return values.empty() ? 0.0 : static_cast<double>(values[cell]);
        };
        const double particles = of(gas.electrons.empty() ? gas.hii : gas.electrons) + of(gas.hii);
        state.gas_pressure = particles * constants::boltzmann * of(gas.temperature);
    }
    return state;
}

std::vector<EcsvColumn>
pressure_table(const std::vector<LawResult>& laws, const grid::Grid& grid, const media::Media& media) {
    std::vector<std::string> name, axis;
    std::vector<double> radius, height, pressure, path, knudsen, over_gas;
    // Along a line of cells first, first + stride, ...; `edges` are those of its axis.
    const auto add = [&](const LawResult& law, const char* along, const std::vector<double>& edges,
                         std::size_t first, std::size_t stride) {
        const grid::Grid& own = law.solution.grid;
        std::vector<CellState> states;
        for (std::size_t n = 0; n + 1 < edges.size(); ++n) {
            states.push_back(state_of(law.solution, media, own == grid, first + n * stride));
        }
        for (std::size_t n = 0; n < states.size(); ++n) {
            const std::size_t cell = first + n * stride;
            const std::size_t before = n > 0 ? n - 1 : n;
            const std::size_t after = std::min(n + 1, states.size() - 1);
            const double slope = std::log(states[after].pressure / states[before].pressure) /
                                 (middle(edges, after) - middle(edges, before));
            name.push_back(law.name);
            axis.emplace_back(along);
            radius.push_back(middle(own.x, cell % own.nx()) / constants::kiloparsec);
            height.push_back(middle(own.z, cell / own.nx()) / constants::kiloparsec);
            pressure.push_back(states[n].pressure / constants::electronvolt);
            path.push_back(states[n].free_path / constants::parsec);
            knudsen.push_back(states[n].free_path * std::abs(slope));
            over_gas.push_back(states[n].pressure / states[n].gas_pressure);
        }
    };
    for (const LawResult& law : laws) {
        const grid::Grid& own = law.solution.grid;
        const std::size_t place =
            cell_at(own, law.solution.anchor.radius, std::max(law.solution.anchor.height, 0.0));
        add(law, "radius", own.x, place - place % own.nx(), 1);
        add(law, "height", own.z, place % own.nx(), own.nx());
    }
    return {{"law", "", "", name},
            {"axis", "",
             "radius: along R at the height of the reference place; height: along z at its radius", axis},
            {"R", "kpc", "centre of the cell", radius},
            {"z", "kpc", "centre of the cell", height},
            {"pressure", "eV cm-3", "of cosmic-ray protons", pressure},
            {"free_path", "pc", "of protons of 1 GV", path},
            {"free_path_over_scale", "",
             "free path over the scale on which the pressure changes along the axis", knudsen},
            {"over_gas_pressure", "", "where a gas temperature is given", over_gas}};
}

std::vector<EcsvColumn> spectra_table(const std::vector<LawResult>& laws) {
    std::vector<std::string> name, species;
    std::vector<double> energy, density;
    const double per_gev = constants::gigaelectronvolt;
    const auto add = [&](const std::string& law, const char* kind, double t, double value) {
        name.push_back(law);
        species.emplace_back(kind);
        energy.push_back(t / constants::gigaelectronvolt);
        density.push_back(value * per_gev);
    };
    for (const LawResult& law : laws) {
        const Solution& solution = law.solution;
        const std::size_t cell =
            cell_at(solution.grid, solution.anchor.radius, std::max(solution.anchor.height, 0.0));
        for (const auto& [kind, spectra] : {std::pair{"protons", &solution.protons},
                                            {"electrons", &solution.electrons},
                                            {"positrons", &solution.positrons}}) {
            for (std::size_t n = 0; *spectra && n < (*spectra)->energy.size(); ++n) {
                const double t = (*spectra)->energy[n];
                const double m =
                    static_cast<double>((*spectra)->weighted[cell * (*spectra)->energy.size() + n]);
                add(law.name, kind, t, m * std::pow(t, -2.5));
            }
        }
    }
    // Valid 3 MeV to 100 GeV, and 5 MeV to 50 GeV.
    for (double t = 0.01; t < 99; t *= 1.2589254117941673) {
        const double erg = t * constants::gigaelectronvolt;
        add("Vos & Potgieter 2015, near the Sun", "protons", erg, physics::vos_potgieter_2015_protons(erg));
        if (t < 50) {
            add("Potgieter et al. 2015, near the Sun", "electrons", erg,
                physics::potgieter_2015_electrons(erg));
        }
    }
    return {{"law", "", "or published spectrum", name},
            {"particles", "", "electrons: with positrons", species},
            {"energy", "GeV", "kinetic", energy},
            {"density", "cm-3 GeV-1", "at the reference place", density}};
}

std::vector<EcsvColumn> heights_table(const std::vector<LawResult>& laws) {
    std::vector<EcsvColumn> all;
    std::vector<std::string> name;
    for (const LawResult& law : laws) {
        auto columns = heights_columns(law.sky.heights);
        if (columns.empty()) {
            continue;
        }
        const auto rows =
            std::visit([](const auto& values) { return values.size(); }, columns.front().values);
        name.insert(name.end(), rows, law.name);
        all = all.empty() ? std::move(columns) : stacked(std::move(all), columns);
    }
    if (!all.empty()) {
        all.insert(all.begin(), {"law", "", "", name});
    }
    return all;
}

/// A column of the energy budget on the terminal: processes that start alike.
struct ShareGroup {
    std::string_view title;
    std::vector<std::string_view> starts;
};

/// The last group takes whatever no other names.
std::vector<ShareGroup> share_groups() {
    return {{"synch.", {"synchrotron"}},
            {"IC", {"inverse compton"}},
            {"brems.", {"bremsstrahlung"}},
            {"ionis.", {"ionisation", "coulomb"}},
            {"pions", {"pions", "catastrophic"}},
            {"adiab.", {"adiabatic"}},
            {"escape", {"escape"}},
            {"cooled", {"cooled"}},
            {"other", {""}}};
}

/// [groups] share of the injected power; empty where nothing was injected.
std::vector<double> group_shares(const KindBudget& kind, const std::vector<ShareGroup>& groups) {
    const double injected = kind.budget.injected.energy;
    if (!(injected > 0)) {
        return {};
    }
    std::vector<double> shares(groups.size(), 0);
    visit_budget(kind, [&](const std::string& process, double power) {
        const auto group = std::find_if(groups.begin(), groups.end(), [&](const ShareGroup& one) {
            return std::any_of(one.starts.begin(), one.starts.end(),
                               [&](std::string_view start) { return process.starts_with(start); });
        });
        shares[static_cast<std::size_t>(group - groups.begin())] += power / injected;
    });
    return shares;
}

/// One line per law and kind of particle, one column per group that has anything to say.
std::vector<std::string> share_lines(const std::vector<LawResult>& laws, std::size_t widest) {
    constexpr double worth_saying = 5e-4;
    const auto groups = share_groups();
    std::vector<bool> used(groups.size(), false);
    for (const LawResult& law : laws) {
        for (const KindBudget& kind : law.solution.budgets) {
            const auto shares = group_shares(kind, groups);
            for (std::size_t g = 0; g < shares.size(); ++g) {
                used[g] = used[g] || std::abs(shares[g]) > worth_saying;
            }
        }
    }
    std::string head = fmt::format("{:<{}} {:<19} {:>9}", "law", widest, "particles", "erg s-1");
    for (std::size_t g = 0; g < groups.size(); ++g) {
        head += used[g] ? fmt::format(" {:>6}", groups[g].title) : "";
    }
    std::vector<std::string> lines{"Where the energy went: injected power and what took it, in % of it",
                                   head};
    for (const LawResult& law : laws) {
        for (const KindBudget& kind : law.solution.budgets) {
            const auto shares = group_shares(kind, groups);
            std::string line = fmt::format("{:<{}} {:<19} {:>9.3g}", law.name, widest, kind.name,
                                           kind.budget.injected.energy);
            for (std::size_t g = 0; g < shares.size(); ++g) {
                if (used[g]) {
                    line += std::abs(shares[g]) > worth_saying ? fmt::format(" {:>6.1f}", 100 * shares[g])
                                                               : fmt::format(" {:>6}", "-");
                }
            }
            lines.push_back(line);
        }
    }
    lines.emplace_back(
        "ionis.: with Coulomb losses; cooled: below the lowest energy; one by one in tables/budgets.ecsv");
    return lines;
}

/// Where the quantities of the laws hold.
std::string reference_place(const std::vector<LawResult>& laws) {
    const auto& first = laws.front().solution.anchor;
    const bool same = std::all_of(laws.begin(), laws.end(), [&](const LawResult& law) {
        return law.solution.anchor.radius == first.radius && law.solution.anchor.height == first.height;
    });
    return same ? fmt::format("at R = {:.3g} kpc, z = {:.3g} kpc", first.radius / constants::kiloparsec,
                              first.height / constants::kiloparsec)
                : std::string("at the reference place of each law");
}

} // namespace

void write_law_tables(const std::vector<LawResult>& laws,
                      const grid::Grid& grid,
                      const media::Media& media,
                      const std::string& hash,
                      files::RunFolder& folder) {
    const std::vector<std::pair<std::string, std::string>> meta{{"scenario_hash", hash}};
    folder.write_text("tables/laws.ecsv", files::ecsv_text(laws_table(laws), meta));
    folder.write_text("tables/budgets.ecsv", files::ecsv_text(budgets_table(laws), meta));
    folder.write_text("tables/pressure.ecsv", files::ecsv_text(pressure_table(laws, grid, media), meta));
    folder.write_text("tables/local_spectra.ecsv", files::ecsv_text(spectra_table(laws), meta));
    const auto heights = heights_table(laws);
    if (laws.size() > 1 && !heights.empty()) {
        folder.write_text("tables/law_heights.ecsv", files::ecsv_text(heights, meta));
    }
}

namespace {

/// Scale heights of one band, a row a law and a column a map.
std::vector<std::string> height_lines(const std::vector<LawResult>& laws,
                                      std::size_t widest,
                                      const char* title,
                                      std::optional<BandHeights> PredictedHeights::*band) {
    const auto& first = laws.front().sky.heights.*band;
    if (!first || !first->problem.empty()) {
        return {};
    }
    std::vector<std::string> lines{"", fmt::format("{} (kpc)", title)};
    std::string head = fmt::format("{:<{}}", "law", widest);
    for (const std::string& label : first->labels) {
        head += fmt::format(" {:>11}", label);
    }
    lines.push_back(head + "  model");
    std::vector<std::string> models;
    for (const LawResult& law : laws) {
        const auto& heights = law.sky.heights.*band;
        if (!heights || !heights->problem.empty()) {
            continue;
        }
        std::string line = fmt::format("{:<{}}", law.name, widest);
        std::string model;
        for (const auto& row : heights->report.rows) {
            if (!row.chosen || row.strip >= 0) {
                continue;
            }
            std::string text;
            for (const auto& component : row.fit.component) {
                text +=
                    fmt::format("{}{:.3g}", text.empty() ? "" : " + ", component.h / constants::kiloparsec);
            }
            line += fmt::format(" {:>11}", text);
            model = profiles::to_string(row.fit.model);
        }
        lines.push_back(line + "  " + model);
        models.push_back(model);
    }
    if (std::any_of(models.begin(), models.end(),
                    [&](const auto& model) { return model != models.front(); })) {
        lines.emplace_back(
            "The profiles of the laws are fitted best by different models, whose heights do not "
            "compare; choose one with heights.models.");
    }
    return lines;
}

} // namespace

std::vector<std::string> law_lines(const std::vector<LawResult>& laws) {
    std::size_t widest = 3;
    for (const LawResult& law : laws) {
        widest = std::max(widest, law.name.size());
    }
    std::vector<std::string> lines{
        "Scattering laws",
        fmt::format("{:<{}} {:>9} {:>9} {:>11} {:>12} {:>9} {:>8} {:>15}", "law", widest, "factor", "nu/s-1",
                    "stated/1e-9", "e_CR/eV cm-3", "X/g cm-2", "age/Myr", "L_gamma/erg s-1"),
    };
    for (const LawResult& law : laws) {
        const auto& report = law.solution.anchor;
        lines.push_back(
            fmt::format("{:<{}} {:>9.4g} {:>9.3g} {:>11.3g} {:>12.3g} {:>9.3g} {:>8.3g} {:>15.3g}", law.name,
                        widest, report.factor, report.rate, report.over_empirical,
                        report.energy_density / constants::electronvolt, report.grammage[1],
                        report.age[1] / megayear, report.gamma_luminosity));
    }
    lines.push_back(
        fmt::format("Protons {}; nu: at 1 GV, as used; stated: nu before the factor, over 1e-9 s-1;",
                    reference_place(laws)));
    lines.emplace_back("X, age: at 10 GV; L_gamma: of pion decay, 0.1 to 100 GeV, whole galaxy");
    lines.emplace_back("");
    const auto shares = share_lines(laws, widest);
    lines.insert(lines.end(), shares.begin(), shares.end());
    if (laws.size() > 1) {
        for (const auto& more :
             {height_lines(laws, widest, "Radio scale heights, synchrotron", &PredictedHeights::radio),
              height_lines(laws, widest, "Gamma-ray scale heights", &PredictedHeights::gamma)}) {
            lines.insert(lines.end(), more.begin(), more.end());
        }
    }
    return lines;
}

bool has_converged(const LawResult& law) {
    const auto& marches = law.solution.marches;
    const bool limiter = std::all_of(marches.begin(), marches.end(),
                                     [](const auto& march) { return march.limiter_not_converged == 0; });
    return limiter && (!law.solution.confinement.needed || law.solution.confinement.converged);
}

std::vector<std::string> law_warnings(const LawResult& law) {
    std::vector<std::string> warnings;
    const Solution& solution = law.solution;
    for (const auto& march : solution.marches) {
        if (march.limiter_not_converged > 0) {
            warnings.push_back(fmt::format("{}: {}: the flux limiter did not converge at {} momenta",
                                           law.name, march.name, march.limiter_not_converged));
        }
    }
    for (const auto& [kind, spectra] :
         {std::pair{"protons", &solution.protons}, {"electrons", &solution.electrons}}) {
        if (*spectra && (*spectra)->counted.at_bohm > 0) {
            warnings.push_back(
                fmt::format("{}: {}: the scattering rate is above the gyrofrequency at {} of {} cells "
                            "and energies; it is held there (Bohm)",
                            law.name, kind, (*spectra)->counted.at_bohm, (*spectra)->counted.rates));
        }
    }
    if (solution.confinement.needed && !solution.confinement.converged) {
        warnings.push_back(
            fmt::format("{}: the waves did not settle: the last iteration changed the spectra by "
                        "{:.2g}",
                        law.name, solution.confinement.change.back()));
    }
    if (solution.confinement.needed) {
        warnings.push_back(
            fmt::format("{}: self-confined solutions far above the Alfven speed are unstable in "
                        "time; the steady one may not be reached",
                        law.name));
    }
    return warnings;
}

} // namespace aureole::app
