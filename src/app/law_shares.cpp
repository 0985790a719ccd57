#include "law_shares.hpp"

#include "aureole/emission/emit.hpp"
#include "aureole/sight/orientation.hpp"
#include "aureole/transport/solution_source.hpp"

#include <fmt/format.h>

#include <algorithm>
#include <cmath>
#include <functional>

namespace aureole::app {

namespace {

using spectra::Species;
using transport::Solution;
using transport::Spectra;

/// Whether the particles of a cell and node are in question.
using Question = std::function<bool(const Spectra&, std::size_t cell, std::size_t node)>;

/// The solution with only the particles in question; false if there are none.
bool keep_only(Solution& solution, const Question& asked) {
    bool any = false;
    for (auto* spectra : {&solution.protons, &solution.electrons}) {
        if (!*spectra) {
            continue;
        }
        const std::size_t nodes = (*spectra)->energy.size();
        for (std::size_t place = 0; place < (*spectra)->weighted.size(); ++place) {
            float& value = (*spectra)->weighted[place];
            if (value > 0 && asked(**spectra, place / nodes, place % nodes)) {
                any = true;
            } else {
                value = 0;
            }
        }
    }
    return any;
}

/// [maps] Emission of a solution over that of the maps.
std::vector<double> shares_of(const Solution& part,
                              const Sky& sky,
                              const Inputs& inputs,
                              const media::Media& media,
                              const RunContext& context) {
    std::vector<spectra::Source> sources;
    if (part.electrons) {
        sources.push_back(transport::solution_source(part, Species::electrons, inputs.grid));
    }
    if (part.protons) {
        sources.push_back(transport::solution_source(part, Species::protons, inputs.grid));
    }
    emission::Processes processes = inputs.processes;
    processes.separate = false;
    processes.polarisation = false;
    const auto emitted = emission::emit(inputs.grid, media, sources, inputs.channels, processes,
                                        sight::orientation(inputs.settings.view), context);
    std::vector<double> shares;
    for (const MapProduct& map : sky.fine.products) {
        const bool total = map.plane.process == "total" && map.luminosity > 0;
        shares.push_back(
            total ? std::min(1.0, emitted.report.planes[map.plane.channel].luminosity / map.luminosity) : 0);
    }
    return shares;
}

/// Nearest node of another spectrum.
std::size_t nearest_node(const Spectra& spectra, double energy) {
    const auto& nodes = spectra.energy;
    const auto above = std::lower_bound(nodes.begin(), nodes.end(), energy);
    const auto place = static_cast<std::size_t>(above - nodes.begin());
    return std::min(place, nodes.size() - 1);
}

void note(Sky& sky,
          const std::string& law,
          const std::vector<double>& shares,
          const char* card,
          const char* comment,
          const char* what) {
    constexpr double worth_saying = 0.01;
    std::string told;
    for (std::size_t m = 0; m < shares.size(); ++m) {
        MapProduct& map = sky.fine.products[m];
        if (map.plane.process != "total") {
            continue;
        }
        map.notes.more.push_back({card, shares[m], comment});
        if (shares[m] > worth_saying) {
            told += fmt::format("{}{} {:.2g} %", told.empty() ? "" : ", ", map.label, 100 * shares[m]);
        }
    }
    if (!told.empty()) {
        sky.warnings.push_back(fmt::format("{}: emission of {}: {}", law, what, told));
    }
}

} // namespace

void note_shares(Sky& sky,
                 const std::string& law,
                 const Solution& solution,
                 double source_age,
                 const Inputs& inputs,
                 const media::Media& media,
                 const RunContext& context) {
    const std::vector<double> none(sky.fine.products.size(), 0.0);
    const auto shares = [&](const Question& asked) {
        Solution part = solution;
        return keep_only(part, asked) ? shares_of(part, sky, inputs, media, context) : none;
    };
    const auto limited = shares([](const Spectra& spectra, std::size_t cell, std::size_t node) {
        return !spectra.limited.empty() && spectra.limited[cell * spectra.energy.size() + node] < 0.5F;
    });
    note(sky, law, limited, "LIMITED", "share of the emission, flux-limited",
         "particles whose diffusion is limited to their speed");
    const Spectra* clock = solution.protons ? &*solution.protons : nullptr;
    const auto old = shares([&](const Spectra& spectra, std::size_t cell, std::size_t node) {
        const Spectra& ages = spectra.age.empty() && clock != nullptr ? *clock : spectra;
        if (ages.age.empty()) {
            return false;
        }
        const std::size_t at = &ages == &spectra ? node : nearest_node(ages, spectra.energy[node]);
        return static_cast<double>(ages.age[cell * ages.energy.size() + at]) > source_age;
    });
    note(sky, law, old, "NOTSTEAD", "share of the emission, older than sources",
         "particles older than the sources, which cannot be steady");
}

} // namespace aureole::app
