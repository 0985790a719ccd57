#pragma once

#include "aureole/app/field_of_view.hpp"
#include "aureole/emission/emit.hpp"
#include "aureole/maps/image.hpp"
#include "aureole/maps/render.hpp"
#include "aureole/maps/write_fits.hpp"

#include <string>
#include <vector>

namespace aureole::app {

/// One plane as it will be written: in its unit and with its beam, beside the estimates of its error.
struct MapProduct {
    emission::Plane plane;
    emission::Channel channel;
    std::string label; ///< "1.5 GHz", "1 GeV"
    std::string file;  ///< relative to the results folder
    maps::Image image;
    maps::MapNotes notes;
    double luminosity = 0; ///< 4 pi x emissivity over the galaxy, CGS
};

/// Settings of the map side of a run.
struct MapSettings {
    sight::View view;
    maps::PixelGrid pixels;
    std::optional<maps::Beam> radio_beam, gamma_beam;
    std::string radio_unit, gamma_unit;
    maps::RenderOptions render;
    std::vector<files::Card> gamma_cards; ///< which parametrisations are behind a gamma-ray map
};

MapSettings map_settings(const scenario::Scenario& scenario, const grid::Grid& grid);

/// Renders, smooths and converts all planes.
std::vector<MapProduct> make_maps(const emission::Emitted& emitted,
                                  const std::vector<emission::Channel>& channels,
                                  const MapSettings& settings,
                                  const RunContext& context);

/// Fills the numerical errors of `fine` from the same planes of a coarser evaluation: cell size from the
/// difference of the maps, sight lines from the sampling, energy nodes from the emission. All relative to the
/// peak.
void estimate_errors(std::vector<MapProduct>& fine, const std::vector<MapProduct>& coarse);

/// Largest absolute value of a map; blanks do not count.
float peak_of(const maps::Image& image);

/// File name part of a channel: "144MHz", "1GeV", "1-10GeV".
std::string file_label(const emission::Channel& channel);

/// Spectral index between two radio maps on the same pixels and beam, NaN where either is below `floor` of
/// its peak. S ~ nu^alpha.
maps::Image spectral_index(const maps::Image& low, const maps::Image& high, double floor);

} // namespace aureole::app
