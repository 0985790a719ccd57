#include "aureole/base/constants.hpp"
#include "aureole/base/error.hpp"
#include "aureole/files/fits_reader.hpp"
#include "aureole/maps/write_fits.hpp"

#include <catch2/catch.hpp>

#include <cmath>
#include <cstdlib>
#include <filesystem>
#include <fstream>
#include <limits>
#include <sstream>
#include <unistd.h>

using namespace aureole;
using namespace aureole::maps;
using Catch::Contains;
namespace fs = std::filesystem;

namespace {

/// A folder that is gone when the test ends.
struct Folder {
    fs::path path = fs::temp_directory_path() / ("aureole write [fits] \xc3\xa9 " + std::to_string(getpid()));
    Folder() { fs::create_directories(path); }
    ~Folder() { fs::remove_all(path); }
    Folder(const Folder&) = delete;
    Folder& operator=(const Folder&) = delete;
    std::string file(const char* name) const { return (path / name).string(); }
};

Image small_map(double rotation = 0) {
    Image image;
    image.pixels = {6, 4, -1e-4, 1e-4, 2.5, 1.5, 2.1, -0.7, rotation, "TAN", "ICRS"};
    for (int i = 0; i < 24; ++i) {
        image.value.push_back(static_cast<float>(i) / 3);
    }
    image.value[5] = std::numeric_limits<float>::quiet_NaN();
    image.unit = "Jy/beam";
    image.beam = Beam{4e-4, 3e-4, 0.25};
    image.frequency = 144.123456789e6;
    image.name = "sample";
    return image;
}

MapOrigin origin() {
    MapOrigin from;
    from.title = std::string(100, 't') + "'";
    from.inclination = 80 * constants::degree;
    from.distance = 1e4 * constants::kiloparsec;
    from.history = {"aureole predict halo.toml"};
    return from;
}

std::string bytes(const std::string& path) {
    std::ifstream stream(path, std::ios::binary);
    std::ostringstream text;
    text << stream.rdbuf();
    return text.str();
}

/// SOURCE_DATE_EPOCH for the length of a test.
struct FixedDate {
    explicit FixedDate(const char* seconds) { setenv("SOURCE_DATE_EPOCH", seconds, 1); }
    ~FixedDate() { unsetenv("SOURCE_DATE_EPOCH"); }
    FixedDate(const FixedDate&) = delete;
    FixedDate& operator=(const FixedDate&) = delete;
};

} // namespace

TEST_CASE("a radio map reads back bit by bit with its coordinates and beam", "[maps]") {
    const Folder folder;
    const std::string path = folder.file("radio [1](2).fits");
    const Image image = small_map();
    MapNotes notes;
    notes.flux_error = std::numeric_limits<double>::quiet_NaN();
    notes.more = {{"SEED", 7L, ""}, {"SOMEFLAG", true, ""}};
    write_radio_map(path, image, origin(), notes, false);
    files::FitsReader reader(path);
    REQUIRE(reader.hdus().size() == 1);
    const files::HduInfo hdu = reader.hdus().front();
    CHECK(hdu.shape == std::vector<std::size_t>{6, 4, 1});
    CHECK(hdu.bitpix == -32);
    const auto values = reader.read_all(hdu);
    for (std::size_t i = 0; i < values.size(); ++i) {
        INFO("pixel " << i);
        CHECK((i == 5 ? std::isnan(values[i]) : values[i] == static_cast<double>(image.value[i])));
    }
    CHECK(reader.verify_checksum(hdu) == true);
    CHECK(reader.number(hdu, "CRPIX1") == 3.5);
    CHECK(reader.number(hdu, "CDELT1") == -1e-4 / constants::degree);
    CHECK(reader.number(hdu, "CRVAL3") == 144.123456789e6);
    CHECK(reader.number(hdu, "RESTFRQ") == 144.123456789e6);
    CHECK(reader.number(hdu, "BMIN").value() == Approx(3e-4 / constants::degree).epsilon(1e-15).margin(0));
    CHECK(reader.number(hdu, "DISTKPC").value() == Approx(1e4).epsilon(1e-15).margin(0));
    CHECK(reader.number(hdu, "CDELT1A").value() == Approx(1e4 * 1e-4).epsilon(1e-15).margin(0));
    CHECK(reader.text(hdu, "CTYPE1") == "RA---TAN");
    CHECK(reader.text(hdu, "CTYPE3") == "FREQ");
    CHECK(reader.text(hdu, "BUNIT") == "Jy/beam");
    CHECK(reader.text(hdu, "TITLE") == origin().title);
    CHECK(reader.number(hdu, "SEED") == 7);
    CHECK(reader.flag(hdu, "SOMEFLAG") == true);
    CHECK_FALSE(reader.number(hdu, "FLUXCHK"));
    CHECK_FALSE(reader.number(hdu, "PC1_1"));
}

TEST_CASE("turned pixel axes are written as a rotation matrix in both coordinate systems", "[maps]") {
    const Folder folder;
    write_radio_map(folder.file("t.fits"), small_map(0.3), origin(), {}, false);
    files::FitsReader reader(folder.file("t.fits"));
    const files::HduInfo hdu = reader.hdus().front();
    for (const std::string version : {"", "A"}) {
        CHECK(reader.number(hdu, "PC1_1" + version) == std::cos(0.3));
        CHECK(reader.number(hdu, "PC1_2" + version) == -std::sin(0.3));
        CHECK(reader.number(hdu, "PC2_1" + version) == std::sin(0.3));
        CHECK(reader.number(hdu, "PC2_2" + version) == std::cos(0.3));
    }
}

TEST_CASE("equal maps make equal files when the date is given, and another date makes another file",
          "[maps]") {
    const Folder folder;
    const auto write = [&](const char* name, const char* seconds) {
        const FixedDate date(seconds);
        Image image = small_map();
        write_radio_map(folder.file(name), image, origin(), {}, false);
        image.unit = "cm-2 s-1 sr-1 MeV-1";
        write_gamma_cube(folder.file((std::string("g") + name).c_str()), {image, image}, {1e-3, 1e-2},
                         origin(), {{}, {}}, false);
    };
    write("a.fits", "1700000000");
    write("b.fits", "1700000000");
    write("c.fits", "1700000001");
    CHECK(bytes(folder.file("a.fits")).size() % 2880 == 0);
    CHECK(bytes(folder.file("a.fits")) == bytes(folder.file("b.fits")));
    CHECK(bytes(folder.file("ga.fits")) == bytes(folder.file("gb.fits")));
    CHECK(bytes(folder.file("a.fits")) != bytes(folder.file("c.fits")));
    files::FitsReader reader(folder.file("a.fits"));
    CHECK(reader.text(reader.hdus().front(), "DATE") ==
          "2023-11-14T22:13:20"); // of 1700000000, by `date -u -d @...`
}

TEST_CASE("a gamma-ray cube names the table of its energies", "[maps]") {
    const Folder folder;
    Image plane = small_map();
    plane.unit = "cm-2 s-1 sr-1 MeV-1";
    const double mev = constants::megaelectronvolt;
    const std::vector<MapNotes> notes(3);
    const std::vector<Image> planes(3, plane);
    const auto axis = [&](const char* name, const std::vector<double>& energies) {
        write_gamma_cube(folder.file(name), planes, energies, origin(), notes, true);
        files::FitsReader reader(folder.file(name));
        const files::HduInfo hdu = reader.hdus().front();
        CHECK(hdu.shape == std::vector<std::size_t>{6, 4, 3});
        const std::string table = reader.text(hdu, "BANDSHDU").value();
        REQUIRE(reader.find(table) != nullptr);
        CHECK(reader.verify_checksum(*reader.find(table)) == true);
        CHECK(reader.number(*reader.find(table), "NAXIS2") == 3);
        return std::pair{table, reader.text(hdu, "CTYPE3").value()};
    };
    CHECK(axis("even.fits", {mev, 10 * mev, 100 * mev}) ==
          std::pair<std::string, std::string>{"ENERGIES", "ENER-LOG"});
    CHECK(axis("uneven.fits", {mev, 11 * mev, 100 * mev}) ==
          std::pair<std::string, std::string>{"ENERGIES", "ENERBAND"});
    CHECK(axis("bands.fits", {mev, 2 * mev, 4 * mev, 8 * mev}) ==
          std::pair<std::string, std::string>{"EBOUNDS", "ENER-LOG"});
    files::FitsReader bands(folder.file("bands.fits"));
    CHECK(bands.text(*bands.find("EBOUNDS"), "TUNIT2") == "keV");
    CHECK(bands.number(bands.hdus().front(), "CRVAL3").value() ==
          Approx(std::sqrt(2.0)).epsilon(1e-14).margin(0));
}

TEST_CASE("a file that exists is kept unless it may be replaced", "[maps][bad-input]") {
    const Folder folder;
    const std::string path = folder.file("kept.fits");
    std::ofstream(path) << "mine";
    try {
        write_radio_map(path, small_map(), origin(), {}, false);
        FAIL("replaced");
    } catch (const Error& error) {
        CHECK(error.kind() == ErrorKind::output);
        CHECK_THAT(error.what(), Contains("kept.fits") && Contains("exists"));
    }
    CHECK(bytes(path) == "mine");
    write_radio_map(path, small_map(), origin(), {}, true);
    CHECK(bytes(path).starts_with("SIMPLE"));
    CHECK(std::distance(fs::directory_iterator(folder.path), fs::directory_iterator()) == 1);
}

TEST_CASE("maps that cannot be written leave nothing behind and say why", "[maps][bad-input]") {
    const Folder folder;
    CHECK_THROWS_WITH(write_radio_map(folder.file("none/a.fits"), small_map(), origin(), {}, false),
                      Contains("none/a.fits"));
    Image image = small_map();
    image.value.pop_back();
    CHECK_THROWS_WITH(write_radio_map(folder.file("a.fits"), image, origin(), {}, false),
                      Contains("23") && Contains("24"));
    image = small_map();
    image.beam.reset();
    CHECK_THROWS_WITH(write_radio_map(folder.file("a.fits"), image, origin(), {}, false), Contains("beam"));
    image = small_map();
    CHECK_THROWS_AS(write_gamma_cube(folder.file("a.fits"), {image, image}, {1}, origin(), {{}, {}}, false),
                    Error);
    MapNotes notes;
    notes.more = {{"TOOLONGKEY", 1.0, ""}};
    CHECK_THROWS_WITH(write_radio_map(folder.file("a.fits"), image, origin(), notes, false),
                      Contains("TOOLONGKEY"));
    CHECK(fs::is_empty(folder.path));
}
