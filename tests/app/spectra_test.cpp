#include "grid/sample_file.hpp"

#include "aureole/app/spectra_command.hpp"
#include "aureole/base/error.hpp"
#include "aureole/grid/scenario_grid.hpp"
#include "aureole/media/media.hpp"
#include "aureole/spectra/file_source.hpp"
#include "aureole/transport/read_scenario.hpp"
#include "aureole/transport/solution_source.hpp"
#include "aureole/transport/solve.hpp"

#include <catch2/catch.hpp>

using namespace aureole;
using Catch::Matchers::Contains;
using spectra::Species;

namespace {

const RunContext context{};

scenario::Scenario galaxy(const std::string& grid, const std::string& more = "") {
    return scenario::parse(grid + R"toml(
[field.ordered]
profile = "double_exponential"
value = "4 uG"
radius = "10 kpc"
height = "3 kpc"
[field.random]
profile = "double_exponential"
value = "8 uG"
radius = "8 kpc"
height = "3 kpc"
[gas.hi]
profile = "double_exponential"
value = "1 cm-3"
radius = "6 kpc"
height = "0.3 kpc"
[radio]
frequencies = ["1.4 GHz"]
unit = "MJy/sr"
[transport]
energy_from = "100 MeV"
energy_to = "100 GeV"
bins_per_decade = 6
[transport.protons.source.remnants]
supernova_rate = "0.02 yr-1"
[transport.electrons.source.remnants]
electron_share = 0.02
slope = 2.4
[law.powers]
kind = "rigidity_power"
slope = 0.5
)toml" + more,
                           "galaxy.toml", {});
}

const std::string rings = "[grid]\ngeometry = \"RZ\"\nradius = \"12 kpc\"\nheight = \"6 kpc\"\ncells_r = 8\n"
                          "cells_z = 9\nsmallest_z = \"0.2 kpc\"\n";

std::vector<float> all_of(const spectra::Source& source) {
    std::vector<float> weighted(source.cells * source.basis->nodes());
    source.open()(0, source.cells, weighted.data(), source.basis->nodes());
    return weighted;
}

/// Largest relative difference of values that are not negligible.
double difference(const std::vector<float>& a, const std::vector<float>& b) {
    REQUIRE(a.size() == b.size());
    double worst = 0;
    for (std::size_t i = 0; i < a.size(); ++i) {
        const auto one = static_cast<double>(a[i]);
        const auto two = static_cast<double>(b[i]);
        worst = std::max(worst, std::abs(one - two) / std::max({one, two, 1e-28}));
    }
    return worst;
}

} // namespace

TEST_CASE("a file of solved spectra holds what the solver found", "[app][spectra]") {
    const bool box = GENERATE(false, true);
    const auto scenario =
        galaxy(box ? "[grid]\ngeometry = \"XYZ\"\nhalf_width = \"8 kpc\"\nheight = \"6 kpc\"\ncells_xy = 7\n"
                     "cells_z = 6\nsmallest_z = \"1 kpc\"\n"
                   : rings);
    const TestFolder folder;
    const std::string path = folder.file("halo.fits");
    const auto result = app::write_spectra(scenario, {path, "", false, "a test"}, context);
    CHECK(result.summary.size() > 10);
    const auto file = grid::open_grid_file(path);
    CHECK(file.warnings == std::vector<std::string>{});
    const auto grid = grid::scenario_grid(scenario);
    const auto media = media::load_media(scenario, grid, nullptr, context);
    const auto spec = transport::read_transport(scenario);
    const auto solution = transport::solve(spec, spec.laws.front(), grid, media, context);
    // float32 three times: M, the density, the scale back to M
    constexpr double rounding = 3 * 6e-8;
    for (const Species species : {Species::electrons, Species::protons}) {
        const auto solved = transport::solution_source(solution, species, grid);
        const auto read = spectra::file_source(file, species);
        REQUIRE(read.basis->nodes() == solved.basis->nodes());
        for (std::size_t i = 0; i < read.basis->nodes(); ++i) {
            CHECK(read.basis->energy()[i] == Approx(solved.basis->energy()[i]).epsilon(1e-15));
        }
        const auto values = all_of(read);
        CHECK(difference(values, all_of(solved)) < (species == Species::electrons ? 2 : 1) * rounding);
        CHECK(*std::max_element(values.begin(), values.end()) > 0);
        CHECK_NOTHROW(read.finish());
    }
    REQUIRE(file.has("CR_POSITRON"));
    if (!box) {
        const auto positrons = grid::read_spectra_of_cells(file, "CR_POSITRON", dimension::spectral_density);
        std::vector<float> density;
        for (std::size_t v = 0; v < positrons.size(); ++v) {
            const double energy = solution.positrons->energy[v % solution.positrons->energy.size()];
            density.push_back(static_cast<float>(static_cast<double>(solution.positrons->weighted[v]) *
                                                 std::pow(energy, -2.5)));
        }
        CHECK(difference(positrons, density) < rounding);
    }
    CHECK(difference(grid::read_scalar(file, "B_TURB", dimension::magnetic_field), media.field.random_rms) <
          rounding);
    CHECK(grid::read_scalar(file, "GAS_HI", dimension::number_density) == media.gas.hi);
    const auto field = grid::read_vector(file, "B_VECTOR", dimension::magnetic_field);
    for (std::size_t cell = 0; cell < field.size(); ++cell) {
        for (std::size_t c = 0; c < 3; ++c) {
            CHECK(static_cast<double>(field[cell][c]) ==
                  Approx(static_cast<double>(media.field.ordered[cell][c])).epsilon(rounding));
        }
    }
}

TEST_CASE("spectra that are given and not solved for are in the file too", "[app][spectra]") {
    const auto scenario = scenario::parse(rings + R"toml(
[gas.hi]
profile = "constant"
value = "1 cm-3"
[radio]
frequencies = ["1.4 GHz"]
unit = "MJy/sr"
[electrons]
source = "closed_form"
energy_nodes = 21
[transport]
energy_from = "100 MeV"
energy_to = "100 GeV"
bins_per_decade = 6
species = ["protons"]
[transport.protons.source.remnants]
supernova_rate = "0.02 yr-1"
[law.same]
kind = "constant"
)toml",
                                          "galaxy.toml", {});
    const TestFolder folder;
    app::write_spectra(scenario, {folder.file("halo.fits"), "same", false, "a test"}, context);
    const auto file = grid::open_grid_file(folder.file("halo.fits"));
    const auto grid = grid::scenario_grid(scenario);
    const auto given = spectra::open_sources(scenario, grid, nullptr, context);
    REQUIRE(given.size() == 1);
    CHECK(difference(all_of(spectra::file_source(file, Species::electrons)), all_of(given.front())) < 2e-7);
    CHECK(file.has("CR_LEPTON"));
    CHECK(file.has("CR_PROTON"));
    CHECK_FALSE(file.has("CR_POSITRON"));
}

TEST_CASE("the law to solve for must be named where there are several", "[app][spectra][bad-input]") {
    const auto scenario = galaxy(rings, "[law.even]\nkind = \"constant\"\n");
    const TestFolder folder;
    for (const auto& [name, part] :
         {std::pair<const char*, const char*>{"", "found none"}, {"powres", "the nearest is \"powers\""}}) {
        try {
            app::write_spectra(scenario, {folder.file("halo.fits"), name, false, ""}, context);
            FAIL("written");
        } catch (const Error& error) {
            CHECK(error.kind() == ErrorKind::usage);
            CHECK_THAT(error.what(), Contains(part) && Contains("even, powers"));
        }
    }
    CHECK(std::filesystem::is_empty(folder.file("")));
}
