#include "evaluate.hpp"

#include "aureole/sight/orientation.hpp"

#include <fmt/format.h>

#include <algorithm>
#include <chrono>
#include <string>

namespace aureole::app {

namespace {

using emission::Emitted;

/// Moves the maps of a group to those of the earlier groups.
void append(Evaluation& all, std::vector<MapProduct> maps, const ChannelGroup& group) {
    for (MapProduct& map : maps) {
        map.plane.channel += group.first;
        all.products.push_back(std::move(map));
    }
}

/// Process by process, in the order they first appear, and by channel within each.
void put_in_order(std::vector<MapProduct>& products) {
    std::vector<std::string> processes;
    for (const MapProduct& map : products) {
        if (std::find(processes.begin(), processes.end(), map.plane.process) == processes.end()) {
            processes.push_back(map.plane.process);
        }
    }
    const auto rank = [&](const MapProduct& map) {
        return std::find(processes.begin(), processes.end(), map.plane.process) - processes.begin();
    };
    std::stable_sort(products.begin(), products.end(), [&](const MapProduct& a, const MapProduct& b) {
        return rank(a) != rank(b) ? rank(a) < rank(b) : a.plane.channel < b.plane.channel;
    });
}

} // namespace

Evaluation evaluate(const Galaxy& galaxy,
                    const std::vector<emission::Channel>& channels,
                    const std::vector<ChannelGroup>& groups,
                    const RunContext& context,
                    const Evaluation* alike) {
    const auto orientation = sight::orientation(galaxy.settings.view);
    Evaluation all;
    all.groups = groups;
    for (std::size_t g = 0; g < groups.size(); ++g) {
        const auto first = channels.begin() + static_cast<std::ptrdiff_t>(groups[g].first);
        const std::vector<emission::Channel> some(first,
                                                  first + static_cast<std::ptrdiff_t>(groups[g].count));
        auto since = std::chrono::steady_clock::now();
        const auto say = [&](const char* stage) {
            const auto now = std::chrono::steady_clock::now();
            context.say(LogLevel::debug, fmt::format("{}: {:.3f} s", stage,
                                                     std::chrono::duration<double>(now - since).count()));
            since = now;
        };
        Emitted emitted =
            emission::emit(galaxy.grid, galaxy.media, galaxy.sources, some, galaxy.processes, orientation,
                           context, alike != nullptr ? &alike->tables[g] : nullptr);
        say("emission");
        append(all, make_maps(emitted, some, galaxy.settings, context), groups[g]);
        say("maps");
        all.report.cells_with_fallback = emitted.report.cells_with_fallback;
        all.report.share_below_gamma_10 =
            std::max(all.report.share_below_gamma_10, emitted.report.share_below_gamma_10);
        Emitted tables;
        tables.tables = emitted.tables;
        all.tables.push_back(std::move(tables));
    }
    put_in_order(all.products);
    return all;
}

Evaluation evaluate_coarser(const Galaxy& galaxy,
                            const std::vector<emission::Channel>& channels,
                            const Evaluation& fine,
                            const std::vector<spectra::Source>* sources,
                            const RunContext& context) {
    const auto grid = grid::coarsened(galaxy.grid);
    const auto media = media::coarsened(galaxy.media, galaxy.grid, context);
    const auto averages =
        sources == nullptr ? spectra::coarsened(galaxy.sources, galaxy.grid) : std::vector<spectra::Source>{};
    emission::Processes processes = galaxy.processes;
    processes.sectors = std::max<std::size_t>(4, processes.sectors / 2);
    // The difference of the maps need not be known better than to a few per cent.
    MapSettings settings = galaxy.settings;
    settings.render.tolerance *= 3;
    return evaluate({grid, media, sources == nullptr ? averages : *sources, processes, settings}, channels,
                    fine.groups, context, &fine);
}

} // namespace aureole::app
