#include "write_maps.hpp"

#include "aureole/base/parallel.hpp"

#include <fmt/format.h>

#include <algorithm>
#include <filesystem>
#include <functional>
#include <span>

namespace aureole::app {

using emission::Band;

namespace {

void write_cube(const std::filesystem::path& path,
                std::span<const MapProduct> products,
                const maps::MapOrigin& origin) {
    std::vector<maps::Image> planes;
    std::vector<maps::MapNotes> notes;
    std::vector<double> energies;
    for (const MapProduct& product : products) {
        planes.push_back(product.image);
        notes.push_back(product.notes);
        energies.push_back(product.channel.from);
    }
    if (products.front().channel.is_band()) {
        energies.push_back(products.back().channel.to);
    }
    maps::write_gamma_cube(path, planes, energies, origin, notes, false);
}

} // namespace

void write_maps(const std::vector<MapProduct>& products,
                const maps::MapOrigin& origin,
                bool spectral_index_maps,
                files::RunFolder& folder,
                const std::string& prefix,
                const RunContext& context) {
    std::vector<std::function<void()>> writers;
    std::vector<const MapProduct*> radio;
    for (const MapProduct& product : products) {
        if (product.plane.band == Band::radio) {
            writers.emplace_back([&origin, &product, path = folder.place(prefix + product.file)] {
                maps::write_radio_map(path, product.image, origin, product.notes, false);
            });
            if (!product.plane.is_signed) {
                radio.push_back(&product);
            }
        }
    }
    // Planes of one gamma-ray process follow one another.
    for (std::size_t first = 0; first < products.size();) {
        std::size_t last = first;
        while (last < products.size() && products[last].file == products[first].file) {
            ++last;
        }
        if (products[first].plane.band == Band::gamma) {
            const std::span<const MapProduct> cube(products.data() + first, last - first);
            writers.emplace_back([&origin, cube, path = folder.place(prefix + products[first].file)] {
                write_cube(path, cube, origin);
            });
        }
        first = last;
    }
    std::vector<double> frequency;
    std::vector<double> width;
    std::vector<std::string> file;
    for (std::size_t r = 0; r < radio.size(); ++r) {
        frequency.push_back(radio[r]->channel.centre());
        width.push_back(radio[r]->channel.to - radio[r]->channel.from);
        file.push_back(radio[r]->file.substr(5));
        if (r > 0 && spectral_index_maps) {
            constexpr double floor = 1e-3;
            maps::MapNotes notes;
            notes.process = "synchrotron";
            notes.type = "Spectral index";
            notes.more = {{"FREQLOW", radio[r - 1]->channel.centre(), "Hz"},
                          {"FREQHIGH", radio[r]->channel.centre(), "Hz"}};
            const std::string name =
                fmt::format("maps/spectral_index_{}_{}.fits", file_label(radio[r - 1]->channel),
                            file_label(radio[r]->channel));
            writers.emplace_back([&origin, notes, low = radio[r - 1], high = radio[r],
                                  path = folder.place(prefix + name)] {
                maps::write_plane(path, spectral_index(low->image, high->image, floor), origin, notes, false);
            });
        }
    }
    if (radio.size() > 1) {
        maps::write_channel_table(folder.place(prefix + "maps/channels.fits"), frequency, width, file, false);
    }
    // The cubes come last and are the largest: they go first.
    std::reverse(writers.begin(), writers.end());
    for_each_block(context, writers.size(), [&](std::size_t writer) { writers[writer](); });
}

} // namespace aureole::app
