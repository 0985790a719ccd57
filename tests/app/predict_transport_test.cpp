#include "aureole/base/constants.hpp"
#include "aureole/emission/emit.hpp"
#include "aureole/grid/scenario_grid.hpp"
#include "aureole/media/media.hpp"
#include "aureole/sight/orientation.hpp"
#include "aureole/sight/view.hpp"
#include "aureole/transport/read_scenario.hpp"
#include "aureole/transport/solution_source.hpp"
#include "aureole/transport/solve.hpp"

#include <catch2/catch.hpp>

#include <algorithm>
#include <array>
#include <cmath>
#include <string>
#include <vector>

using namespace aureole;

namespace {

/// Nothing leaves this galaxy, so that all power goes into losses; the cut-off lies far below energy_to.
const std::string closed_box = R"(
[grid]
geometry = "RZ"
radius = "5 kpc"
height = "4 kpc"
cells_r = 4
cells_z = 4
[field.ordered]
profile = "double_exponential"
value = "6 uG"
radius = "6 kpc"
height = "3 kpc"
pitch = "20 deg"
tilt = "40 deg"
[field.random]
profile = "double_exponential"
value = "3 uG"
radius = "6 kpc"
height = "3 kpc"
[radiation.component.stars]
temperature = "4000 K"
profile = "double_exponential"
value = "1 eV cm-3"
radius = "3 kpc"
height = "2 kpc"
[transport]
energy_from = "100 MeV"
energy_to = "100 TeV"
headroom = 1
edge_z = "closed"
edge_r = "closed"
limiter = "none"
bins_per_decade = 24
[law.even]
kind = "constant"
rate = "1e-9 s-1"
)";

const std::string electron_sources = R"(
[protons]
source = "none"
[transport.electrons.source.disc]
radius = "3 kpc"
height = "0.5 kpc"
power = "1e39 erg s-1"
slope = 2.2
cutoff_rigidity = "5 TV"
)";

/// A galaxy, and its spectra solved for.
struct Galaxy {
    explicit Galaxy(const std::string& text, const std::vector<std::string>& overrides = {})
        : scenario(scenario::parse(text, "box.toml", overrides)), grid(grid::scenario_grid(scenario)),
          media(media::load_media(scenario, grid, nullptr, {})) {
        const auto spec = transport::read_transport(scenario);
        solution = transport::solve(spec, spec.laws.front(), grid, media, {});
    }
    scenario::Scenario scenario;
    grid::Grid grid;
    media::Media media;
    transport::Solution solution;
};

/// Power [erg s-1] that a kind of particles loses to the processes whose names begin like this.
double lost(const transport::Solution& solution, const std::string& kind, const std::string& process) {
    double sum = 0;
    for (const auto& budget : solution.budgets) {
        for (std::size_t p = 0; budget.name == kind && p < budget.processes.size(); ++p) {
            sum += budget.processes[p].starts_with(process) ? budget.budget.lost[p] : 0;
        }
    }
    REQUIRE(sum > 0);
    return sum;
}

/// Even in the logarithm.
std::vector<emission::Channel> channels(emission::Band band, double from, double to, int per_decade) {
    std::vector<emission::Channel> result;
    const int steps = static_cast<int>(std::lround(std::log10(to / from) * per_decade));
    for (int i = 0; i <= steps; ++i) {
        const double at = from * std::pow(10.0, static_cast<double>(i) / per_decade);
        result.push_back({band, at, at});
    }
    return result;
}

/// Power [erg s-1] radiated by a process if the whole sky around the galaxy were as bright as seen from this
/// inclination: trapezoidal rule in ln(frequency). Its integrand is smooth and falls to nothing at both ends,
/// where the rule converges exponentially.
double radiated(const Galaxy& galaxy,
                const std::vector<emission::Channel>& at,
                const std::string& process,
                double inclination) {
    const bool radio = at.front().band == emission::Band::radio;
    emission::Processes processes;
    processes.synchrotron = radio;
    processes.separate = !radio;
    processes.sectors = 16;
    processes.nuclear_enhancement = galaxy.scenario.number("emission.nuclear_enhancement");
    processes.helium_fraction = galaxy.scenario.number("emission.helium_fraction");
    std::vector<spectra::Source> sources;
    if (galaxy.solution.electrons) {
        sources.push_back(
            transport::solution_source(galaxy.solution, spectra::Species::electrons, galaxy.grid));
    }
    if (galaxy.solution.protons) {
        sources.push_back(
            transport::solution_source(galaxy.solution, spectra::Species::protons, galaxy.grid));
    }
    const sight::View view{.inclination = inclination, .distance = 1e4 * constants::kiloparsec};
    RunContext context;
    context.threads = 2;
    const auto emitted =
        emission::emit(galaxy.grid, galaxy.media, sources, at, processes, sight::orientation(view), context);
    const double step = std::log(at[1].from / at[0].from);
    double sum = 0;
    double largest = 0;
    double last = 0;
    for (std::size_t p = 0; p < emitted.emissivity.planes.size(); ++p) {
        const auto& plane = emitted.emissivity.planes[p];
        if (!plane.process.starts_with(process)) {
            continue;
        }
        const double nu = at[plane.channel].from;
        // Photons per erg, or energy per Hz.
        const double part = emitted.report.planes[p].luminosity * nu * (radio ? 1 : nu) * step;
        sum += part;
        largest = std::max(largest, part);
        last = part;
    }
    CHECK(last < 1e-9 * largest);
    return sum;
}

} // namespace

TEST_CASE("the power that electrons lose to fields and light is what the emission room radiates into all "
          "directions",
          "[app][transport][conservation]") {
    // Gauss-Legendre points and weights in the cosine of the inclination, 0 to 1: both sides are alike.
    constexpr std::array cosine{0.033765242898424, 0.169395306766868, 0.380690406958402,
                                0.619309593041598, 0.830604693233132, 0.966234757101576};
    constexpr std::array weight{0.085662246189585, 0.180380786524069, 0.233956967286346,
                                0.233956967286346, 0.180380786524069, 0.085662246189585};
    const auto radio = channels(emission::Band::radio, 1e3, 1e22, 3);
    for (const char* direction : {"vertical", "x_shaped"}) {
        const Galaxy galaxy(closed_box + electron_sources,
                            {std::string("field.ordered.direction=") + direction});
        INFO(direction);
        double power = 0;
        double edge_on = 0;
        for (std::size_t i = 0; i < cosine.size(); ++i) {
            const double seen = radiated(galaxy, radio, "total", std::acos(cosine[i]));
            power += weight[i] * seen;
            edge_on = i == 0 ? seen : edge_on;
        }
        // The march's own sum over momenta is second order: 1.2e-3 at 16 bins per decade.
        CHECK(power == Approx(lost(galaxy.solution, "electrons", "synchrotron")).epsilon(7e-4));
        // Without the integral over directions this test would see the field's own pattern.
        CHECK(std::abs(edge_on / power - 1) > 0.05);
    }
    const Galaxy galaxy(closed_box + electron_sources);
    const auto photons =
        channels(emission::Band::gamma, 1e-5 * constants::electronvolt, 1e15 * constants::electronvolt, 3);
    CHECK(radiated(galaxy, photons, "inverse_compton", 1.0) ==
          Approx(lost(galaxy.solution, "electrons", "inverse compton")).epsilon(7e-4));
}

TEST_CASE("of the energy that protons lose to pions gamma rays and leptons get the shares of pion decay",
          "[app][transport][conservation]") {
    const Galaxy galaxy(closed_box + electron_sources + R"(
[gas.hi]
profile = "double_exponential"
value = "1 cm-3"
radius = "3 kpc"
height = "1 kpc"
[transport.protons.source.disc]
radius = "3 kpc"
height = "0.5 kpc"
power = "1e41 erg s-1"
slope = 2.2
cutoff_rigidity = "200 GV"
)",
                        {"protons.source=transport", "emission.nuclear_enhancement=1",
                         "emission.helium_fraction=0", "transport.secondary_model=isospin",
                         "transport.energy_from=2 MeV"});
    const auto photons = channels(emission::Band::gamma, 1e-7 * constants::gigaelectronvolt,
                                  1e7 * constants::gigaelectronvolt, 6);
    const double pions = lost(galaxy.solution, "protons", "pions");
    const double gamma = radiated(galaxy, photons, "pion_decay", 1.0);
    double leptons = 0;
    for (const auto& budget : galaxy.solution.budgets) {
        const bool secondary = budget.name == "secondary electrons" || budget.name == "positrons";
        leptons += secondary ? budget.budget.injected.energy : 0;
    }
    INFO("gamma rays " << gamma / pions << ", leptons " << leptons / pions << " of the loss");
    // Isospin: twice as much energy in charged pions as in neutral ones, 0.265 of it in electrons.
    CHECK(leptons / gamma == Approx(2 * 0.265).epsilon(0.02));
}
