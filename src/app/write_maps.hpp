#pragma once

#include "map_products.hpp"

#include "aureole/files/run_folder.hpp"
#include "aureole/maps/write_fits.hpp"

#include <string>
#include <vector>

namespace aureole::app {

/// Writes every map, spectral-index maps between neighbouring frequencies and the table of frequencies.
/// prefix: of all names in the folder, empty or ending in '/'.
void write_maps(const std::vector<MapProduct>& products,
                const maps::MapOrigin& origin,
                bool spectral_index_maps,
                files::RunFolder& folder,
                const std::string& prefix,
                const RunContext& context);

} // namespace aureole::app
