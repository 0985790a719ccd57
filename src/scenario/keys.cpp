#include "aureole/scenario/keys.hpp"

#include "scenario/key_makers.hpp"
#include "scenario/profile_names.hpp"
#include "scenario/transport_keys.hpp"

#include "aureole/base/constants.hpp"

#include <algorithm>
#include <limits>

namespace aureole::scenario {

namespace {

enum class FromFile { no, yes };

/// The kinds of spatial profile; `file` only where a grid file can hold the quantity.
std::vector<std::string> profile_choices(FromFile from_file) {
    std::vector<std::string> choices;
    for (const std::string_view name : profile_names) {
        if (name != "file" || from_file == FromFile::yes) {
            choices.emplace_back(name);
        }
    }
    return choices;
}

/// The keys of a spatial profile below `path`.
void add_profile(std::vector<Key>& keys,
                 const std::string& path,
                 const Dimension& dimension,
                 const std::string& kind,
                 const std::string& value,
                 const std::string& what,
                 FromFile from_file = FromFile::yes) {
    keys.push_back(choice(path + ".profile", profile_choices(from_file), kind, "shape of " + what));
    keys.push_back(
        quantity(path + ".value", dimension, 0, infinity, value, "amplitude: the value at the centre"));
    keys.push_back(
        quantity(path + ".radius", dimension::length, tiny, infinity, "6 kpc", "radial scale length"));
    keys.push_back(quantity(path + ".height", dimension::length, tiny, infinity, "1 kpc", "scale height"));
    keys.push_back(quantity(path + ".core", dimension::length, tiny, infinity, "1 kpc",
                            "core radius of beta and power_law"));
    keys.push_back(number(path + ".slope", 0, 20, "1", "slope of beta and power_law"));
    keys.push_back(quantity(path + ".flare", dimension::length, 0, infinity, "0 kpc",
                            "the height grows as exp(R/flare); 0: it does not"));
    keys.push_back(other(path + ".formula", Kind::formula, "",
                         "expression in R, z, x, y, r (kpc) that multiplies the amplitude"));
}

void add_species(std::vector<Key>& keys,
                 const std::string& name,
                 const std::string& hdu,
                 std::vector<std::string> local,
                 const std::string& norm) {
    keys.push_back(choice(name + ".source", {"none", "file", "closed_form", "energy_density", "transport"},
                          "closed_form",
                          "where the spectra come from: " + hdu +
                              " of input.grid, closed forms, an energy density with a shape, or [transport], "
                              "which is the default where that table is"));
    keys.push_back(choice(name + ".spectrum", {"power_law", "broken_power_law", "local"}, "power_law",
                          "shape against energy"));
    const std::string first = local.front();
    keys.push_back(choice(name + ".local", std::move(local), first,
                          "published local interstellar spectrum, by author and year"));
    keys.push_back(quantity(name + ".norm", dimension::spectral_density, 0, infinity, norm,
                            "density per energy at reference_energy where the spatial profile is 1"));
    keys.push_back(quantity(name + ".reference_energy", dimension::energy, tiny, infinity, "1 GeV",
                            "kinetic energy of norm"));
    keys.push_back(number(name + ".slope", -10, 20, "2.7", "N ~ T^-slope"));
    keys.push_back(
        quantity(name + ".break_energy", dimension::energy, tiny, infinity, "5 GeV", "of broken_power_law"));
    keys.push_back(number(name + ".slope_above", -10, 20, "3.2", "slope above the break"));
    keys.push_back(number(name + ".break_smoothness", 0.01, 10, "0.5", "width of the break in powers of e"));
    keys.push_back(quantity(name + ".cutoff_energy", dimension::energy, 0, infinity, "0 GeV",
                            "exponential cut-off; 0: none"));
    keys.push_back(
        quantity(name + ".energy_from", dimension::energy, tiny, infinity, "10 MeV", "first energy node"));
    keys.push_back(quantity(name + ".energy_to", dimension::energy, tiny, infinity,
                            name == "electrons" ? "100 TeV" : "1 PeV", "last energy node"));
    keys.push_back(integer(name + ".energy_nodes", 4, 2000, "97", "energy nodes, even in the logarithm"));
    keys.push_back(number(name + ".height_slope", -2, 2, "0",
                          "the height of the spatial profile goes as (T/reference_energy)^height_slope"));
    add_profile(keys, name + ".space", dimension::none, "double_exponential", "1", "the spatial distribution",
                FromFile::no);
    add_profile(keys, name + ".energy_density", dimension::energy_density, "none", "0 eV cm-3",
                "the energy density (source = energy_density)");
}

std::vector<Key> make_keys() {
    using namespace dimension;
    std::vector<Key> keys;
    const auto add = [&](Key key) { keys.push_back(std::move(key)); };
    add(other("run.title", Kind::text, "", "a line about the run, for headers and tables"));
    add(other("run.object", Kind::text, "MODEL", "name of the galaxy, for headers"));

    add(other("input.grid", Kind::path, "",
              "HALO-GRID file with spectra and media; its grid replaces [grid]"));

    add(choice("grid.geometry", {"RZ", "XYZ"}, "RZ", "axisymmetric or Cartesian"));
    add(quantity("grid.radius", length, tiny, infinity, "20 kpc", "outer radius (RZ)"));
    add(quantity("grid.half_width", length, tiny, infinity, "20 kpc", "half the width in x and y (XYZ)"));
    add(quantity("grid.height", length, tiny, infinity, "15 kpc", "greatest distance from the plane"));
    add(integer("grid.cells_r", 1, 100000, "64", "cells in radius (RZ)"));
    add(integer("grid.cells_xy", 1, 10000, "64", "cells in x and in y (XYZ)"));
    add(integer("grid.cells_z", 1, 100000, "64", "cells in height, from the plane to grid.height"));
    add(quantity("grid.smallest_r", length, 0, infinity, "0 kpc",
                 "width of the innermost cells; 0: all alike"));
    add(quantity("grid.smallest_z", length, 0, infinity, "0.05 kpc",
                 "height of the cells at the plane; 0: all alike"));
    add(boolean("grid.mirror", true,
                "the galaxy is the same on both sides of the plane: only z >= 0 is stored"));
    add(integer("grid.sectors", 4, 4096, "32", "azimuth sectors of a ring for an ordered field (RZ)"));

    add_profile(keys, "field.ordered", magnetic_field, "none", "0 uG", "the strength of the ordered field");
    add(choice("field.ordered.direction", {"toroidal", "spiral", "vertical", "x_shaped", "components"},
               "toroidal", "direction of the ordered field"));
    add(quantity("field.ordered.pitch", angle, -constants::pi, constants::pi, "15 deg",
                 "pitch angle of spiral and x_shaped"));
    add(quantity("field.ordered.tilt", angle, -constants::pi, constants::pi, "60 deg",
                 "angle to the plane far from it (x_shaped)"));
    add(other("field.ordered.formula_x", Kind::formula, "0",
              "direction along x, or R on an RZ grid (components)"));
    add(other("field.ordered.formula_y", Kind::formula, "0",
              "direction along y, or azimuth on an RZ grid (components)"));
    add(other("field.ordered.formula_z", Kind::formula, "0",
              "direction along z (components); of a mirrored grid's other side x and y (R and azimuth) keep "
              "their sign and z turns: even parity, whatever the formulas"));
    add_profile(keys, "field.random", magnetic_field, "none", "0 uG",
                "the rms of the three-dimensional random field");

    add_profile(keys, "gas.hi", number_density, "none", "0 cm-3", "atomic gas, H nuclei");
    add_profile(keys, "gas.h2", number_density, "none", "0 cm-3",
                "molecular gas, H nuclei (twice the molecules)");
    add_profile(keys, "gas.hii", number_density, "none", "0 cm-3", "ionised gas, H nuclei");
    add_profile(keys, "gas.electrons", number_density, "none", "0 cm-3", "thermal electrons");
    add_profile(keys, "gas.temperature", temperature, "none", "0 K", "temperature of the ionised gas");

    add(boolean("radiation.cmb", true, "the cosmic microwave background"));
    add(quantity("radiation.cmb_temperature", temperature, tiny, 1e9, "2.7255 K",
                 "its temperature (Fixsen 2009, ApJ 707, 916)"));
    add(quantity("radiation.component.<name>.temperature", temperature, tiny, 1e9, "",
                 "of the diluted black body"));
    add_profile(keys, "radiation.component.<name>", energy_density, "constant", "", "its energy density",
                FromFile::no);
    for (Key& key : keys) {
        key.required = key.path == "radiation.component.<name>.temperature" ||
                       key.path == "radiation.component.<name>.value";
    }

    add_profile(keys, "turbulence.speed", speed, "none", "0 km s-1", "the turbulent speed");
    add_profile(keys, "turbulence.scale", length, "none", "0 kpc", "the outer scale of the turbulence");

    add_species(keys, "electrons", "CR_ELECTRON, CR_POSITRON or CR_LEPTON", {"potgieter_2015"},
                "1.2e-11 cm-3 GeV-1");
    add_species(keys, "protons", "CR_PROTON", {"vos_potgieter_2015", "dermer_1986"}, "1.5e-9 cm-3 GeV-1");
    add_transport_keys(keys);

    add(boolean("emission.synchrotron", true, "synchrotron radiation"));
    add(boolean("emission.inverse_compton", true, "inverse-Compton radiation"));
    add(boolean("emission.bremsstrahlung", true, "bremsstrahlung"));
    add(boolean("emission.pion_decay", true, "gamma rays from neutral pions"));
    add(choice("emission.pion_model",
               {"kafexhiu_2014_continuous", "kafexhiu_2014", "kafexhiu_2014_geant4", "kafexhiu_2014_sibyll",
                "kafexhiu_2014_qgsjet", "kelner_2006"},
               "kafexhiu_2014_continuous", "parametrisation of p + p -> gamma, by author and year"));
    add(number("emission.nuclear_enhancement", 1, 10, "1.8",
               "nuclei of beam and gas over p + p (Mori 2009, Astropart. Phys. 31, 341)"));
    add(number("emission.helium_fraction", 0, 1, "0.1", "helium per hydrogen by number, for bremsstrahlung"));

    add({"radio.frequencies",
         Kind::quantity_list,
         frequency,
         1e6,
         1e13,
         "[]",
         {},
         "frequencies of the radio maps"});
    add(quantity("radio.bandwidth", frequency, 0, 1e13, "0 GHz",
                 "width of every radio channel; 0: a single frequency"));
    add(choice("radio.unit", {"Jy/beam", "Jy/pixel", "MJy/sr", "K"}, "Jy/beam", "unit of the radio maps"));
    add(quantity("radio.beam_major", angle, 0, 1, "0 deg",
                 "full width at half maximum of the beam; 0: no beam"));
    add(quantity("radio.beam_minor", angle, 0, 1, "0 deg", "the same across; 0: as beam_major"));
    add(quantity("radio.beam_angle", angle, -7, 7, "0 deg",
                 "position angle of the major axis, North through East"));
    add({"gamma.energies",
         Kind::quantity_list,
         energy,
         1e3 * constants::electronvolt,
         1e14 * constants::electronvolt,
         "[]",
         {},
         "photon energies of the gamma-ray maps, 1 keV to 100 TeV"});
    add({"gamma.band_edges",
         Kind::quantity_list,
         energy,
         1e3 * constants::electronvolt,
         1e14 * constants::electronvolt,
         "[]",
         {},
         "edges of neighbouring bands of the gamma-ray maps, in place of gamma.energies"});
    add(choice("gamma.unit", {"cm-2 s-1 sr-1 MeV-1", "cm-2 s-1 sr-1 GeV-1"}, "cm-2 s-1 sr-1 MeV-1",
               "unit of maps at single energies; bands are in cm-2 s-1 sr-1"));
    add(quantity("gamma.beam_major", angle, 0, 1, "0 deg",
                 "Gaussian smoothing of the gamma-ray maps, full width; 0: none"));

    add(quantity("view.inclination", angle, 0, constants::pi, "90 deg", "0: face-on, 90 deg: edge-on"));
    add(quantity("view.position_angle", angle, -7, 7, "270 deg",
                 "of the galaxy's x axis, North through East"));
    add(quantity("view.azimuth", angle, -7, 7, "0 deg", "turn of the galaxy about its axis"));
    add(quantity("view.distance", length, tiny, infinity, "10 Mpc", "distance of the galaxy"));
    add(quantity("view.distance_error", length, 0, infinity, "0 Mpc",
                 "its error, carried to the scale heights"));
    add(choice("view.projection", {"orthographic", "perspective"}, "orthographic",
               "from infinity, or from the distance given"));
    add(quantity("view.ra", angle, -7, 7, "0 deg", "right ascension of the centre"));
    add(quantity("view.dec", angle, -constants::pi / 2, constants::pi / 2, "0 deg",
                 "declination of the centre"));

    add(quantity("map.pixel", angle, 0, 1, "0 deg",
                 "pixel; 0: a quarter of the radio beam, or a 256th of the grid"));
    add(quantity("map.width", angle, 0, 1, "0 deg", "extent in right ascension; 0: the whole grid"));
    add(quantity("map.height", angle, 0, 1, "0 deg", "extent in declination; 0: the whole grid"));
    add(number("map.tolerance", 1e-6, 0.1, "1e-3",
               "relative error allowed to the total flux and to each pixel"));
    add(boolean("map.separate", false, "a map for each process beside the totals"));
    add(boolean("map.polarisation", false, "maps of Stokes Q and U (no Faraday rotation)"));
    add(boolean("map.spectral_index", true,
                "maps of the spectral index between neighbouring radio frequencies"));

    add(integer("heights.strips", 1, 1000, "5", "strips along the major axis"));
    add(quantity("heights.strip_width", length, 0, infinity, "0 kpc",
                 "width of a strip; 0: so that the strips fill the middle half of the map"));
    add(quantity("heights.bin", length, 0, infinity, "0 kpc",
                 "height of a bin; 0: half the beam, or two pixels"));
    add(quantity("heights.from", length, 0, infinity, "0 kpc",
                 "least distance from the plane that is fitted"));
    add(quantity("heights.to", length, 0, infinity, "0 kpc",
                 "greatest distance from the plane; 0: where the map ends"));
    keys.push_back({"heights.models",
                    Kind::choice_list,
                    {},
                    -infinity,
                    infinity,
                    "[\"exponential\", \"gaussian\", \"two_exponential\"]",
                    {"exponential", "gaussian", "sech2", "two_exponential", "two_gaussian"},
                    "models tried; one is chosen for all maps (AICc)"});
    add(choice("heights.inclination", {"forward", "naive"}, "forward",
               "fit the inclined disc where the galaxy is not edge-on, or the edge-on model as it is"));
    add(quantity("heights.disc_radius", length, 0, infinity, "0 kpc",
                 "radial scale length of the inclined disc; 0: fitted"));
    add({"heights.rms",
         Kind::text_list,
         {},
         -infinity,
         infinity,
         "[]",
         {},
         "noise the errors stand for, one per radio frequency or one for all, such as \"10 uJy/beam\"; none: "
         "noiseless"});
    add(number("heights.calibration_error", 0, 1, "0.05", "widens the errors of amplitudes"));
    add(choice("heights.sides", {"both", "each"}, "both", "fit both sides of the plane together, or each"));

    add(boolean("accuracy.estimate", true, "estimate the numerical error from a coarser evaluation"));
    return keys;
}

/// The part of a dotted path before the first dot, taken off its front.
std::string_view take_part(std::string_view& path) {
    const std::string_view part = path.substr(0, path.find('.'));
    path.remove_prefix(std::min(path.size(), part.size() + 1));
    return part;
}

/// Whether `path` is `pattern`, or its beginning up to a dot; "<name>" stands for any one part that is not
/// empty.
enum class Match { none, beginning, whole };
Match match(std::string_view pattern, std::string_view path) {
    if (path.empty() || path.back() == '.') {
        return Match::none;
    }
    while (!pattern.empty() && !path.empty()) {
        const std::string_view expected = take_part(pattern);
        const std::string_view found = take_part(path);
        if (found != expected && (expected != "<name>" || found.empty())) {
            return Match::none;
        }
    }
    if (!path.empty()) {
        return Match::none;
    }
    return pattern.empty() ? Match::whole : Match::beginning;
}

/// The pattern with every "<name>" as the user's path has it.
std::string with_names_of(std::string_view pattern, std::string_view path) {
    std::string named;
    while (!pattern.empty()) {
        const std::string_view part = take_part(pattern);
        const std::string_view found = take_part(path);
        named += named.empty() ? "" : ".";
        named += part == "<name>" && !found.empty() ? found : part;
    }
    return named;
}

/// Edits between two words: insertions, deletions, substitutions, swaps of neighbours (Damerau 1964, Comm.
/// ACM 7, 171).
std::size_t edits(std::string_view a, std::string_view b) {
    std::vector<std::vector<std::size_t>> d(a.size() + 1, std::vector<std::size_t>(b.size() + 1));
    for (std::size_t i = 0; i <= a.size(); ++i) {
        for (std::size_t j = 0; j <= b.size(); ++j) {
            if (i == 0 || j == 0) {
                d[i][j] = i + j;
                continue;
            }
            d[i][j] = std::min(
                {d[i - 1][j] + 1, d[i][j - 1] + 1, d[i - 1][j - 1] + (a[i - 1] == b[j - 1] ? 0 : 1)});
            if (i > 1 && j > 1 && a[i - 1] == b[j - 2] && a[i - 2] == b[j - 1]) {
                d[i][j] = std::min(d[i][j], d[i - 2][j - 2] + 1);
            }
        }
    }
    return d[a.size()][b.size()];
}

/// The nearest to `path` of the candidates that the keys offer; the first of equally near ones.
template <class Candidates> std::string nearest_of(std::string_view path, const Candidates& candidates) {
    path = path.substr(0, 100); // no key is longer
    std::string best;
    std::size_t least = std::numeric_limits<std::size_t>::max();
    for (const Key& key : keys()) {
        for (const std::string& candidate : candidates(with_names_of(key.path, path))) {
            // Someone who shortens a name means that name, however much is left out.
            const std::size_t distance = candidate.starts_with(path) ? 1 : edits(path, candidate);
            if (distance < least) {
                least = distance;
                best = candidate;
            }
        }
    }
    return best;
}

} // namespace

const std::vector<Key>& keys() {
    static const std::vector<Key> table = make_keys();
    return table;
}

const Key* find_key(std::string_view path) {
    for (const Key& key : keys()) {
        if (match(key.path, path) == Match::whole) {
            return &key;
        }
    }
    return nullptr;
}

bool is_table(std::string_view path) {
    return std::any_of(keys().begin(), keys().end(),
                       [&](const Key& key) { return match(key.path, path) == Match::beginning; });
}

bool is_named_table(std::string_view path) {
    constexpr std::string_view part = ".<name>.";
    for (const Key& key : keys()) {
        for (std::size_t at = key.path.find(part); at != std::string::npos;
             at = key.path.find(part, at + 1)) {
            if (match(std::string_view(key.path).substr(0, at + part.size() - 1), path) == Match::whole) {
                return true;
            }
        }
    }
    return false;
}

std::string nearest_key(std::string_view path) {
    return nearest_of(path, [](const std::string& key) { return std::vector<std::string>{key}; });
}

std::string nearest_table(std::string_view path) {
    return nearest_of(path, [](const std::string& key) {
        std::vector<std::string> tables;
        for (std::size_t dot = key.find('.'); dot != std::string::npos; dot = key.find('.', dot + 1)) {
            tables.push_back(key.substr(0, dot));
        }
        return tables;
    });
}

} // namespace aureole::scenario
