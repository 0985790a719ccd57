#include "spectra_file.hpp"

#include "aureole/base/constants.hpp"
#include "aureole/base/parallel.hpp"
#include "aureole/files/hash.hpp"
#include "aureole/physics/gyration.hpp"
#include "aureole/spectra/file_source.hpp"
#include "aureole/transport/solution_source.hpp"
#include "aureole/version.hpp"

#include <fmt/format.h>

#include <algorithm>
#include <cmath>
#include <limits>
#include <set>
#include <sstream>

namespace aureole::app {

namespace {

using grid::GridFileData;
using grid::GridFileOutput;
using spectra::Species;
using transport::Solution;

constexpr const char* density_unit = "cm-3 GeV-1";

/// M = N T^2.5 of every cell [cells][nodes].
std::vector<float> weighted_of(const spectra::Source& source, const RunContext& context) {
    constexpr std::size_t block = 256;
    const std::size_t nodes = source.basis->nodes();
    std::vector<float> weighted(source.cells * nodes);
    for_each_block(context, (source.cells + block - 1) / block, [&](std::size_t b) {
        const std::size_t first = b * block;
        source.open()(first, std::min(block, source.cells - first), weighted.data() + first * nodes, nodes);
    });
    if (source.finish) {
        source.finish();
    }
    return weighted;
}

/// Densities of a species as the file has them.
class SpeciesWriter {
  public:
    SpeciesWriter(SpectraFile& file, const spectra::Source& source, const RunContext& context)
        : file_(file), weighted_(weighted_of(source, context)) {
        const bool electrons = source.species == Species::electrons;
        const auto energy = source.basis->energy();
        file_.output.axes[electrons ? "E_LEPTON" : "E_PROTON"] = {energy.begin(), energy.end()};
        const double factor = unit_factor(density_unit, dimension::spectral_density);
        for (const double t : energy) {
            scale_.push_back(std::pow(t, -spectra::weighting) / factor);
        }
    }

    /// `less` [cells][nodes] is taken off first; may be empty.
    void write(const std::string& hdu, const std::vector<float>& less, const std::string& what) {
        std::vector<float> density(weighted_.size());
        for (std::size_t v = 0; v < density.size(); ++v) {
            const double left =
                static_cast<double>(weighted_[v]) - (less.empty() ? 0.0 : static_cast<double>(less[v]));
            const double value = std::max(0.0, left) * scale_[v % scale_.size()];
            const bool normal = value >= static_cast<double>(std::numeric_limits<float>::min());
            file_.too_small += value > 0 && !normal ? 1 : 0;
            density[v] = normal ? static_cast<float>(value) : 0.0F;
        }
        file_.output.data.push_back(
            {hdu, density_unit, std::move(density), {{"CONTENT", what, "particles of this HDU"}}});
    }

    const std::vector<float>& weighted() const { return weighted_; }

  private:
    SpectraFile& file_;
    std::vector<float> weighted_;
    std::vector<double> scale_;
};

void add_leptons(const SolvedGalaxy& galaxy, const RunContext& context, SpectraFile& file) {
    const Solution& solution = galaxy.solution;
    SpeciesWriter all(file, solution_source(solution, Species::electrons, galaxy.grid), context);
    if (!solution.positrons) {
        all.write("CR_ELECTRON", {}, "electrons from sources");
        return;
    }
    Solution alone;
    alone.law = solution.law;
    alone.grid = solution.grid;
    alone.electrons = solution.positrons;
    SpeciesWriter positrons(file, solution_source(alone, Species::electrons, galaxy.grid), context);
    all.write("CR_ELECTRON", positrons.weighted(), "electrons from sources and secondary ones");
    positrons.write("CR_POSITRON", {}, "secondary positrons");
}

void add_spectra(const SolvedGalaxy& galaxy, const RunContext& context, SpectraFile& file) {
    if (galaxy.solution.electrons) {
        add_leptons(galaxy, context, file);
    }
    if (galaxy.solution.protons) {
        SpeciesWriter(file, solution_source(galaxy.solution, Species::protons, galaxy.grid), context)
            .write("CR_PROTON", {}, "protons from sources");
    }
    for (const auto& source : spectra::open_sources(galaxy.scenario, galaxy.grid, galaxy.file, context)) {
        const bool electrons = source.species == Species::electrons;
        SpeciesWriter(file, source, context)
            .write(electrons ? "CR_LEPTON" : "CR_PROTON", {}, "given, not solved for");
    }
}

void add_scalar(GridFileOutput& output,
                const char* hdu,
                const std::vector<float>& cgs,
                const char* unit,
                const Dimension& dimension) {
    if (!cgs.empty()) {
        output.data.push_back({hdu, unit, grid::in_unit(cgs, unit_factor(unit, dimension)), {}});
    }
}

void add_vector(GridFileOutput& output,
                const char* hdu,
                const std::vector<std::array<float, 3>>& cgs,
                const char* unit,
                const Dimension& dimension) {
    if (!cgs.empty()) {
        output.data.push_back({hdu, unit, grid::in_unit(cgs, unit_factor(unit, dimension)), {}});
    }
}

void add_media(const SolvedGalaxy& galaxy, GridFileOutput& output) {
    using namespace dimension;
    const media::Media& media = galaxy.media;
    add_vector(output, "B_VECTOR", media.field.ordered, "uG", magnetic_field);
    add_scalar(output, "B_TURB", media.field.random_rms, "uG", magnetic_field);
    add_scalar(output, "GAS_HI", media.gas.hi, "cm-3", number_density);
    add_scalar(output, "GAS_H2", media.gas.h2, "cm-3", number_density);
    add_scalar(output, "GAS_HII", media.gas.hii, "cm-3", number_density);
    add_scalar(output, "N_E", media.gas.electrons, "cm-3", number_density);
    add_scalar(output, "T_E", media.gas.temperature, "K", temperature);
    add_scalar(output, "V_TURB", media.turbulent_speed, "km s-1", speed);
    add_scalar(output, "L_TURB", media.turbulent_scale, "kpc", length);
    add_vector(output, "VELOCITY", media.velocity, "km s-1", speed);
    for (const media::Radiation& field : media.radiation) {
        if (field.photon_density.empty()) {
            continue; // a blackbody stays in the scenario
        }
        const char* unit = "cm-3 eV-1";
        output.axes["EPS_PHOTON"] = field.photon_energy;
        output.data.push_back({"RADIATION",
                               unit,
                               grid::in_unit(field.photon_density, unit_factor(unit, spectral_density)),
                               {{"CMBINCL", galaxy.file != nullptr && galaxy.file->radiation_includes_cmb,
                                 "includes the microwave background"}}});
    }
}

/// The law and those it is made of.
void collect_laws(const scenario::Scenario& scenario, const std::string& name, std::set<std::string>& laws) {
    const std::string parts = "law." + name + ".of";
    if (laws.insert(name).second && scenario.has(parts)) {
        for (const std::string& part : scenario.texts(parts)) {
            collect_laws(scenario, part, laws);
        }
    }
}

/// Lines of the effective scenario that say what was solved: [transport] and its tables, the law.
std::vector<std::string> solver_lines(const std::string& effective, const std::set<std::string>& laws) {
    const auto wanted = [&](const std::string& table) {
        return table == "transport" || table.starts_with("transport.") ||
               std::any_of(laws.begin(), laws.end(), [&](const std::string& law) {
                   return table == "law." + law || table.starts_with("law." + law + ".");
               });
    };
    std::vector<std::string> lines;
    bool inside = false;
    std::istringstream text(effective);
    for (std::string line; std::getline(text, line);) {
        if (line.starts_with('[')) {
            inside = wanted(line.substr(1, line.size() - 2));
        }
        if (inside && !line.empty()) {
            lines.push_back(line);
        }
    }
    return lines;
}

const char* anchor_unit(transport::AnchorSpec::Kind kind) {
    using Kind = transport::AnchorSpec::Kind;
    switch (kind) {
    case Kind::rate:
        return "[s-1] asked";
    case Kind::energy_density:
        return "[erg cm-3] asked, of protons";
    case Kind::grammage:
        return "[g cm-2] asked";
    case Kind::gamma_luminosity:
        return "[erg s-1] asked, 0.1 to 100 GeV";
    case Kind::absolute:
        break;
    }
    return "";
}

void add_anchor(const transport::AnchorReport& anchor, std::vector<files::Card>& cards) {
    const double kpc = constants::kiloparsec;
    cards.push_back({"ANCHOR", anchor_text(anchor.kind), "how the law was scaled"});
    if (anchor.kind != transport::AnchorSpec::Kind::absolute) {
        cards.push_back({"ANCVALUE", anchor.value, anchor_unit(anchor.kind)});
        cards.push_back({"ANCMET", anchor.achieved, "achieved"});
    }
    cards.push_back({"ANCFACT", anchor.factor, "factor that the rate was multiplied by"});
    cards.push_back({"ANCSOLV", static_cast<long>(anchor.solutions), "solutions for the protons needed"});
    cards.push_back({"REFR", anchor.radius / kpc, "[kpc] place of the figures below"});
    cards.push_back({"REFZ", anchor.height / kpc, "[kpc]"});
    cards.push_back({"NU1GV", anchor.rate, "[s-1] scattering rate there at 1 GV"});
    cards.push_back({"NUEMPIR", anchor.over_empirical, "that as the law stood over 1e-9 s-1"});
}

std::vector<files::Card> solver_cards(const SolvedGalaxy& galaxy) {
    const auto& spec = galaxy.spec;
    const auto& solution = galaxy.solution;
    const double gev = constants::gigaelectronvolt;
    std::vector<files::Card> cards{{"LAW", galaxy.law.name, "name of the scattering law"},
                                   {"LAWKIND", galaxy.law.law.name, "see aureole laws"}};
    add_anchor(solution.anchor, cards);
    long limiter_open = 0;
    double residual = 0;
    double limited = 0;
    for (const auto& march : solution.marches) {
        limiter_open += static_cast<long>(march.limiter_not_converged);
        residual = std::max(residual, march.worst_residual);
        limited = std::max(limited, march.limited_energy);
    }
    const std::vector<files::Card> more{
        {"EKINFROM", spec.energy_from / gev, "[GeV] least energy solved for"},
        {"EKINTO", spec.energy_to / gev, "[GeV] greatest energy asked for"},
        {"BINSDEC", spec.bins_per_decade, "steps in momentum per decade, at least"},
        {"HEADROOM", spec.headroom, "the solution starts at so many EKINTO"},
        {"LIMITER", spec.limiter, "of the diffusive flux"},
        {"EDGEZ", galaxy.scenario.text("transport.edge_z"), "upper and lower edge"},
        {"EDGER", galaxy.scenario.text("transport.edge_r"), "outer edge"},
        {"PERPPAR", spec.perpendicular, "diffusion across over along the field"},
        {"WIND", spec.wind.kind, ""},
        {"SECONDAR", spec.secondaries, "electrons and positrons made by protons"},
        {"SRCAGE", spec.source_age / (1e6 * constants::year), "[Myr] for which the sources have been on"},
        {"LIMOPEN", limiter_open, "momenta at which the limiter did not converge"},
        {"LIMITED", limited, "greatest part of energy that is flux limited"},
        {"RESIDUAL", residual, "worst of the linear systems"},
        {"BUDGET", worst_defect(solution), "worst part of power not accounted for"}};
    cards.insert(cards.end(), more.begin(), more.end());
    const auto& change = solution.confinement.change;
    if (!change.empty()) {
        cards.push_back({"CONFLAST", change.back(), "last relative change of a density"});
    }
    return cards;
}

} // namespace

std::string anchor_text(transport::AnchorSpec::Kind kind) {
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

double worst_defect(const Solution& solution) {
    double worst = 0;
    for (const auto& kind : solution.budgets) {
        worst = std::max({worst, std::abs(kind.budget.defect.number), std::abs(kind.budget.defect.energy)});
    }
    return worst;
}

SpectraFile spectra_file(const SolvedGalaxy& galaxy, const std::string& command, const RunContext& context) {
    SpectraFile file;
    GridFileOutput& output = file.output;
    output.grid = galaxy.grid;
    output.object = galaxy.scenario.text("run.object");
    if (!galaxy.media.field.ordered.empty()) {
        output.field_parity = galaxy.media.field.parity == media::Parity::odd ? "ODD" : "EVEN";
    }
    const bool from_file = galaxy.file != nullptr && !galaxy.scenario.is_set("radiation.cmb_temperature");
    output.cmb_temperature =
        from_file ? galaxy.file->cmb_temperature : galaxy.scenario.quantity("radiation.cmb_temperature");
    add_spectra(galaxy, context, file);
    add_media(galaxy, output);
    const std::string effective = scenario::effective_toml(galaxy.scenario);
    output.primary.cards = solver_cards(galaxy);
    output.primary.cards.push_back(
        {"SCENHASH", files::hex(files::fnv1a(effective)), "FNV-1a of the effective scenario"});
    output.primary.history = {
        command, fmt::format("Spectra solved for by aureole {}, steady, under the law '{}':", version,
                             galaxy.law.name)};
    std::set<std::string> laws;
    collect_laws(galaxy.scenario, galaxy.law.name, laws);
    for (const std::string& line : solver_lines(effective, laws)) {
        output.primary.history.push_back(line);
    }
    return file;
}

} // namespace aureole::app
