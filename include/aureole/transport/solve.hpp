#pragma once

#include "aureole/base/run_context.hpp"
#include "aureole/transport/budget.hpp"
#include "aureole/transport/problem.hpp"

#include <array>
#include <cstddef>
#include <optional>
#include <string>
#include <vector>

namespace aureole::transport {

/// Steady spectra of one kind of particle. Energies are kinetic, ascending, from energy_from to the second
/// node above energy_to.
struct Spectra {
    std::vector<double> energy;         ///< [nodes] erg
    std::vector<double> momentum;       ///< [nodes] g cm s-1
    std::vector<float> weighted;        ///< [cells][nodes] M = N T^2.5, cm-3 erg^1.5, >= 0
    std::vector<float> scattering_rate; ///< [cells][nodes] s-1, limits of the law applied
    RateCounts counted;                 ///< of them, and how many a limit changed
    std::vector<float> limited;         ///< [cells][nodes] smallest limiter L of the cell's faces; or empty
    std::vector<float> age; ///< [cells][nodes] mean age, s; protons, or electrons if alone; or empty
};

/// Where the power of one kind of particle went, over the whole galaxy. `lost` goes by `processes`,
/// `escaped` by `sides`.
struct KindBudget {
    std::string name; ///< protons, electrons (from sources), secondary electrons, positrons
    std::vector<std::string> processes, sides;
    Budget budget;
    double power = 0;   ///< erg s-1 asked of the sources, at all rigidities
    double marched = 0; ///< erg s-1 of it within the momenta marched; the rest lies above or below
    double inside = 1;  ///< least part of a source's shape that lies in the grid
};

/// Where and by how much an iteration fell short.
struct OpenPlace {
    double momentum = 0, kinetic_energy = 0; ///< g cm s-1, erg
    std::size_t cell = 0;
    double radius = 0, height = 0; ///< cm, of the cell's centre
    double change = 0;             ///< relative, of the density in the last iteration
};

/// What a march left open.
struct MarchReport {
    std::string name;
    std::size_t redone_steps = 0, pivoted = 0, factorizations = 0, solves = 0;
    /// Momenta at which limiter, and waves where the protons make them, did not converge, and the worst.
    std::size_t limiter_not_converged = 0;
    OpenPlace worst;
    int most_limiter_iterations = 0;
    std::size_t held_back = 0; ///< cells and momenta where converging streaming was kept from adding energy
    double worst_residual = 0;
    double limited_energy = 0; ///< part of the energy density, over the grid, where L < 1/2
};

/// How a law was scaled and what came of it, at a place: that of the anchor, else R = 8 kpc, or half the
/// outer radius of a smaller grid, z = 0.
struct AnchorReport {
    AnchorSpec::Kind kind = AnchorSpec::Kind::absolute;
    double value = 0;    ///< asked
    double achieved = 0; ///< of that quantity
    double factor = 1;   ///< that the law was multiplied by
    int solutions = 0;   ///< of the protons that were needed
    double radius = 0, height = 0;
    double rate = 0;                   ///< of the law as used at 1 GV and speed c there, s-1
    double over_empirical = 0;         ///< of the law as it stood at 1 GV there, over empirical_rate
    double energy_density = 0;         ///< of protons there, erg cm-3
    double gamma_luminosity = 0;       ///< erg s-1, 0.1 to 100 GeV, from pion decay, whole galaxy
    double proton_power = 0;           ///< erg s-1 injected within the momenta marched
    std::array<double, 3> rigidity{};  ///< statvolt: 1, 10 and 100 GV
    std::array<double, 3> grammage{};  ///< g cm-2 that protons there have passed; 0 without gas
    std::array<double, 3> age{};       ///< s, mean of protons there
    std::array<double, 3> residence{}; ///< s: protons in the grid over protons injected per second
};

/// A law that depends on the cosmic rays. Protons and the waves they make are found together, momentum by
/// momentum, in one march.
struct ConfinementReport {
    bool needed = false, converged = true;
    std::vector<double>
        change; ///< of each march: largest relative change of a density in its last iterations
    std::size_t factorizations = 0, solves = 0; ///< of linear systems, last march of the protons
    /// The protons with other regularisations; empty unless asked for.
    struct Regularised {
        double width = 1;          ///< over the width used
        double energy_density = 0; ///< at the place of the AnchorReport, erg cm-3
        double total_energy = 0;   ///< in the grid over that of the solution
        bool converged = true;     ///< to 1e-4 at all momenta
    };
    std::vector<Regularised> regularised;
};

/// Spectra and what they say, for one law.
struct Solution {
    std::string law;
    grid::Grid grid;                                      ///< RZ; the scenario's if that is RZ
    std::optional<Spectra> protons, electrons, positrons; ///< electrons: e- and e+ together
    std::vector<double> pressure, energy_density;         ///< [cells] of protons, erg cm-3
    std::vector<KindBudget> budgets;
    std::vector<MarchReport> marches;
    AnchorReport anchor;
    ConfinementReport confinement;
    Unevenness of_gas, of_field_energy, of_radiation;
};

struct SolveOptions {
    /// Of laws that depend on the cosmic rays: also solve for the protons with the regularisation halved and
    /// doubled, with the same factor of the law. Two more marches, to 1e-4.
    bool regularisation = false;
};

/// Solves for protons, then for electrons and positrons in one march.
///
/// Anchors    absolute: as the law stands. rate: nu at a place and rigidity for speed c. energy_density,
///            grammage, gamma_luminosity: the factor is sought, by bracketed secants in the logarithms, on
///            full solutions for the protons, until the quantity is met to 1e-7.
/// Grammage, ages: from one more march with the protons' density (times the gas passed per second) as source.
/// Laws that depend on the cosmic rays are driven by the protons' pressure at the same rigidity, so that
///            protons and waves are found momentum by momentum, together with the flux limiter, to 1e-5 of
///            the density. With spec.streaming particles drift at the Alfven speed down the gradient of the
///            protons of their rigidity; the adiabatic term of that drift is the heating by waves. Where the
///            drift converges faster than particles lose energy its term is held at no net gain, so that
///            waves take more there than they should. Rates of these laws at an anchor are met to 1e-4.
/// Regularisation: gradients of the pressure count as at least 1e-3 of pressure over outer radius; drifts
///            turn around where it is below a tenth of it.
/// Throws     Error(scenario) for a spec, law or anchor that cannot be met, saying what was found at the ends
///            of the search; Error(runtime) as march(). What did not converge is reported with
///            its place and energy, not thrown.
/// Cost       97 nodes, e-, e+ and protons, limiter on, one thread: 1.3 s for 48 x 64 cells, 4.5 s for 96 x
///            96; anchors that are sought take 4-8 times the protons' part, laws that depend on the
///            cosmic rays 5-10 times that of the others at 8 bins per decade.
/// Open       With streaming, more than about 10 bins per decade and 48 x 64 cells some momenta stay open in
///            cells at the top, where heating by waves competes with the losses (changes below 1, energy
///            densities in the plane right to 1 %). A law whose gradients change abruptly with momentum has
///            first-order errors there: 1.7 % of the energy density at 8 bins per decade, 0.4 % at 16.
Solution solve(const Problem& problem,
               const NamedLaw& law,
               const RunContext& context,
               const SolveOptions& options = {});

Solution solve(const TransportSpec& spec,
               const NamedLaw& law,
               const grid::Grid& grid,
               const media::Media& media,
               const RunContext& context,
               const SolveOptions& options = {});

} // namespace aureole::transport
