#include "scenario/transport_keys.hpp"

#include "scenario/key_makers.hpp"

#include "aureole/base/constants.hpp"

#include <string>
#include <string_view>
#include <utility>

namespace aureole::scenario {

namespace {

using namespace dimension;

constexpr Dimension rigidity{.length = 1, .field = 1}; // statvolt
constexpr Dimension power{.length = 2, .mass = 1, .time = -3};
constexpr Dimension grammage{.length = -2, .mass = 1};
constexpr Dimension star_formation{.mass = 1, .time = -1};
constexpr Dimension rate_coefficient{.length = 3, .time = -1};

void add_sources(std::vector<Key>& keys, const std::string& species) {
    const bool electrons = species == "electrons";
    const std::string path = "transport." + species + ".source.<name>.";
    const auto add = [&](Key key) { keys.push_back(std::move(key)); };
    add(choice(
        path + "distribution",
        {"exponential", "green_2015", "case_bhattacharya_1996", "case_bhattacharya_1998", "lorimer_2006",
         "yusifov_kucuk_2004", "ring", "nucleus", "shell"},
        "exponential",
        "of the sources in radius: exp(-R/radius), fits to the Milky Way by author and year, a ring of "
        "a radius and width, a ball about the centre of a width, a spherical shell of a radius and "
        "width"));
    add(quantity(path + "radius", length, tiny, infinity, "4 kpc",
                 "scale length of exponential, radius of ring and shell"));
    add(quantity(path + "width", length, tiny, infinity, "0.5 kpc",
                 "Gaussian width (standard deviation) of ring, nucleus and shell"));
    add(quantity(path + "height", length, tiny, infinity, "0.1 kpc",
                 "exp(-abs(z)/height), of all but nucleus and shell"));
    add(number(path + "slope", 0, 10, "2.3", "particles per momentum go as p^-slope"));
    add(quantity(path + "break_rigidity", rigidity, 0, infinity, "0 GV",
                 "above it slope_above holds; 0: no break"));
    add(number(path + "slope_above", 0, 10, "2.3", "slope above the break"));
    add(number(path + "break_smoothness", 0.01, 10, "0.2", "width of the break in ln rigidity"));
    add(quantity(path + "cutoff_rigidity", rigidity, 0, infinity, "0 GV", "exponential cut-off; 0: none"));
    add(quantity(path + "least_rigidity", rigidity, 0, infinity, "0 GV",
                 "no particles below; 0: down to rest"));
    add(quantity(path + "power", power, tiny, infinity, "",
                 "kinetic energy of all particles injected, per time, in the whole galaxy"));
    add(quantity(path + "supernova_rate", frequency, tiny, infinity, "",
                 "in place of power: supernovae, each giving fraction x supernova_energy"));
    add(quantity(path + "star_formation_rate", star_formation, tiny, infinity, "",
                 "in place of power: core-collapse supernovae (8-40 solar masses) of the stars formed"));
    add(choice(path + "initial_mass_function", {"salpeter_1955", "kroupa_2001", "chabrier_2003"},
               "kroupa_2001", "of those stars, 0.1-100 solar masses, by author and year"));
    add(number(path + "fraction", tiny, 1, electrons ? "2e-3" : "0.1",
               "of the energy of a supernova that these particles get"));
    add(quantity(path + "supernova_energy", energy, tiny, infinity, "1e51 erg", "of one supernova"));
    if (electrons) {
        add(number(path + "electron_share", tiny, 10, "",
                   "in place of power: electrons over protons of all sources of protons, per rigidity, at "
                   "equal rigidity 10 GV (not at equal energy)"));
    }
}

/// A parameter of scattering laws, in TOML; the catalogue of laws has the defaults, which differ by kind.
struct LawKey {
    Kind type;
    std::string_view name;
    Dimension dimension;
    double least, greatest; ///< of all kinds together
    std::string_view help;  ///< "kinds: meaning; kinds: meaning"
    std::vector<std::string> choices = {};
};

std::vector<LawKey> law_parameters() {
    const auto number_of = [](std::string_view name, double least, double greatest, std::string_view help) {
        return LawKey{Kind::number, name, none, least, greatest, help};
    };
    const auto quantity_of = [](std::string_view name, const Dimension& dimension, double least,
                                std::string_view help) {
        return LawKey{Kind::quantity, name, dimension, least, infinity, help};
    };
    return {
        {Kind::quantity, "rate", frequency, tiny, 1e3,
         "constant: the rate; rigidity_power, falling, plasma_power, dust: the rate where the shape is 1"},
        quantity_of("reference_rigidity", rigidity, tiny, "rigidity_power, dust: where the shape is 1"),
        number_of("slope", -3, 20,
                  "rigidity_power, dust: delta of rigidity^-delta; falling: exponent of the power form; "
                  "slab_turbulence, fast_modes: q of k^-q; patchy: d of l^-d"),
        number_of("beta_power", -5, 5, "rigidity_power: exponent of beta"),
        {Kind::quantity_list, "break_rigidity", rigidity, tiny, infinity, "rigidity_power: breaks"},
        {Kind::number_list, "break_slope", none, -3, 3, "rigidity_power: delta above each break"},
        {Kind::number_list, "break_width", none, 1e-3, 10, "rigidity_power: widths in ln rigidity"},
        {Kind::choice,
         "along",
         none,
         -infinity,
         infinity,
         "falling: with the distance from the plane, the axis, the centre, or flattened by axis_ratio",
         {"height", "radius", "spherical", "ellipsoidal"}},
        {Kind::choice,
         "form",
         none,
         -infinity,
         infinity,
         "falling: exp(-s/length), (1 + s/length)^-slope, exp(-(s/length)^stretch)",
         {"exponential", "power", "stretched"}},
        quantity_of("length", length, tiny, "falling: scale of the fall"),
        number_of("stretch", 0.05, 10, "falling: exponent of the stretched form"),
        number_of("axis_ratio", 1e-3, 1e3, "falling: height over radius of the ellipsoids"),
        number_of("field_power", -10, 10, "plasma_power, dust: exponent of the field"),
        quantity_of("field_reference", magnetic_field, tiny, "plasma_power, dust: where its factor is 1"),
        number_of("density_power", -10, 10,
                  "plasma_power: exponent of the density of ions; dust: of all the gas"),
        quantity_of("density_reference", number_density, tiny,
                    "plasma_power, dust: where the factor of the density is 1"),
        number_of("speed_power", -10, 10, "plasma_power: exponent of the turbulent speed"),
        quantity_of("speed_reference", speed, tiny, "plasma_power: where its factor is 1"),
        number_of("scale_power", -10, 10, "plasma_power: exponent of the scale of the turbulence"),
        quantity_of("scale_reference", length, tiny, "plasma_power: where its factor is 1"),
        number_of("temperature_power", -10, 10, "plasma_power: exponent of the temperature"),
        quantity_of("temperature_reference", temperature, tiny, "plasma_power: where its factor is 1"),
        number_of("relative_field", tiny, 100,
                  "slab_turbulence, fast_modes: turbulent over whole field at the outer scale; not given: "
                  "from the media"),
        quantity_of("outer_scale", length, tiny,
                    "slab_turbulence, fast_modes: of the turbulence; not given: turbulence.scale"),
        number_of(
            "coefficient", tiny, 10,
            "slab_turbulence, fast_modes, self_confinement: rate over gyrofrequency and relative energy "
            "of the waves; anisotropic_alfvenic: kappa ln(l_A/r_g)/(c l_A)"),
        quantity_of("alfven_scale", length, tiny,
                    "anisotropic_alfvenic: l_A; not given: from the turbulence of the media"),
        quantity_of("damping_scale", length, 0, "fast_modes: shorter waves are damped away"),
        number_of("sharpness", 0.1, 100, "fast_modes: of the cut"),
        {Kind::choice_list,
         "damping",
         none,
         -infinity,
         infinity,
         "self_confinement: what takes energy from the waves",
         {"ion_neutral", "turbulent", "nonlinear_cascade", "nonlinear_landau", "none"}},
        quantity_of("linear_damping", frequency, 0, "self_confinement: one more rate of damping"),
        {Kind::quantity, "ion_neutral_coefficient", rate_coefficient, tiny, 1e-6,
         "self_confinement: energy rate over n_n (T/1e4 K)^0.4"},
        number_of("filling", tiny, 1, "patchy: filling factor per ln size at the reference size"),
        quantity_of("size", length, tiny, "patchy: reference size"),
        quantity_of("least_size", length, 0, "patchy: no smaller structures"),
        quantity_of("greatest_size", length, tiny, "patchy: no larger structures; not given: no limit"),
        {Kind::text, "expression", none, -infinity, infinity,
         "formula: in R, z, rigidity, beta, B, ...; `aureole laws formula` lists them"},
        {Kind::choice,
         "gives",
         none,
         -infinity,
         infinity,
         "formula: what it gives",
         {"rate", "parallel_diffusion", "isotropic_diffusion", "isotropic_third", "mean_free_path",
          "factor"}},
    };
}

void add_parameters(std::vector<Key>& keys, const std::string& path) {
    for (LawKey& row : law_parameters()) {
        Key key;
        key.path = path + std::string(row.name);
        key.kind = row.type;
        key.dimension = row.dimension;
        key.least = row.least;
        key.greatest = row.greatest;
        key.choices = std::move(row.choices);
        key.help = row.help;
        keys.push_back(std::move(key));
    }
}

void add_laws(std::vector<Key>& keys) {
    const std::string path = "law.<name>.";
    const auto add = [&](Key key) { keys.push_back(std::move(key)); };
    add(choice(path + "kind",
               {"constant", "rigidity_power", "falling", "plasma_power", "slab_turbulence",
                "anisotropic_alfvenic", "fast_modes", "self_confinement", "patchy", "dust", "formula",
                "table", "sum", "maximum"},
               "", "which of the scattering laws that `aureole laws` lists"));
    keys.back().required = true;
    add(other(path + "of", Kind::text_list, "", "sum, maximum: the names of the laws they are made of"));
    add(other(path + "table", Kind::path, "",
              "table: an ECSV file, or CSV with units in its heads, of the columns R, z, rigidity, rate"));
    add_parameters(keys, path);
    add(choice(path + "anchor", {"absolute", "rate", "energy_density", "grammage", "gamma_luminosity"},
               "absolute",
               "the rate is used as it stands, or scaled everywhere by the one factor that gives the value "
               "below"));
    add(quantity(path + "anchor_rate", frequency, tiny, 1e3, "1e-9 s-1",
                 "scattering rate at anchor_radius, anchor_height, anchor_rigidity"));
    add(quantity(path + "anchor_energy_density", energy_density, tiny, infinity, "",
                 "of the protons at anchor_radius, anchor_height"));
    add(quantity(path + "anchor_grammage", grammage, tiny, infinity, "",
                 "of protons met at anchor_radius, anchor_height, anchor_rigidity"));
    add(quantity(path + "anchor_gamma_luminosity", power, tiny, infinity, "",
                 "of the galaxy from pion decay, 0.1 to 100 GeV"));
    add(quantity(path + "anchor_radius", length, 0, infinity, "8 kpc", "distance from the axis"));
    add(quantity(path + "anchor_height", length, -infinity, infinity, "0 kpc", "distance from the plane"));
    add(quantity(path + "anchor_rigidity", rigidity, tiny, infinity, "1 GV", "of anchor_rate and grammage"));
    const std::string factor = path + "factor.<name>.";
    add(choice(factor + "kind", {"rigidity_power", "falling", "plasma_power", "dust", "formula"}, "",
               "a shape that multiplies the law, with the keys of a law of that kind and no rate"));
    keys.back().required = true;
    add_parameters(keys, factor);
}

} // namespace

void add_transport_keys(std::vector<Key>& keys) {
    const auto add = [&](Key key) { keys.push_back(std::move(key)); };
    const auto choices = [&](std::string path, std::vector<std::string> of, std::string otherwise,
                             std::string help) {
        add({std::move(path),
             Kind::choice_list,
             {},
             -infinity,
             infinity,
             std::move(otherwise),
             std::move(of),
             std::move(help)});
    };
    choices("transport.species", {"electrons", "protons"}, "[\"electrons\", \"protons\"]",
            "whose spectra are solved for; unless given, those whose source is transport or not said");
    add(boolean("transport.secondaries", true,
                "electrons and positrons made by the protons (where both are solved for)"));
    add(other("transport.laws", Kind::text_list, "all",
              "the scattering laws to solve for, by name; all: every [law.NAME] that no other is made of"));
    add(quantity("transport.energy_from", energy, tiny, infinity, "30 MeV",
                 "least kinetic energy of the spectra"));
    add(quantity("transport.energy_to", energy, tiny, infinity, "100 TeV",
                 "greatest kinetic energy of the spectra"));
    add(number("transport.bins_per_decade", 2, 200, "16", "steps in energy"));
    add(number("transport.headroom", 1, 1e6, "30",
               "the solution starts at so many times energy_to, with no particles above"));
    add(choice("transport.limiter", {"none", "square_root", "levermore_pomraning", "sum"}, "square_root",
               "keeps the diffusive flux below particles x speed"));
    const std::vector<std::string> edges{"free_escape", "marshak", "one_over_r", "outflow", "closed"};
    const std::string edge = " edge: density 0 there; particles leave at half the speed; density falls as "
                             "1/r beyond; no gradient; "
                             "no flux";
    add(choice("transport.edge_z", edges, "one_over_r", "upper and lower" + edge));
    add(choice("transport.edge_r", edges, "one_over_r", "outer" + edge));
    add(number("transport.perpendicular", tiny, 1, "1",
               "diffusion across the ordered field over that along it; 1: the same in all directions"));
    add(boolean("transport.streaming", true,
                "particles of self-confined laws drift at the Alfven speed and heat the gas by waves"));
    add(quantity(
        "transport.source_age", time, tiny, infinity, "10 Gyr",
        "time for which the sources have been on; particles that are older on average cannot be steady"));
    add(choice("transport.secondary_model",
               {"isospin_kelner_2006", "isospin", "kelner_2006_direct", "kelner_2006"}, "isospin_kelner_2006",
               "parametrisation of p + p -> electrons and positrons"));
    add(choice("transport.pion_loss", {"continuous", "catastrophic"}, "continuous",
               "protons lose half their energy in an inelastic collision, a little at a time, or vanish"));
    add(choice("transport.wind.kind", {"none", "constant", "linear", "accelerated", "file"}, "none",
               "away from the plane: speed tanh(abs(z)/base); speed abs(z)/height; speed (1 + abs(z)/height) "
               "tanh(abs(z)/base); the gas velocity of input.grid"));
    add(quantity("transport.wind.speed", speed, 0, constants::speed_of_light, "0 km s-1",
                 "of constant, linear, accelerated"));
    add(quantity("transport.wind.height", length, tiny, infinity, "5 kpc", "of linear and accelerated"));
    add(quantity("transport.wind.base", length, 0, infinity, "0.2 kpc",
                 "of constant and accelerated, which turn round at the plane over it; 0: at once"));
    add_sources(keys, "protons");
    add_sources(keys, "electrons");
    add_laws(keys);
}

} // namespace aureole::scenario
