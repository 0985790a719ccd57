#include "aureole/app/spectra_command.hpp"

#include "spectra_file.hpp"

#include "aureole/base/constants.hpp"
#include "aureole/base/error.hpp"
#include "aureole/files/pending.hpp"
#include "aureole/grid/scenario_grid.hpp"
#include "aureole/spectra/basis.hpp"
#include "aureole/transport/law_catalogue.hpp"
#include "aureole/transport/read_scenario.hpp"

#include <fmt/format.h>
#include <fmt/ranges.h>

#include <algorithm>
#include <array>
#include <optional>
#include <string_view>

namespace aureole::app {

namespace {

namespace fs = std::filesystem;
using transport::KindBudget;
using transport::NamedLaw;
using transport::Solution;

constexpr double megayear = 1e6 * constants::year;

/// The law by that name; the only one if there is no name.
const NamedLaw& chosen_law(const std::vector<NamedLaw>& laws, const std::string& name) {
    if (name.empty() && laws.size() == 1) {
        return laws.front();
    }
    std::vector<std::string_view> names;
    for (const NamedLaw& law : laws) {
        if (law.name == name) {
            return law;
        }
        names.push_back(law.name);
    }
    const std::string all = fmt::format("{}", fmt::join(names, ", "));
    throw Error(ErrorKind::usage,
                name.empty() ? fmt::format("--law: found none, expected one of {}", all)
                             : fmt::format("--law: found \"{}\", expected one of {}; the nearest is \"{}\"",
                                           name, all, transport::nearest_word(name, names)));
}

std::vector<fs::path> inputs_of(const scenario::Scenario& scenario) {
    std::vector<fs::path> inputs{scenario.file(), scenario.path("input.grid")};
    for (const std::string& law : scenario.names("law")) {
        inputs.push_back(scenario.path("law." + law + ".table"));
    }
    std::erase_if(inputs, [](const fs::path& path) { return path.empty(); });
    return inputs;
}

/// Before the work: whether the file may be written.
void check_target(const fs::path& target, bool force, const scenario::Scenario& scenario) {
    for (const fs::path& input : inputs_of(scenario)) {
        std::error_code failure;
        if (fs::equivalent(target, input, failure) ||
            fs::weakly_canonical(target, failure) == fs::weakly_canonical(input, failure)) {
            throw Error(ErrorKind::output,
                        fmt::format("{}: is an input of this run, expected another name for the results",
                                    target.string()));
        }
    }
    const files::PendingFile probe(target, force);
}

void check_solution(const Solution& solution) {
    if (!solution.confinement.converged) {
        std::string open;
        for (const auto& march : solution.marches) {
            if (march.limiter_not_converged > 0) {
                open += fmt::format("{}, {} momenta; ", march.name, march.limiter_not_converged);
            }
        }
        const auto& change = solution.confinement.change;
        throw Error(ErrorKind::accuracy,
                    fmt::format("law '{}': scattering and cosmic rays did not settle ({}last change {:.2g}); "
                                "no file is written",
                                solution.law, open, change.empty() ? 0.0 : change.back()));
    }
    constexpr double closed = 1e-6;
    for (const KindBudget& kind : solution.budgets) {
        const double defect =
            std::max(std::abs(kind.budget.defect.number), std::abs(kind.budget.defect.energy));
        if (!(defect <= closed)) {
            throw Error(ErrorKind::accuracy,
                        fmt::format("law '{}': the budget of {} misses {:.2g} of what was injected, expected "
                                    "less than {:g}; no file is written",
                                    solution.law, kind.name, defect, closed));
        }
    }
}

/// erg cm-3 of a kind of particle at the place of the anchor, over the energies of its spectra.
double energy_density_at(const Solution& solution, const transport::Spectra& spectra) {
    const std::size_t nodes = spectra.energy.size();
    const spectra::Basis basis(spectra.energy);
    const auto weights = transport::integral_weights(basis, [](double t) { return t; });
    const std::size_t cells = spectra.weighted.size() / nodes;
    std::vector<double> density(cells);
    for (std::size_t v = 0; v < spectra.weighted.size(); ++v) {
        density[v / nodes] += weights[v % nodes] * static_cast<double>(spectra.weighted[v]);
    }
    const auto around =
        transport::surroundings(solution.grid, solution.anchor.radius, solution.anchor.height);
    return transport::interpolated(density, around);
}

std::string in_kpc(double length) {
    return fmt::format("{:.4g} kpc", length / constants::kiloparsec);
}

void add_anchor(const NamedLaw& law, const Solution& solution, std::vector<std::string>& lines) {
    const auto& anchor = solution.anchor;
    lines.push_back(fmt::format("Law {} ({}), anchor {}, factor {:.4g}", law.name, law.law.name,
                                anchor_text(anchor.kind), anchor.factor));
    lines.push_back(fmt::format("At R = {}, z = {}", in_kpc(anchor.radius), in_kpc(anchor.height)));
    lines.push_back(fmt::format("  scattering rate  {:.4g} s-1 at 1 GV, {:.3g} of the empirical 1e-9 s-1{}",
                                anchor.rate, anchor.rate / transport::empirical_rate,
                                anchor.factor == 1 ? ""
                                                   : fmt::format("\n                   ({:.3g} of it before "
                                                                 "the anchor)",
                                                                 anchor.over_empirical)));
}

void add_energy_densities(const Solution& solution, std::vector<std::string>& lines) {
    const auto add = [&](const char* name, double density) {
        lines.push_back(
            fmt::format("  {:<16} {:.4g} eV cm-3 of energy", name, density / constants::electronvolt));
    };
    if (solution.protons) {
        add("protons", solution.anchor.energy_density);
    }
    if (solution.electrons) {
        const double all = energy_density_at(solution, *solution.electrons);
        const double positrons = solution.positrons ? energy_density_at(solution, *solution.positrons) : 0;
        add("electrons", all - positrons);
        if (solution.positrons) {
            add("positrons", positrons);
        }
    }
}

void add_protons(const Solution& solution, std::vector<std::string>& lines) {
    if (!solution.protons) {
        return;
    }
    const auto& anchor = solution.anchor;
    const auto row = [&](const char* name, const std::array<double, 3>& values, double unit) {
        lines.push_back(fmt::format("  {:<22} {:>10.4g} {:>10.4g} {:>10.4g}", name, values[0] / unit,
                                    values[1] / unit, values[2] / unit));
    };
    lines.emplace_back("Protons of                     1 GV      10 GV     100 GV");
    row("grammage there, g/cm2", anchor.grammage, 1);
    row("age there, Myr", anchor.age, megayear);
    row("residence, Myr", anchor.residence, megayear);
    lines.push_back(fmt::format("Gamma rays of the galaxy, 0.1 to 100 GeV from pion decay: {:.4g} erg/s,",
                                anchor.gamma_luminosity));
    lines.push_back(
        fmt::format("  {:.3g} of the power of the protons", anchor.gamma_luminosity / anchor.proton_power));
}

/// "inverse compton: dust" counts as "inverse compton".
std::string process_group(const std::string& process) {
    return process.substr(0, process.find(": "));
}

/// A row for each way that energy went, a column for each kind.
class BudgetTable {
  public:
    explicit BudgetTable(const std::vector<KindBudget>& kinds) : kinds_(kinds) {}

    std::vector<std::string> lines() {
        line("Power, erg/s", [](const KindBudget& kind) { return kind.name; });
        numbers("injected", [](const KindBudget& kind) { return kind.budget.injected.energy; });
        for (const std::string& process : names([](const KindBudget& kind) {
                 auto groups = kind.processes;
                 std::transform(groups.begin(), groups.end(), groups.begin(), process_group);
                 return groups;
             })) {
            numbers("  " + process, [&](const KindBudget& kind) {
                double sum = 0;
                for (std::size_t i = 0; i < kind.processes.size(); ++i) {
                    sum += process_group(kind.processes[i]) == process ? kind.budget.lost[i] : 0;
                }
                return sum;
            });
        }
        numbers("  adiabatic", [](const KindBudget& kind) { return kind.budget.adiabatic; });
        for (const std::string& side : names([](const KindBudget& kind) { return kind.sides; })) {
            numbers("  escaped, " + side, [&](const KindBudget& kind) {
                const auto found = std::find(kind.sides.begin(), kind.sides.end(), side);
                return found == kind.sides.end()
                           ? 0
                           : kind.budget.escaped[static_cast<std::size_t>(found - kind.sides.begin())].energy;
            });
        }
        numbers("  catastrophic", [](const KindBudget& kind) { return kind.budget.catastrophic.energy; });
        numbers("  cooled below", [](const KindBudget& kind) { return kind.budget.remaining.energy; });
        line("not accounted for", [](const KindBudget& kind) {
            return fmt::format("{:.1e}", std::abs(kind.budget.defect.energy));
        });
        return std::move(lines_);
    }

  private:
    template <class Names> std::vector<std::string> names(const Names& of) const {
        std::vector<std::string> all;
        for (const KindBudget& kind : kinds_) {
            for (const std::string& name : of(kind)) {
                if (std::find(all.begin(), all.end(), name) == all.end()) {
                    all.push_back(name);
                }
            }
        }
        return all;
    }

    template <class Text> void line(const std::string& head, const Text& text) {
        std::string row = fmt::format("{:<23}", head);
        for (const KindBudget& kind : kinds_) {
            std::string cell = text(kind);
            cell = cell == "secondary electrons" ? "secondary e-" : cell;
            row += fmt::format(" {:>13}", cell);
        }
        lines_.push_back(row);
    }

    template <class Number> void numbers(const std::string& head, const Number& number) {
        if (std::any_of(kinds_.begin(), kinds_.end(), [&](const auto& kind) { return number(kind) != 0; })) {
            line(head, [&](const KindBudget& kind) {
                const double value = number(kind);
                return value == 0 ? std::string("-") : fmt::format("{:.4g}", value);
            });
        }
    }

    const std::vector<KindBudget>& kinds_;
    std::vector<std::string> lines_;
};

std::vector<std::string> warnings_of(const Solution& solution, double source_age) {
    std::vector<std::string> warnings;
    const auto warn = [&](const std::string& text) {
        warnings.push_back(fmt::format("law '{}': {}", solution.law, text));
    };
    constexpr double worth_saying = 0.01;
    for (const auto& march : solution.marches) {
        if (march.limited_energy > worth_saying) {
            warn(fmt::format("{}: {:.2g} % of the energy is where diffusion would outrun the particles (flux "
                             "limited)",
                             march.name, 100 * march.limited_energy));
        }
    }
    const auto& anchor = solution.anchor;
    for (std::size_t i = 0; i < anchor.age.size() && source_age > 0; ++i) {
        if (anchor.age[i] > source_age) {
            warn(fmt::format("protons of {:.3g} GV are {:.3g} Myr old on average, older than the sources "
                             "({:.3g} Myr): their spectra are not steady",
                             anchor.rigidity[i] / transport::empirical_rigidity(), anchor.age[i] / megayear,
                             source_age / megayear));
            break;
        }
    }
    if (solution.confinement.needed) {
        warn(
            "self-confined solutions far above the Alfven speed are unstable in time; the steady one may not "
            "be reached");
    }
    for (const KindBudget& kind : solution.budgets) {
        constexpr double much = 0.05;
        if (kind.power > 0 && kind.inside < 1 - much) {
            warn(fmt::format("{}: {:.2g} % of a source lies outside the grid; all its power goes into what "
                             "lies inside",
                             kind.name, 100 * (1 - kind.inside)));
        }
    }
    return warnings;
}

std::vector<std::string>
summary_of(const SolvedGalaxy& galaxy, const SpectraFile& file, const fs::path& path) {
    const Solution& solution = galaxy.solution;
    std::vector<std::string> lines;
    add_anchor(galaxy.law, solution, lines);
    add_energy_densities(solution, lines);
    add_protons(solution, lines);
    const auto budget = BudgetTable(solution.budgets).lines();
    lines.insert(lines.end(), budget.begin(), budget.end());
    if (file.too_small > 0) {
        lines.push_back(
            fmt::format("{} densities below 1.2e-38 cm-3 GeV-1 are written as 0", file.too_small));
    }
    std::vector<std::string> names;
    for (const auto& data : file.output.data) {
        names.push_back(data.name);
    }
    lines.push_back(fmt::format("{}: {}", path.string(), fmt::join(names, ", ")));
    return lines;
}

} // namespace

SpectraResult
write_spectra(const scenario::Scenario& scenario, const SpectraOptions& options, const RunContext& context) {
    const auto spec = transport::read_transport(scenario);
    const NamedLaw& law = chosen_law(spec.laws, options.law);
    check_target(options.file, options.force, scenario);
    const auto file = grid::scenario_grid_file(scenario);
    const grid::GridFile* given = file ? &*file : nullptr;
    const grid::Grid grid = file ? file->grid : grid::scenario_grid(scenario);
    const auto media = media::load_media(scenario, grid, given, context);
    const auto problem = transport::prepare_problem(spec, grid, media, context);
    const Solution solution = transport::solve(problem, law, context);
    check_solution(solution);
    const SolvedGalaxy galaxy{scenario, grid, given, media, spec, law, solution};
    const SpectraFile spectra = spectra_file(galaxy, options.command, context);
    grid::write_grid_file(options.file, spectra.output, options.force);
    return {summary_of(galaxy, spectra, options.file), warnings_of(solution, spec.source_age)};
}

} // namespace aureole::app
