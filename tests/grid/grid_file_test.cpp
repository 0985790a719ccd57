#include "sample_file.hpp"

#include "aureole/base/constants.hpp"
#include "aureole/base/error.hpp"
#include "aureole/grid/grid_file.hpp"

#include <catch2/catch.hpp>

#include <cmath>
#include <fstream>
#include <limits>

using namespace aureole;
using namespace aureole::grid;
using Catch::Matchers::Contains;
using std::string;

namespace {

using Spoil = std::function<void(SampleFile&)>;

/// The message with which a spoilt file is refused.
string refusal(bool rings, const Spoil& spoil) {
    const TestFolder folder;
    auto sample = sample_file(rings);
    spoil(sample);
    const string path = folder.file("halo.fits");
    sample.write(path);
    try {
        open_grid_file(path);
    } catch (const Error& error) {
        CHECK(error.kind() == ErrorKind::input);
        CHECK_THAT(error.what(), Contains("halo.fits"));
        return error.what();
    }
    return "accepted";
}

std::vector<string> warnings_of(const Spoil& spoil) {
    const TestFolder folder;
    auto sample = sample_file(true);
    spoil(sample);
    sample.write(folder.file("halo.fits"));
    return open_grid_file(folder.file("halo.fits")).warnings;
}

string joined(const std::vector<string>& lines) {
    string text;
    for (const string& line : lines) {
        text += line + "\n";
    }
    return text;
}

struct Case {
    const char* what;
    bool rings;
    Spoil spoil;
    std::vector<string> parts; ///< of the message
};

void check_refused(const Case& one) {
    INFO(one.what);
    const string message = refusal(one.rings, one.spoil);
    for (const string& part : one.parts) {
        CHECK_THAT(message, Contains(part));
    }
}

} // namespace

TEST_CASE("a whole file is described as it was written", "[grid][file]") {
    const TestFolder folder;
    const string path = folder.file("halo [1] with blanks.fits");
    for (const bool rings : {false, true}) {
        sample_file(rings).write(path);
        const auto file = open_grid_file(path);
        CHECK(file.object == "SAMPLE");
        CHECK(file.version == "1.0");
        CHECK(file.grid.geometry == (rings ? Geometry::rz : Geometry::xyz));
        CHECK(file.grid.mirrored == rings);
        CHECK(file.grid.stored_cells() == (rings ? 15U : 60U));
        CHECK(file.grid.z.back() == Approx((rings ? 5 : 4) * constants::kiloparsec).epsilon(1e-15));
        CHECK(file.grid.y.size() == (rings ? 0U : 5U));
        REQUIRE(file.axes.at("E_LEPTON").size() == 9);
        CHECK(file.axes.at("E_LEPTON").front() == Approx(0.1 * constants::gigaelectronvolt).epsilon(1e-15));
        CHECK(file.has("CR_ELECTRON"));
        CHECK_FALSE(file.has("CR_PROTON"));
        CHECK_THROWS_WITH(file.hdu("CR_PROTON"),
                          Contains("halo [1] with blanks.fits") && Contains("CR_PROTON"));
        INFO(joined(file.warnings));
        CHECK(file.warnings.empty());
    }
}

TEST_CASE("values come back in CGS at the cells they were written to", "[grid][file]") {
    const TestFolder folder;
    const string path = folder.file("halo.fits");
    for (const bool rings : {false, true}) {
        auto sample = sample_file(rings);
        sample.at("GAS_HI").set("BUNIT", string("m-3"));
        sample.write(path);
        const auto file = open_grid_file(path);
        const auto gas = read_scalar(file, "GAS_HI", dimension::number_density);
        REQUIRE(gas.size() == file.grid.stored_cells());
        CHECK(gas[0] == Approx(1e-7).epsilon(1e-6)); // 0.1 m-3
        CHECK(gas.back() == Approx(1e-7 * static_cast<double>(gas.size())).epsilon(1e-6));
        const auto field = read_vector(file, "B_VECTOR", dimension::magnetic_field);
        CHECK(field.back()[0] == Approx(1e-6).epsilon(1e-6));
        CHECK(field.back()[2] == Approx(3e-6).epsilon(1e-6));
        const auto spectra = read_spectra_of_cells(file, "CR_ELECTRON", dimension::spectral_density);
        const double expected = 1e-11 * (1 + 0.1 * 14) * std::pow(0.1, -2.7) / constants::gigaelectronvolt;
        CHECK(spectra[14 * 9] == Approx(expected).epsilon(1e-6));
    }
}

TEST_CASE("cells are named from one, as the file counts its axes", "[grid][file]") {
    const Grid box{Geometry::xyz, {0, 1, 2, 3}, {0, 1, 2}, {0, 1, 2}, false};
    CHECK(cell_text(box, 0) == "cell (X 1, Y 1, Z 1)");
    CHECK(cell_text(box, 10) == "cell (X 2, Y 2, Z 2)");
    const Grid rings{Geometry::rz, {0, 1, 2, 3}, {}, {0, 1, 2}, false};
    CHECK(cell_text(rings, 5) == "cell (R 3, Z 2)");
}

TEST_CASE("a file that is no grid file is refused by its format keys", "[grid][file][bad-input]") {
    const std::vector<Case> cases{
        {"no name",
         false,
         [](SampleFile& f) { f.primary().remove("FMTNAME"); },
         {"FMTNAME", "found none", "'HALO-GRID'"}},
        {"another name",
         false,
         [](SampleFile& f) { f.primary().set("FMTNAME", string("OTHER")); },
         {"FMTNAME", "'OTHER'"}},
        {"newer major",
         false,
         [](SampleFile& f) { f.primary().set("FMTVERS", string("2.0")); },
         {"FMTVERS", "'2.0'", "version 1"}},
        {"no version",
         false,
         [](SampleFile& f) { f.primary().set("FMTVERS", string("one")); },
         {"FMTVERS", "'one'"}},
        {"no geometry",
         false,
         [](SampleFile& f) { f.primary().remove("GEOMETRY"); },
         {"GEOMETRY", "none", "'XYZ' or 'RZ'"}},
        {"other geometry",
         false,
         [](SampleFile& f) { f.primary().set("GEOMETRY", string("RTHETA")); },
         {"GEOMETRY", "'RTHETA'"}},
        {"mirror as text",
         true,
         [](SampleFile& f) { f.primary().set("ZMIRROR", string("yes")); },
         {"ZMIRROR", "yes", "T or F"}},
        {"cold sky", true, [](SampleFile& f) { f.primary().set("TCMB", -1.0); }, {"TCMB", "-1", "above 0 K"}},
        {"parity",
         true,
         [](SampleFile& f) { f.primary().set("BPARITY", string("NONE")); },
         {"BPARITY", "'NONE'", "'EVEN' or 'ODD'"}},
    };
    for (const Case& one : cases) {
        check_refused(one);
    }
}

TEST_CASE("edges that make no grid are refused by name", "[grid][file][bad-input]") {
    const double nan = std::numeric_limits<double>::quiet_NaN();
    const auto edges = [](const char* name, std::vector<double> values) {
        return [name, values](SampleFile& f) {
            f.at(name).values = values;
            f.at(name).shape = {values.size()};
        };
    };
    const std::vector<Case> cases{
        {"missing", false, [](SampleFile& f) { f.remove("Y_EDGES"); }, {"HDU Y_EDGES: missing"}},
        {"falling",
         false,
         edges("X_EDGES", {-2, 1, 0, 3}),
         {"X_EDGES", "value 3", "found 0 after 1 kpc", "rising"}},
        {"equal", false, edges("Z_EDGES", {0, 1, 1, 2, 3, 4}), {"Z_EDGES", "found 1 after 1 kpc"}},
        {"NaN", false, edges("Z_EDGES", {0, 1, nan, 2, 3, 4}), {"Z_EDGES", "value 3", "nan", "finite"}},
        {"one edge", false, edges("X_EDGES", {1}), {"1 edges", "at least 2"}},
        {"no axis", true, edges("R_EDGES", {0.5, 1, 2, 3}), {"R edges", "expected 0"}},
        {"mirror",
         true,
         edges("Z_EDGES", {-1, 0.5, 1, 2, 3.5, 5}),
         {"Z edges", "expected 0 on a mirrored grid"}},
        {"no unit",
         true,
         [](SampleFile& f) { f.at("R_EDGES").remove("BUNIT"); },
         {"R_EDGES", "BUNIT: missing", "a length"}},
        {"unit of time",
         true,
         [](SampleFile& f) { f.at("R_EDGES").set("BUNIT", string("Myr")); },
         {"R_EDGES", "BUNIT", "\"Myr\"", "a length"}},
        {"two dimensions",
         true,
         [](SampleFile& f) {
             f.at("R_EDGES").shape = {2, 2};
         },
         {"R_EDGES", "2 dimensions", "expected an image of one"}},
    };
    for (const Case& one : cases) {
        check_refused(one);
    }
}

TEST_CASE("energy nodes that make no spectrum are refused by name", "[grid][file][bad-input]") {
    const auto energies = [](std::vector<double> values) {
        return [values](SampleFile& f) { f.at("E_LEPTON").values = values; };
    };
    const std::vector<Case> cases{
        {"zero",
         true,
         energies({0, 1, 2, 3, 4, 5, 6, 7, 8}),
         {"E_LEPTON", "value 1", "found 0 GeV", "more than 0"}},
        {"falling",
         true,
         energies({9, 8, 7, 6, 5, 4, 3, 2, 1}),
         {"E_LEPTON", "found 8 after 9 GeV", "rising"}},
        {"kind",
         true,
         [](SampleFile& f) { f.at("E_LEPTON").set("EKIND", string("RIGIDITY")); },
         {"E_LEPTON", "EKIND", "'RIGIDITY'", "'TOTAL'"}},
        {"leptons per nucleon",
         true,
         [](SampleFile& f) { f.at("E_LEPTON").set("EKIND", string("PER_NUCLEON")); },
         {"EKIND", "'PER_NUCLEON'"}},
        {"unit",
         true,
         [](SampleFile& f) { f.at("E_LEPTON").set("BUNIT", string("GHz")); },
         {"E_LEPTON", "BUNIT", "\"GHz\"", "an energy"}},
        {"below rest",
         true,
         [](SampleFile& f) {
             f.at("E_LEPTON").values.front() = 5e-4;
             f.at("E_LEPTON").set("EKIND", string("TOTAL"));
         },
         {"E_LEPTON", "0.0005 GeV", "rest energy of 0.000510999 GeV"}},
        {"missing",
         true,
         [](SampleFile& f) { f.remove("E_LEPTON"); },
         {"CR_ELECTRON", "no usable HDU E_LEPTON"}},
    };
    for (const Case& one : cases) {
        check_refused(one);
    }
}

TEST_CASE("total energies become kinetic ones", "[grid][file]") {
    const TestFolder folder;
    auto sample = sample_file(true);
    sample.at("E_LEPTON").set("EKIND", string("TOTAL"));
    sample.add(sample_axis("E_PROTON", {1, 2, 4, 8}, "GeV")).set("EKIND", string("TOTAL"));
    sample.add(
        sample_data("CR_PROTON", {4, 3, 5}, "cm-3 GeV-1", "E_PROTON,R,Z", [](std::size_t) { return 1e-9; }));
    sample.write(folder.file("halo.fits"));
    const auto file = open_grid_file(folder.file("halo.fits"));
    const double gev = constants::gigaelectronvolt;
    CHECK(file.axes.at("E_LEPTON").front() / gev == Approx(0.1 - 0.51099895e-3).epsilon(1e-10));
    CHECK(file.axes.at("E_PROTON").front() / gev == Approx(1 - 0.93827208816).epsilon(1e-8));
}

TEST_CASE("data headers that do not fit the grid are refused by name", "[grid][file][bad-input]") {
    const auto axes = [](const char* text) {
        return [text](SampleFile& f) { f.at("CR_ELECTRON").set("AXES", string(text)); };
    };
    const std::vector<Case> cases{
        {"transposed",
         false,
         axes("X,Y,Z,E_LEPTON"),
         {"CR_ELECTRON", "AXES", "found 'X,Y,Z,E_LEPTON'", "expected 'E_LEPTON,X,Y,Z'"}},
        {"space turned", false, axes("E_LEPTON,Z,Y,X"), {"AXES", "'E_LEPTON,Z,Y,X'"}},
        {"unknown axis", true, axes("E_OTHER,R,Z"), {"AXES", "'E_OTHER,R,Z'", "'E_LEPTON,R,Z'"}},
        {"no axes",
         true,
         [](SampleFile& f) { f.at("GAS_HI").remove("AXES"); },
         {"GAS_HI", "AXES: missing", "'R,Z'"}},
        {"length",
         true,
         [](SampleFile& f) { f.at("E_LEPTON") = sample_axis("E_LEPTON", sample_energies(8), "GeV"); },
         {"CR_ELECTRON", "NAXIS1: found 9, expected 8 (E_LEPTON)"}},
        {"turned shape",
         true,
         [](SampleFile& f) {
             f.at("GAS_HI").shape = {5, 3};
         },
         {"NAXIS1: found 5, expected 3 (R)", "NAXIS2: found 3, expected 5 (Z)"}},
        {"dimensions",
         true,
         [](SampleFile& f) { f.at("GAS_HI").shape = {15}; },
         {"GAS_HI", "NAXIS: found 1, expected 2"}},
        {"no unit",
         true,
         [](SampleFile& f) { f.at("GAS_HI").remove("BUNIT"); },
         {"GAS_HI", "BUNIT: missing", "a number density", "'cm-3'"}},
        {"flux unit",
         true,
         [](SampleFile& f) { f.at("CR_ELECTRON").set("BUNIT", string("cm-2 s-1 sr-1 GeV-1")); },
         {"CR_ELECTRON", "BUNIT", "cm-2 s-1 sr-1 GeV-1", "a density per energy"}},
        {"odd unit",
         true,
         [](SampleFile& f) { f.at("GAS_HI").set("BUNIT", string("cm-3x")); },
         {"GAS_HI", "BUNIT", "cm-3x"}},
        {"no COMPS",
         true,
         [](SampleFile& f) { f.at("B_VECTOR").remove("COMPS"); },
         {"B_VECTOR", "COMPS: found none", "'R,PHI,Z'"}},
        {"other COMPS",
         true,
         [](SampleFile& f) { f.at("B_VECTOR").set("COMPS", string("X,Y,Z")); },
         {"COMPS: found 'X,Y,Z'", "'R,PHI,Z'"}},
        {"mirror without parity",
         true,
         [](SampleFile& f) { f.primary().remove("BPARITY"); },
         {"B_VECTOR", "BPARITY", "'EVEN' or 'ODD'"}},
        {"twice", true, [](SampleFile& f) { f.add(f.at("GAS_HI")); }, {"GAS_HI twice", "expected it once"}},
        {"edges twice", true, [](SampleFile& f) { f.add(f.at("R_EDGES")); }, {"R_EDGES twice"}},
        {"leptons twice",
         true,
         [](SampleFile& f) {
             auto hdu = f.at("CR_ELECTRON");
             hdu.name = "CR_LEPTON";
             f.add(hdu);
         },
         {"CR_LEPTON", "beside CR_ELECTRON"}},
    };
    for (const Case& one : cases) {
        check_refused(one);
    }
}

TEST_CASE("all problems of a file are listed, each once", "[grid][file][bad-input]") {
    const string message = refusal(true, [](SampleFile& f) {
        f.at("CR_ELECTRON").set("AXES", string("R,Z,E_LEPTON"));
        f.at("B_VECTOR").remove("COMPS");
        f.at("GAS_HI").set("BUNIT", string("K"));
        f.primary().set("TCMB", 0.0);
        f.add(f.at("GAS_HI"));
    });
    for (const char* part : {"CR_ELECTRON: AXES", "COMPS", "GAS_HI: BUNIT", "TCMB", "GAS_HI twice"}) {
        CHECK_THAT(message, Contains(part));
    }
    CHECK(std::count(message.begin(), message.end(), '\n') == 4);
}

TEST_CASE("what is odd but usable is a warning", "[grid][file]") {
    CHECK_THAT(joined(warnings_of([](SampleFile& f) { f.primary().set("FMTVERS", string("1.7")); })),
               Contains("1.7 is newer"));
    CHECK_THAT(joined(warnings_of([](SampleFile& f) {
                   for (double& e : f.at("E_LEPTON").values) {
                       e = std::pow(e, 2);
                   }
               })),
               Contains("E_LEPTON") && Contains("2 nodes per decade"));
    CHECK_THAT(joined(warnings_of([](SampleFile& f) {
                   f.at("R_EDGES").values = {0, 0.3, 1, 4};
               })),
               Contains("R_EDGES") && Contains("cells 1 and 2") && Contains("2.33"));
    CHECK_THAT(joined(warnings_of([](SampleFile& f) {
                   f.add(sample_data("DUST", {3, 5}, "cm-3", "R,Z", [](std::size_t) { return 1; }));
               })),
               Contains("DUST") && Contains("ignored"));
    CHECK_THAT(joined(warnings_of([](SampleFile& f) {
                   f.add(sample_axis("X_EDGES", {0, 1}, "kpc"));
               })),
               Contains("X_EDGES") && Contains("ignored"));
}

TEST_CASE("bad values are refused with their cell when they are read", "[grid][file][bad-input]") {
    const TestFolder folder;
    const string path = folder.file("halo.fits");
    const auto reading = [&](const char* hdu, std::size_t place, double value) -> string {
        auto sample = sample_file(true);
        sample.at(hdu).values[place] = value;
        sample.write(path);
        const auto file = open_grid_file(path);
        try {
            if (string(hdu) == "B_VECTOR") {
                read_vector(file, hdu, dimension::magnetic_field);
            } else {
                read_scalar(file, hdu, dimension::number_density);
            }
        } catch (const Error& error) {
            CHECK(error.kind() == ErrorKind::input);
            return error.what();
        }
        return "accepted";
    };
    const double infinite = std::numeric_limits<double>::infinity();
    const double nan = std::numeric_limits<double>::quiet_NaN();
    CHECK_THAT(reading("GAS_HI", 7, -0.5),
               Contains("GAS_HI") && Contains("cell (R 2, Z 3)") && Contains("found -0.5"));
    CHECK_THAT(reading("GAS_HI", 14, infinite), Contains("cell (R 3, Z 5)") && Contains("found inf"));
    CHECK_THAT(reading("GAS_HI", 0, nan), Contains("cell (R 1, Z 1)") && Contains("found nan"));
    CHECK_THAT(reading("B_VECTOR", 3 * 4 + 1, nan), Contains("B_VECTOR") && Contains("cell (R 2, Z 2)"));
    CHECK(reading("B_VECTOR", 5, -3) == "accepted");
    CHECK(reading("GAS_HI", 0, 0) == "accepted");
}

namespace {

/// Turns over one bit of the data of the last HDU.
void spoil_byte(const string& path, std::size_t from_end) {
    std::fstream file(path, std::ios::in | std::ios::out | std::ios::binary);
    file.seekg(-static_cast<std::streamoff>(from_end), std::ios::end);
    const auto place = file.tellg();
    const auto byte = static_cast<char>(file.get() ^ 1);
    file.seekp(place);
    file.put(byte);
}

} // namespace

TEST_CASE("a changed bit is found by its checksum", "[grid][file][bad-input]") {
    const TestFolder folder;
    const string path = folder.file("halo.fits");
    sample_file(true).write(path);
    spoil_byte(path, 2880 - 10); // GAS_HI is the last HDU
    const auto file = open_grid_file(path);
    CHECK_THROWS_WITH(read_scalar(file, "GAS_HI", dimension::number_density),
                      Contains("GAS_HI") && Contains("checksum"));
    CHECK_NOTHROW(read_vector(file, "B_VECTOR", dimension::magnetic_field));
    const auto contents = examine(file);
    REQUIRE(contents.problems.size() == 1);
    CHECK_THAT(contents.problems.front(), Contains("GAS_HI") && Contains("checksum"));
}

TEST_CASE("an examination gives ranges and integrals of what is stored", "[grid][examine]") {
    const TestFolder folder;
    const string path = folder.file("halo.fits");
    auto sample = sample_file(true);
    sample.add(sample_data("CR_ENERGY_PROTON", {3, 5}, "eV cm-3", "R,Z", [](std::size_t) { return 2; }));
    sample.write(path);
    const auto file = open_grid_file(path);
    const auto contents = examine(file);
    CHECK(contents.problems.empty());
    CHECK(contents.warnings.empty());
    REQUIRE(contents.ranges.size() == 4);
    const auto volume = cell_volumes(file.grid);
    double nuclei = 0;
    double weighted = 0;
    double whole = 0;
    for (std::size_t cell = 0; cell < volume.size(); ++cell) {
        nuclei += 0.1 * static_cast<double>(1 + cell) * volume[cell];
        weighted += (1 + 0.1 * static_cast<double>(cell)) * volume[cell];
        whole += volume[cell];
    }
    for (const auto& range : contents.ranges) {
        INFO(range.hdu);
        if (range.hdu == "GAS_HI") {
            CHECK(range.least == Approx(0.1).epsilon(1e-6));
            CHECK(range.greatest == Approx(1.5).epsilon(1e-6));
            CHECK(range.total == Approx(nuclei).epsilon(1e-6));
            CHECK(range.total_text == "H nuclei");
        } else if (range.hdu == "B_VECTOR") {
            CHECK(range.greatest == Approx(std::sqrt(14.0)).epsilon(1e-6));
            CHECK(range.total_text.empty());
        } else if (range.hdu == "CR_ENERGY_PROTON") {
            CHECK(range.total == Approx(2 * constants::electronvolt * whole).epsilon(1e-6));
        } else {
            // integral of E^-1.7 dE from 0.1 to 10 GeV
            const double energy =
                (std::pow(0.1, -0.7) - std::pow(10.0, -0.7)) / 0.7 * constants::gigaelectronvolt;
            CHECK(range.hdu == "CR_ELECTRON");
            CHECK(range.total == Approx(1e-11 * energy * weighted).epsilon(1e-6));
            CHECK(range.total_text == "erg");
        }
    }
}

TEST_CASE("an examination counts bad values and empty spectra", "[grid][examine][bad-input]") {
    const TestFolder folder;
    const string path = folder.file("halo.fits");
    auto sample = sample_file(true);
    auto& spectra = sample.at("CR_ELECTRON").values;
    std::fill(spectra.begin(), spectra.begin() + 8 * 9, 0.0); // 8 of 15 cells
    spectra[9 * 9 + 2] = -1e-12;
    spectra[10 * 9 + 2] = std::numeric_limits<double>::quiet_NaN();
    sample.at("GAS_HI").values[1] = -1;
    sample.write(path);
    const auto contents = examine(open_grid_file(path));
    REQUIRE(contents.problems.size() == 2);
    CHECK_THAT(contents.problems[0], Contains("CR_ELECTRON") && Contains("cell (R 1, Z 4), energy node 3") &&
                                         Contains("1 values not finite, 1 negative"));
    CHECK_THAT(contents.problems[1], Contains("GAS_HI") && Contains("cell (R 2, Z 1): found -1"));
    CHECK_THAT(joined(contents.warnings), Contains("CR_ELECTRON") && Contains("zero in 8 of 15 cells"));
}
