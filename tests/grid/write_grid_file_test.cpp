#include "grid/sample_file.hpp"

#include "aureole/base/error.hpp"
#include "aureole/base/units.hpp"
#include "aureole/grid/grid_file.hpp"
#include "aureole/grid/write_grid_file.hpp"

#include <catch2/catch.hpp>

#include <fstream>
#include <limits>

using namespace aureole;
using namespace aureole::grid;
using Catch::Matchers::Contains;

namespace {

constexpr double kpc = constants::kiloparsec;
constexpr double gev = constants::gigaelectronvolt;

Grid sample_grid(bool rings) {
    Grid grid;
    grid.geometry = rings ? Geometry::rz : Geometry::xyz;
    grid.mirrored = rings;
    grid.x = rings ? std::vector<double>{0, 0.7 * kpc, 1.5 * kpc} : std::vector<double>{-kpc, 0, 1.1 * kpc};
    grid.y = rings ? std::vector<double>{} : std::vector<double>{-kpc, 0.3 * kpc, kpc, 1.9 * kpc};
    grid.z = {rings ? 0.0 : -0.5 * kpc, 0.4 * kpc, kpc, 1.7 * kpc, 2.5 * kpc};
    return grid;
}

/// Values that are all different.
std::vector<float> counted(std::size_t count, double scale) {
    std::vector<float> values;
    for (std::size_t v = 0; v < count; ++v) {
        values.push_back(static_cast<float>(scale * (1 + 0.37 * static_cast<double>(v))));
    }
    return values;
}

GridFileOutput sample_output(bool rings) {
    GridFileOutput output;
    output.grid = sample_grid(rings);
    output.object = "SAMPLE";
    output.field_parity = rings ? "ODD" : "";
    output.cmb_temperature = 3.5;
    for (int i = 0; i < 9; ++i) {
        output.axes["E_LEPTON"].push_back(0.03 * gev * std::pow(10, 0.21 * i));
        output.axes["E_PROTON"].push_back(0.1 * gev * std::pow(10, 0.2 * i));
        output.axes["EPS_PHOTON"].push_back(1e-3 * constants::electronvolt * std::pow(10, 0.25 * i));
    }
    const std::size_t cells = output.grid.stored_cells();
    output.data = {{"CR_ELECTRON", "cm-3 GeV-1", counted(9 * cells, 1e-12), {}},
                   {"CR_PROTON", "m-3 GeV-1", counted(9 * cells, 1e-10), {{"NOTE", 7L, "of the caller"}}},
                   {"RADIATION", "cm-3 eV-1", counted(9 * cells, 10), {{"CMBINCL", true, ""}}},
                   {"B_VECTOR", "uG", counted(3 * cells, -0.5), {}},
                   {"GAS_HI", "cm-3", counted(cells, 0.2), {}},
                   {"L_TURB", "pc", counted(cells, 50), {}}};
    output.primary = {{{"LAW", std::string("mine"), "name of a law"}}, {"made by a test"}};
    return output;
}

bool anything_in(const TestFolder& folder) {
    return !std::filesystem::is_empty(folder.file(""));
}

} // namespace

TEST_CASE("a written grid file is read back as it was given", "[grid][output]") {
    const bool rings = GENERATE(true, false);
    const TestFolder folder;
    const auto output = sample_output(rings);
    write_grid_file(folder.file("halo.fits"), output, false);
    const auto file = open_grid_file(folder.file("halo.fits"));
    CHECK(file.grid.geometry == output.grid.geometry);
    CHECK(file.grid.mirrored == rings);
    CHECK(file.object == "SAMPLE");
    CHECK(file.field_parity == output.field_parity);
    CHECK(file.cmb_temperature == 3.5);
    CHECK(file.radiation_includes_cmb);
    CHECK(file.warnings.empty());
    const auto same = [](const std::vector<double>& found, const std::vector<double>& given) {
        REQUIRE(found.size() == given.size());
        for (std::size_t i = 0; i < found.size(); ++i) {
            CHECK(found[i] == Approx(given[i]).epsilon(4e-16).margin(0)); // to kpc or GeV and back
        }
    };
    same(file.grid.x, output.grid.x);
    same(file.grid.y, output.grid.y);
    same(file.grid.z, output.grid.z);
    for (const auto& [name, energy] : output.axes) {
        same(file.axes.at(name), energy);
    }
    REQUIRE(file.data.size() == output.data.size());
    for (const GridFileData& data : output.data) {
        const auto& hdu = file.hdu(data.name);
        CHECK(hdu.unit == data.unit);
        CHECK(hdu.bitpix == -32);
    }
    const auto& values = output.data;
    const auto read_spectra = [&](const char* name) {
        return read_spectra_of_cells(file, name, dimension::spectral_density);
    };
    const auto agree = [](const std::vector<float>& cgs, const GridFileData& data, double factor) {
        REQUIRE(cgs.size() == data.values.size());
        for (std::size_t v = 0; v < cgs.size(); ++v) {
            REQUIRE(cgs[v] == static_cast<float>(static_cast<double>(data.values[v]) * factor));
        }
    };
    const double per_gev = unit_factor("cm-3 GeV-1", dimension::spectral_density);
    agree(read_spectra("CR_ELECTRON"), values[0], per_gev);
    agree(read_spectra("CR_PROTON"), values[1], unit_factor("m-3 GeV-1", dimension::spectral_density));
    agree(read_spectra("RADIATION"), values[2], unit_factor("cm-3 eV-1", dimension::spectral_density));
    agree(read_scalar(file, "GAS_HI", dimension::number_density), values[4], 1);
    agree(read_scalar(file, "L_TURB", dimension::length), values[5], constants::parsec);
    const auto field = read_vector(file, "B_VECTOR", dimension::magnetic_field);
    for (std::size_t v = 0; v < values[3].values.size(); ++v) {
        REQUIRE(static_cast<double>(field[v / 3][v % 3]) ==
                Approx(1e-6 * static_cast<double>(values[3].values[v])).epsilon(1.2e-7));
    }
    const auto contents = examine(file);
    CHECK(contents.problems.empty());
    CHECK(contents.warnings.empty());
}

TEST_CASE("values change their unit and not their size", "[grid][output]") {
    const auto microgauss = in_unit(std::vector<float>{2e-6F, 0}, 1e-6);
    CHECK(static_cast<double>(microgauss[0]) == Approx(2).epsilon(1.2e-7));
    CHECK(microgauss[1] == 0);
    const auto vectors = in_unit(std::vector<std::array<float, 3>>{{1, -2, 3}, {4, 5, 6}}, 0.5);
    CHECK(vectors == std::vector<float>{2, -4, 6, 8, 10, 12});
}

TEST_CASE("what a reader would refuse is not written, and named", "[grid][output][bad-input]") {
    const TestFolder folder;
    auto output = sample_output(true);
    std::vector<std::string> parts;
    SECTION("a name that the format does not have") {
        output.data[4].name = "GAS_XX";
        parts = {"GAS_XX", "format does not have"};
    }
    SECTION("a name that comes twice") {
        output.data.push_back(output.data[4]);
        parts = {"GAS_HI", "twice"};
    }
    SECTION("a unit of another dimension") {
        output.data[0].unit = "uG";
        parts = {"CR_ELECTRON", "BUNIT", "uG"};
    }
    SECTION("an axis that is missing") {
        output.axes.erase("E_PROTON");
        parts = {"CR_PROTON", "E_PROTON"};
    }
    SECTION("an axis that nothing uses") {
        output.data.erase(output.data.begin() + 1);
        parts = {"E_PROTON", "no data use"};
    }
    SECTION("energies that do not rise") {
        std::swap(output.axes["E_LEPTON"][2], output.axes["E_LEPTON"][3]);
        parts = {"E_LEPTON", "rise"};
    }
    SECTION("too few values") {
        output.data[0].values.pop_back();
        parts = {"CR_ELECTRON", "71", "72", "9", "8"};
    }
    SECTION("a negative density") {
        output.data[0].values[9 * 3 + 4] = -1e-12F;
        parts = {"CR_ELECTRON", "cell (R 2, Z 2)", "-1e-12"};
    }
    SECTION("a field that is not finite") {
        output.data[3].values[5] = std::numeric_limits<float>::quiet_NaN();
        parts = {"B_VECTOR", "cell (R 2, Z 1)", "nan"};
    }
    SECTION("a field on a mirrored grid without parity") {
        output.field_parity = "";
        parts = {"B_VECTOR", "parity"};
    }
    SECTION("both and each of electrons and positrons") {
        output.data[1].name = "CR_LEPTON";
        output.axes.erase("E_PROTON");
        output.data[1].unit = "cm-3 GeV-1";
        parts = {"CR_LEPTON", "beside"};
    }
    SECTION("edges that do not rise") {
        std::swap(output.grid.z[1], output.grid.z[2]);
        parts = {"Z edges", "increasing"};
    }
    SECTION("two problems") {
        output.data[4].name = "GAS_XX";
        output.cmb_temperature = 0;
        parts = {"GAS_XX", "\n", "TCMB"};
    }
    try {
        write_grid_file(folder.file("halo.fits"), output, false);
        FAIL("written");
    } catch (const Error& error) {
        CHECK(error.kind() == ErrorKind::output);
        CHECK_THAT(error.what(), Contains("halo.fits"));
        for (const std::string& part : parts) {
            CHECK_THAT(error.what(), Contains(part));
        }
    }
    CHECK_FALSE(anything_in(folder));
}

TEST_CASE("a grid file that is there stays unless it may be replaced", "[grid][output]") {
    const TestFolder folder;
    const std::string path = folder.file("halo.fits");
    std::ofstream(path) << "mine";
    CHECK_THROWS_WITH(write_grid_file(path, sample_output(true), false), Contains("--force"));
    CHECK(std::filesystem::file_size(path) == 4);
    write_grid_file(path, sample_output(true), true);
    CHECK(open_grid_file(path).object == "SAMPLE");
}
