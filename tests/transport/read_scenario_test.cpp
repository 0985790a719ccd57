#include "grid/sample_file.hpp"

#include "aureole/base/constants.hpp"
#include "aureole/base/error.hpp"
#include "aureole/scenario/keys.hpp"
#include "aureole/scenario/starter.hpp"
#include "aureole/transport/read_scenario.hpp"

#include <catch2/catch.hpp>

#include <algorithm>
#include <cmath>
#include <filesystem>
#include <fstream>
#include <limits>
#include <random>
#include <string>
#include <unistd.h>
#include <vector>

using namespace aureole;
using namespace aureole::transport;
using Catch::Matchers::Contains;

namespace {

constexpr double kpc = constants::kiloparsec;
constexpr double gigavolt = 1e17 / constants::speed_of_light; // statvolt

const std::string sources = "[transport.protons.source.remnants]\npower = \"1e41 erg s-1\"\n"
                            "[transport.electrons.source.remnants]\nelectron_share = 0.01\n";
const std::string law = "[law.a]\nkind = \"constant\"\n";

TransportSpec read(const std::string& text, const std::string& file = "halo.toml") {
    return read_transport(scenario::parse(text, file, {}));
}

std::string complaint(const std::string& text, const std::string& file = "halo.toml") {
    try {
        (void)read(text, file);
    } catch (const Error& error) {
        return (error.kind() == ErrorKind::scenario ? "" : "NO SCENARIO ERROR: ") + std::string(error.what());
    }
    return "accepted";
}

/// A folder with one file in it, gone afterwards.
struct Folder {
    std::filesystem::path path =
        std::filesystem::temp_directory_path() / ("aureole_read_transport_" + std::to_string(getpid()));
    Folder() { std::filesystem::create_directory(path); }
    ~Folder() { std::filesystem::remove_all(path); }
    Folder(const Folder&) = delete;
    Folder& operator=(const Folder&) = delete;
    void write(const char* name, const std::string& text) const { std::ofstream(path / name) << text; }
    std::string scenario() const { return (path / "halo.toml").string(); }
};

scenario::Kind kind_of(ParameterKind kind, const Dimension& dimension, bool rising) {
    switch (kind) {
    case ParameterKind::number:
        return dimension == dimension::none ? scenario::Kind::number : scenario::Kind::quantity;
    case ParameterKind::list:
        return rising ? scenario::Kind::quantity_list : scenario::Kind::number_list;
    case ParameterKind::choice:
        return scenario::Kind::choice;
    case ParameterKind::words:
        return scenario::Kind::choice_list;
    case ParameterKind::text:
        break;
    }
    return scenario::Kind::text;
}

std::vector<std::string> words_of(std::string_view text) {
    std::vector<std::string> words;
    while (!text.empty()) {
        const std::size_t end = std::min(text.size(), text.find(", "));
        words.emplace_back(text.substr(0, end));
        text.remove_prefix(std::min(text.size(), end + 2));
    }
    return words;
}

} // namespace

TEST_CASE("the keys of laws are the parameters of the catalogue", "[transport][keys]") {
    std::vector<std::string> kinds;
    std::vector<std::string> factors;
    for (const LawEntry& entry : law_catalogue()) {
        kinds.emplace_back(entry.name);
        if (entry.kind == LawClass::shape || entry.name == "formula") {
            factors.emplace_back(entry.name);
        }
        if (entry.name == "table") {
            continue; // read from a file
        }
        for (const LawParameter& parameter : entry.parameters) {
            for (const char* table : {"law.a.", "law.a.factor.b."}) {
                INFO(entry.name << ": " << parameter.name);
                const auto* key = scenario::find_key(table + std::string(parameter.name));
                REQUIRE(key != nullptr);
                CHECK(key->kind ==
                      kind_of(parameter.kind, parameter.dimension, parameter.name == "break_rigidity"));
                CHECK(key->dimension == parameter.dimension);
                CHECK(key->otherwise.empty()); // defaults differ by kind
                CHECK_THAT(key->help, Contains(std::string(entry.name)));
                if (parameter.kind == ParameterKind::number || parameter.kind == ParameterKind::list) {
                    CHECK(key->least <= parameter.least);
                    CHECK(key->greatest >= parameter.greatest);
                } else {
                    CHECK(key->choices == words_of(parameter.choices));
                }
            }
        }
    }
    CHECK(scenario::find_key("law.a.kind")->choices == kinds);
    CHECK(scenario::find_key("law.a.factor.b.kind")->choices == factors);
}

TEST_CASE("every key of a law belongs to the catalogue, and no range is wider than it need be",
          "[transport][keys]") {
    const std::string prefix = "law.<name>.";
    for (const scenario::Key& key : scenario::keys()) {
        if (!key.path.starts_with(prefix)) {
            continue;
        }
        std::string name = key.path.substr(prefix.size());
        name = name.starts_with("factor.<name>.") ? name.substr(14) : name;
        if (name == "kind" || name == "of" || name == "table" || name.starts_with("anchor")) {
            continue;
        }
        INFO(key.path);
        double least = std::numeric_limits<double>::infinity();
        double greatest = -least;
        for (const LawEntry& entry : law_catalogue()) {
            const LawParameter* parameter = find_parameter(entry, name);
            if (parameter != nullptr && entry.name != "table") {
                least = std::min(least, parameter->least);
                greatest = std::max(greatest, parameter->greatest);
            }
        }
        REQUIRE(least <= greatest);
        if (key.kind == scenario::Kind::number || key.kind == scenario::Kind::quantity ||
            key.kind == scenario::Kind::number_list || key.kind == scenario::Kind::quantity_list) {
            CHECK(key.least == least);
            CHECK(key.greatest == greatest);
        }
    }
}

TEST_CASE("a scenario with sources and a law needs no more to be solved", "[transport][scenario]") {
    const TransportSpec spec = read(sources + law);
    const TransportSpec defaults;
    CHECK(spec.electrons);
    CHECK(spec.protons);
    CHECK(spec.secondaries);
    REQUIRE(spec.laws.size() == 1);
    CHECK(spec.laws[0].name == "a");
    CHECK(spec.laws[0].law.name == "constant");
    CHECK(spec.laws[0].anchor.kind == AnchorSpec::Kind::absolute);
    REQUIRE(spec.proton_sources.size() == 1);
    CHECK(spec.proton_sources[0].power == 1e41);
    CHECK(spec.proton_sources[0].shape.kind == "exponential");
    CHECK(spec.proton_sources[0].shape.radius == 4 * kpc);
    CHECK_FALSE(spec.proton_sources[0].spectrum.break_rigidity);
    CHECK_FALSE(spec.proton_sources[0].spectrum.cutoff_rigidity);
    // What the scenario says by default is what the spec has by default.
    CHECK(spec.perpendicular == defaults.perpendicular);
    CHECK(spec.edge_z == defaults.edge_z);
    CHECK(spec.edge_r == defaults.edge_r);
    CHECK(spec.limiter == defaults.limiter);
    CHECK(spec.streaming == defaults.streaming);
    CHECK(spec.bins_per_decade == defaults.bins_per_decade);
    CHECK(spec.headroom == defaults.headroom);
    CHECK(spec.helium_fraction == defaults.helium_fraction);
    CHECK(spec.nuclear_enhancement == defaults.nuclear_enhancement);
    CHECK(spec.pion_model == defaults.pion_model);
    CHECK(spec.secondary_model == defaults.secondary_model);
    CHECK(spec.pion_loss_is_catastrophic == defaults.pion_loss_is_catastrophic);
    CHECK(spec.wind.kind == defaults.wind.kind);
}

TEST_CASE("every key of transport arrives in the spec", "[transport][scenario]") {
    const TransportSpec spec =
        read("emission.helium_fraction = 0.2\nemission.nuclear_enhancement = 1.5\n"
             "emission.pion_model = \"kelner_2006\"\n"
             "[transport]\nspecies = [\"protons\"]\nlaws = [\"b\", \"a\"]\nenergy_from = \"1 GeV\"\n"
             "energy_to = \"1 TeV\"\nbins_per_decade = 8\nheadroom = 10\nlimiter = \"sum\"\n"
             "edge_z = \"closed\"\nedge_r = \"outflow\"\nperpendicular = 0.1\nstreaming = false\n"
             "source_age = \"10 Myr\"\nsecondary_model = \"kelner_2006\"\npion_loss = \"catastrophic\"\n"
             "[transport.wind]\nkind = \"accelerated\"\nspeed = \"100 km s-1\"\nheight = \"2 kpc\"\n"
             "base = \"0.3 kpc\"\n"
             "[transport.protons.source.arms]\npower = \"2e40 erg s-1\"\ndistribution = \"ring\"\n"
             "radius = \"5 kpc\"\nwidth = \"1 kpc\"\nheight = \"0.3 kpc\"\nslope = 2.1\n"
             "break_rigidity = \"10 GV\"\nslope_above = 2.5\nbreak_smoothness = 0.3\n"
             "cutoff_rigidity = \"1 PV\"\nleast_rigidity = \"0.1 GV\"\n"
             "[transport.protons.source.centre]\npower = \"1e40 erg s-1\"\ndistribution = \"nucleus\"\n"
             "[law.a]\nkind = \"patchy\"\nanchor = \"grammage\"\nanchor_grammage = \"9 g cm-2\"\n"
             "anchor_radius = \"7 kpc\"\nanchor_height = \"-1 kpc\"\nanchor_rigidity = \"5 GV\"\n"
             "[law.b]\nkind = \"self_confinement\"\ndamping = [\"turbulent\", \"nonlinear_landau\"]\n");
    CHECK_FALSE(spec.electrons);
    CHECK(spec.protons);
    CHECK_FALSE(spec.secondaries);
    REQUIRE(spec.laws.size() == 2);
    CHECK(spec.laws[0].name == "b");
    CHECK(spec.laws[0].law.texts.at("damping") == "turbulent, nonlinear_landau");
    CHECK(spec.laws[1].anchor.kind == AnchorSpec::Kind::grammage);
    CHECK(spec.laws[1].anchor.value == 9);
    CHECK(spec.laws[1].anchor.radius == 7 * kpc);
    CHECK(spec.laws[1].anchor.height == -kpc);
    CHECK(spec.laws[1].anchor.rigidity == Approx(5 * gigavolt).epsilon(1e-14));
    CHECK(spec.energy_from == Approx(constants::gigaelectronvolt).epsilon(1e-14));
    CHECK(spec.energy_to == Approx(1e3 * constants::gigaelectronvolt).epsilon(1e-14));
    CHECK(spec.bins_per_decade == 8);
    CHECK(spec.headroom == 10);
    CHECK(spec.limiter == "sum");
    CHECK(spec.edge_z == Edge::closed);
    CHECK(spec.edge_r == Edge::outflow);
    CHECK(spec.perpendicular == 0.1);
    CHECK_FALSE(spec.streaming);
    CHECK(spec.source_age == Approx(1e7 * constants::year).epsilon(1e-14));
    CHECK(spec.helium_fraction == 0.2);
    CHECK(spec.nuclear_enhancement == 1.5);
    CHECK(spec.pion_model == physics::PionModel::kelner_2006);
    CHECK(spec.secondary_model == physics::SecondaryModel::kelner_2006);
    CHECK(spec.pion_loss_is_catastrophic);
    CHECK(spec.wind.kind == "accelerated");
    CHECK(spec.wind.speed == 1e7);
    CHECK(spec.wind.height == 2 * kpc);
    CHECK(spec.wind.base == Approx(0.3 * kpc).epsilon(1e-14));
    REQUIRE(spec.proton_sources.size() == 2);
    const SourceSpec& arms = spec.proton_sources[0];
    CHECK(arms.shape.kind == "ring");
    CHECK(arms.shape.width == kpc);
    CHECK(arms.spectrum.slope == 2.1);
    CHECK(*arms.spectrum.break_rigidity == Approx(10 * gigavolt).epsilon(1e-14));
    CHECK(arms.spectrum.slope_above == 2.5);
    CHECK(arms.spectrum.break_smoothness == 0.3);
    CHECK(*arms.spectrum.cutoff_rigidity == Approx(1e6 * gigavolt).epsilon(1e-14));
    CHECK(arms.spectrum.least_rigidity == Approx(0.1 * gigavolt).epsilon(1e-14));
    CHECK(spec.proton_sources[1].shape.kind == "nucleus");
}

TEST_CASE("choices of the scenario stand in the order of the enumerations", "[transport][scenario]") {
    const auto with = [](const std::string& key, const std::string& value) {
        return read(key + " = \"" + value + "\"\n" + sources + law);
    };
    const auto choices = [](const char* key) { return scenario::find_key(key)->choices; };
    const auto models = choices("emission.pion_model");
    const physics::PionModel pion_models[] = {
        physics::PionModel::kafexhiu_2014_continuous, physics::PionModel::kafexhiu_2014,
        physics::PionModel::kafexhiu_2014_geant4,     physics::PionModel::kafexhiu_2014_sibyll,
        physics::PionModel::kafexhiu_2014_qgsjet,     physics::PionModel::kelner_2006};
    REQUIRE(models.size() == std::size(pion_models));
    for (std::size_t i = 0; i < models.size(); ++i) {
        CHECK(with("emission.pion_model", models[i]).pion_model == pion_models[i]);
    }
    const Edge edges[] = {Edge::free_escape, Edge::marshak, Edge::one_over_r, Edge::outflow, Edge::closed};
    const auto names = choices("transport.edge_z");
    REQUIRE(names.size() == std::size(edges));
    for (std::size_t i = 0; i < names.size(); ++i) {
        CHECK(with("transport.edge_z", names[i]).edge_z == edges[i]);
    }
    CHECK(names[0] == "free_escape");
    CHECK(names[4] == "closed");
    const physics::SecondaryModel secondaries[] = {
        physics::SecondaryModel::isospin_kelner_2006, physics::SecondaryModel::isospin,
        physics::SecondaryModel::kelner_2006_direct, physics::SecondaryModel::kelner_2006};
    const auto listed = choices("transport.secondary_model");
    REQUIRE(listed.size() == std::size(secondaries));
    for (std::size_t i = 0; i < listed.size(); ++i) {
        CHECK(with("transport.secondary_model", listed[i]).secondary_model == secondaries[i]);
    }
}

TEST_CASE("sources get the power of supernovae, of stars, or of a share of the protons",
          "[transport][scenario]") {
    const auto power = [](const std::string& keys) {
        return read("protons.source = \"transport\"\nelectrons.source = \"none\"\n"
                    "[transport.protons.source.a]\n" +
                    keys + "\n" + law)
            .proton_sources[0]
            .power;
    };
    // 0.02 per Julian year of 1e51 erg, a tenth of it: 2e48 erg in 3.15576e7 s
    CHECK(power("supernova_rate = \"0.02 yr-1\"") == Approx(2e48 / 3.15576e7).epsilon(1e-12));
    CHECK(power("supernova_rate = \"0.02 yr-1\"\nfraction = 0.2\nsupernova_energy = \"5e50 erg\"") ==
          Approx(2e48 / 3.15576e7).epsilon(1e-12));
    // Stars of 8-40 per solar mass formed, 0.1-100: integrals of the published functions (from memory)
    CHECK(power("star_formation_rate = \"2 solMass yr-1\"") ==
          Approx(2 * 0.0101 * 1e50 / 3.15576e7).epsilon(0).margin(2 * 5e-5 * 1e50 / 3.15576e7));
    CHECK(power("star_formation_rate = \"2 solMass yr-1\"\ninitial_mass_function = \"salpeter_1955\"") ==
          Approx(2 * 0.0068 * 1e50 / 3.15576e7).epsilon(0).margin(2 * 5e-5 * 1e50 / 3.15576e7));

    // int T p^-s dp from 0 to infinity goes as m^(2-s): equal slopes give a ratio of powers in closed form.
    const double ratio = std::pow(constants::electron_mass / constants::proton_mass, 2 - 2.3);
    const TransportSpec spec = read(sources + law);
    CHECK(spec.electron_sources[0].power / spec.proton_sources[0].power ==
          Approx(0.01 * ratio).epsilon(3e-5));
    // Two populations of protons count together; so does half of the power in each.
    const TransportSpec two = read("[transport.protons.source.a]\npower = \"5e40 erg s-1\"\n"
                                   "[transport.protons.source.b]\npower = \"5e40 erg s-1\"\n"
                                   "distribution = \"green_2015\"\n"
                                   "[transport.electrons.source.a]\nelectron_share = 0.01\n" +
                                   law);
    CHECK(two.electron_sources[0].power == Approx(spec.electron_sources[0].power).epsilon(1e-12));
    // A share at 10 GV is not changed by what electrons do below and above, but the power is.
    const TransportSpec cut = read(sources + "least_rigidity = \"1 GV\"\ncutoff_rigidity = \"1 TV\"\n" + law);
    CHECK(cut.electron_sources[0].power < 0.5 * spec.electron_sources[0].power);
}

TEST_CASE("laws are made of laws and factors by name", "[transport][scenario]") {
    const TransportSpec spec =
        read(sources + "[law.both]\nkind = \"sum\"\nof = [\"waves\", \"patches\"]\n"
                       "anchor = \"rate\"\nanchor_rate = \"2e-9 s-1\"\n"
                       "[law.waves]\nkind = \"slab_turbulence\"\nrelative_field = 0.1\n"
                       "[law.patches]\nkind = \"patchy\"\n"
                       "[law.patches.factor.up]\nkind = \"falling\"\n"
                       "length = \"4 kpc\"\nform = \"stretched\"\n"
                       "[law.patches.factor.out]\nkind = \"formula\"\n"
                       "expression = \"1/(1 + R)\"\ngives = \"factor\"\n"
                       "[law.other]\nkind = \"constant\"\n");
    REQUIRE(spec.laws.size() == 2); // those that no other is made of
    CHECK(spec.laws[0].name == "both");
    CHECK(spec.laws[1].name == "other");
    const LawSpec& sum = spec.laws[0].law;
    CHECK(spec.laws[0].anchor.kind == AnchorSpec::Kind::rate);
    CHECK(spec.laws[0].anchor.value == 2e-9);
    REQUIRE(sum.children.size() == 2);
    CHECK(sum.children[0].name == "slab_turbulence");
    CHECK(sum.children[0].numbers.at("relative_field") == 0.1);
    REQUIRE(sum.children[1].children.size() == 2);
    CHECK(sum.children[1].children[0].name == "formula");
    CHECK(sum.children[1].children[1].numbers.at("length") == 4 * kpc);
    CHECK(sum.children[1].children[1].texts.at("form") == "stretched");
    CHECK_NOTHROW(checked_law(sum));
}

TEST_CASE("what cannot be solved is refused with its place", "[transport][scenario]") {
    const std::vector<std::pair<std::string, std::string>> cases{
        {"", "halo.toml: found no [transport]"},
        {"[transport]\nheadroom = 3\n" + law, "found protons without sources"},
        {"[transport]\nspecies = []\n" + law, "found no species"},
        {sources, "transport.laws: found no [law.NAME]"},
        {"transport.laws = [\"b\"]\n" + sources + law,
         "transport.laws: found no law \"b\"; the nearest is a"},
        {"transport.laws = [\"a\", \"a\"]\n" + sources + law, "found \"a\" twice"},
        {"transport.laws = [\"a\", \"all\"]\n" + sources + law, "\"all\" among other names"},
        {"transport.laws = []\n" + sources + law, "found an empty list"},
        {sources + law + "slope = 0.5\n", "halo.toml:6:1: law.a: law 'constant': found no parameter 'slope'"},
        {sources + "[law.a]\nkind = \"rigidity_power\"\nslope = 12\n", "slope: found 12"},
        {sources + "[law.a]\nkind = \"fast_modes\"\n", "law.a: law 'fast_modes': damping_scale: not given"},
        {sources + "[law.a]\nkind = \"sum\"\n", "halo.toml:6:1: law.a.kind: found \"sum\" of no laws"},
        {sources + "[law.a]\nkind = \"sum\"\nof = [\"b\"]\n",
         "law.a.of: found no law \"b\"; the nearest is a"},
        {sources + "[law.a]\nkind = \"sum\"\nof = [\"a\"]\n", "made of themselves, a > a,"},
        {sources + "[law.a]\nkind = \"sum\"\nof = [\"b\"]\n[law.b]\nkind = \"maximum\"\nof = [\"a\"]\n",
         "halo.toml:10:1: law.b.of: found laws made of themselves, a > b > a,"},
        {sources + law + "of = [\"a\"]\n", "law.a.of: found laws beside the kind constant"},
        {sources + law + "table = \"a.ecsv\"\n", "law.a.table: found a table beside the kind constant"},
        {sources + "[law.a]\nkind = \"table\"\n", "law.a.kind: found \"table\" without law.a.table"},
        {sources + law + "[law.s]\nkind = \"sum\"\nof = [\"a\"]\n[law.s.factor.up]\nkind = \"falling\"\n",
         "law.s.factor.up.kind: found a factor of a sum"},
        {sources + law + "anchor = \"rate\"\n[law.s]\nkind = \"sum\"\nof = [\"a\"]\n",
         "law.a.anchor: found on a law that \"s\" is made of"},
        {sources + law + "[law.a.factor.up]\nkind = \"falling\"\nrate = \"1e-9 s-1\"\n", "has a rate"},
        {sources + "[law.all]\nkind = \"constant\"\n", "found the name \"all\""},
        {sources + law + "anchor = \"rate\"\nanchor_radius = \"21 kpc\"\n",
         "law.a.anchor_radius: found 21 kpc, outside the grid, expected at most 20 kpc"},
        {sources + law + "anchor = \"rate\"\nanchor_height = \"-16 kpc\"\n",
         "law.a.anchor_height: found -16 kpc, outside the grid, expected -15 kpc to 15 kpc"},
        {sources + law + "anchor = \"grammage\"\n", "law.a.anchor: found \"grammage\" without"},
        {sources + law + "anchor_grammage = \"9 g cm-2\"\n",
         "law.a.anchor_grammage: found beside anchor = \"absolute\", expected \"grammage\""},
        {"protons.source = \"none\"\n[transport.electrons.source.a]\npower = \"1e39 erg s-1\"\n" + law +
             "anchor = \"energy_density\"\nanchor_energy_density = \"0.5 eV cm-3\"\n",
         "which is of protons"},
        {"protons.source = \"none\"\n[transport.electrons.source.a]\nelectron_share = 0.01\n" + law,
         "without a source of protons"},
        {"[transport.protons.source.a]\nslope = 2.2\n" + law,
         "halo.toml:2:1: transport.protons.source.a: found no power, expected one of power, supernova_rate "
         "and star_formation_rate"},
        {"[transport.protons.source.a]\npower = \"1e41 erg s-1\"\nsupernova_rate = \"0.02 yr-1\"\n" + law,
         "transport.protons.source.a.supernova_rate: found beside transport.protons.source.a.power"},
        {sources + "break_rigidity = \"5 GV\"\n" + law,
         "without transport.electrons.source.remnants.slope_above"},
        {sources + "slope_above = 2.5\n" + law, "without transport.electrons.source.remnants.break_rigidity"},
        {sources + "slope = 2\n" + law, "without a cut-off"},
        {sources + "slope = 3.2\n" + law, "down to zero rigidity"},
        {sources + "least_rigidity = \"2 TV\"\ncutoff_rigidity = \"1 TV\"\n" + law,
         "least_rigidity: found no less than cutoff_rigidity"},
        {sources + "least_rigidity = \"20 GV\"\n" + law, "found no electrons at 10 GV"},
        {sources + "distribution = \"ring\"\nradius = \"40 kpc\"\n" + law,
         "transport.electrons.source.remnants: sources 'ring': found"},
        {sources + "distribution = \"shell\"\nradius = \"60 kpc\"\n" + law, "inside the grid"},
        {"transport.energy_from = \"200 TeV\"\n" + sources + law,
         "halo.toml:1:11: transport.energy_from: found energies from 200 TeV to 100 TeV"},
        {"transport.wind.speed = \"100 km s-1\"\n" + sources + law, "without transport.wind.kind"},
        {"transport.wind.kind = \"linear\"\n" + sources + law, "without transport.wind.speed"},
        {"transport.wind.kind = \"file\"\n" + sources + law, "without an HDU VELOCITY"},
    };
    for (const auto& [text, part] : cases) {
        INFO(text);
        CHECK_THAT(complaint(text), Contains(part) && !Contains("NO SCENARIO ERROR"));
    }
}

TEST_CASE("problems of laws and sources are all said, each once, as they stand in the file",
          "[transport][scenario]") {
    const std::string text = complaint("[transport.protons.source.a]\nslope = 2\n"
                                       "[law.a]\nkind = \"constant\"\nslope = 1\n"
                                       "[law.s]\nkind = \"sum\"\nof = [\"a\", \"b\"]\n");
    INFO(text);
    CHECK(std::count(text.begin(), text.end(), '\n') == 3);
    CHECK(text.find("found no power") < text.find("found no parameter 'slope'"));
    CHECK(text.find("found no parameter 'slope'") < text.find("found no law \"b\""));
    CHECK(text.find("found no parameter") == text.rfind("found no parameter"));
}

TEST_CASE("a table of rates is read with the units of its columns", "[transport][scenario]") {
    const Folder folder;
    const std::string scenario = sources + "[law.t]\nkind = \"table\"\ntable = \"rates.ecsv\"\n";
    const auto rates_of = [&](const std::string& text) {
        folder.write("rates.ecsv", text);
        return read(scenario, folder.scenario()).laws[0].law;
    };
    const LawSpec ecsv = rates_of("# %ECSV 1.0\n# ---\n# datatype:\n"
                                  "# - {name: z, unit: pc, datatype: float64}\n"
                                  "# - {name: R, unit: kpc, datatype: float64, description: from the axis}\n"
                                  "# - {name: rigidity, unit: TV, datatype: float64}\n"
                                  "# - {name: rate, unit: 1 / s, datatype: float64}\n"
                                  "z R rigidity rate\n0 0 0.001 1e-9\n3000 0 0.001 2e-9\n0 0 1 3e-11\n"
                                  "3000 0 1 4e-11\n");
    const LawSpec csv = rates_of("R [kpc],note,z [kpc],rigidity [GV],rate [s-1]\n0,x,0,1,1e-9\n0,,3,1,2e-9\n"
                                 "0,y,0,1000,3e-11\r\n\n0,y,3,1e3,4e-11\n");
    for (const LawSpec& table : {ecsv, csv}) {
        CHECK(table.name == "table");
        CHECK(table.lists.at("radius") == std::vector<double>{0});
        REQUIRE(table.lists.at("height").size() == 2);
        CHECK(table.lists.at("height")[1] == Approx(3 * kpc).epsilon(1e-14));
        REQUIRE(table.lists.at("rigidity").size() == 2);
        CHECK(table.lists.at("rigidity")[1] == Approx(1000 * gigavolt).epsilon(1e-14));
        CHECK(table.lists.at("rate") == std::vector<double>{1e-9, 3e-11, 2e-9, 4e-11});
    }
    const auto refused = [&](const std::string& text) {
        folder.write("rates.ecsv", text);
        return complaint(scenario, folder.scenario());
    };
    const std::string head = "R [kpc],z [kpc],rigidity [GV],rate [s-1]\n";
    CHECK_THAT(refused("R [kpc],z [kpc],rate [s-1]\n"),
               Contains("rates.ecsv:1: found the columns R, z, rate, expected R, z, rigidity"));
    CHECK_THAT(refused("R,z,rigidity,rate\n"), Contains("column R: found unit \"\""));
    CHECK_THAT(refused("R [kpc],z [kpc],rigidity [GeV],rate [s-1]\n"),
               Contains("column rigidity: found unit \"GeV\", expected one of a rigidity"));
    CHECK_THAT(refused(head + "0,0,1\n"), Contains("rates.ecsv:2: found 3 values, expected 4"));
    CHECK_THAT(refused(head + "0,0,one,1e-9\n"), Contains("column rigidity: found 'one'"));
    CHECK_THAT(refused(head + "0,0,1,nan\n"), Contains("column rate: found 'nan'"));
    CHECK_THAT(refused(head), Contains("rates.ecsv: found no rows"));
    CHECK_THAT(refused(head + "0,0,1,1e-9\n0,0,1,1e-9\n"), Contains("rates.ecsv: table of scattering rates"));
    CHECK_THAT(refused(head + "0,-1,1,1e-9\n"), Contains("height: found"));
    std::filesystem::remove(folder.path / "rates.ecsv");
    CHECK_THAT(complaint(scenario, folder.scenario()), Contains("rates.ecsv: not found"));
}

TEST_CASE("spectra of a grid file are not passed over without a word", "[transport][scenario]") {
    const Folder folder;
    sample_file(true).write((folder.path / "halo.fits").string()); // out to 4 kpc, with CR_ELECTRON
    const std::string text = "input.grid = \"halo.fits\"\n" + sources + "[law.a]\nkind = \"constant\"\n";
    CHECK_THAT(complaint(text, folder.scenario()),
               Contains("halo.fits: found spectra in HDU CR_ELECTRON, and [transport] solves for electrons"));
    const std::string said = "electrons.source = \"transport\"\n" + text;
    CHECK(complaint(said, folder.scenario()) == "accepted");
    CHECK_THAT(complaint(said + "anchor = \"rate\"\nanchor_radius = \"5 kpc\"\n", folder.scenario()),
               Contains("outside the grid, expected at most 4 kpc")); // of the file, not of [grid]
    sample_file(false).write((folder.path / "halo.fits").string());   // Cartesian: solved on rings
    CHECK(complaint(said, folder.scenario()) == "accepted");
}

TEST_CASE("changed bytes of a scenario make no reader of transport fail otherwise than by Error",
          "[transport][scenario][fuzz]") {
    const auto starters = scenario::starters();
    const auto starter = std::find_if(starters.begin(), starters.end(),
                                      [](const auto& one) { return one.name == "scattering_laws"; });
    REQUIRE(starter != starters.end());
    const std::string_view all = starter->text;
    const std::size_t from = all.find("[transport]");
    const std::string before(all.substr(0, from));
    const std::string part(all.substr(from, all.find("[radio]") - from));
    std::mt19937 random(2026);
    const std::string_view bytes = "0123456789.-ee  [],\"\nabs";
    int accepted = 0;
    for (int i = 0; i < 400; ++i) {
        std::string text = part;
        for (std::size_t changes = 1 + random() % 3; changes > 0; --changes) {
            text[random() % text.size()] = bytes[random() % bytes.size()];
        }
        INFO(text);
        try {
            const TransportSpec spec = read(before + text);
            ++accepted;
            CHECK(!spec.laws.empty());
            for (const SourceSpec& source : spec.electron_sources) {
                CHECK(source.power > 0);
                CHECK(std::isfinite(source.power));
            }
        } catch (const Error&) {
        }
    }
    CHECK(accepted > 20);
}
