#include "aureole/base/constants.hpp"
#include "aureole/base/error.hpp"
#include "aureole/files/fits_writer.hpp"
#include "aureole/maps/read_fits.hpp"
#include "aureole/maps/regions.hpp"
#include "aureole/maps/sky.hpp"
#include "aureole/maps/write_fits.hpp"

#include <catch2/catch.hpp>

#include <algorithm>
#include <cmath>
#include <filesystem>
#include <unistd.h>

using namespace aureole;
using namespace aureole::maps;
using Catch::Matchers::Contains;
using files::Card;

namespace {

/// A folder of its own, removed at the end.
struct Folder {
    std::filesystem::path path =
        std::filesystem::temp_directory_path() / ("aureole_read_fits_" + std::to_string(getpid()));
    Folder() { std::filesystem::create_directories(path); }
    ~Folder() { std::filesystem::remove_all(path); }
};

std::vector<Card> telescope_cards() {
    return {{"CTYPE1", std::string("RA---TAN"), ""},
            {"CRPIX1", 3.0, ""},
            {"CRVAL1", 150.0, ""},
            {"CDELT1", -0.001, ""},
            {"CTYPE2", std::string("DEC--TAN"), ""},
            {"CRPIX2", 2.0, ""},
            {"CRVAL2", -30.0, ""},
            {"CDELT2", 0.001, ""},
            {"BUNIT", std::string("Jy/beam"), ""},
            {"BMAJ", 0.004, ""},
            {"BMIN", 0.003, ""},
            {"BPA", 25.0, ""}};
}

void set(std::vector<Card>& cards, const Card& card) {
    const auto found = std::find_if(cards.begin(), cards.end(),
                                    [&](const Card& other) { return other.keyword == card.keyword; });
    if (found == cards.end()) {
        cards.push_back(card);
    } else {
        *found = card;
    }
}

void drop(std::vector<Card>& cards, const std::string& keyword) {
    std::erase_if(cards, [&](const Card& card) { return card.keyword == keyword; });
}

/// Values 0, 1, 2, ...
std::string write(const Folder& folder,
                  const std::vector<std::size_t>& shape,
                  const std::vector<Card>& cards,
                  const std::vector<std::string>& history = {}) {
    std::size_t count = 1;
    for (const std::size_t axis : shape) {
        count *= axis;
    }
    std::vector<float> values(count);
    for (std::size_t k = 0; k < count; ++k) {
        values[k] = static_cast<float>(k);
    }
    const auto path = folder.path / "map.fits";
    files::FitsWriter writer(path, true);
    writer.image("", shape, values, {cards, history});
    writer.commit();
    return path.string();
}

std::string refusal(const std::string& path) {
    try {
        read_maps(path);
    } catch (const Error& error) {
        CHECK(error.kind() == ErrorKind::input);
        return error.what();
    }
    return "accepted";
}

} // namespace

TEST_CASE("a map written by aureole reads back as it was", "[maps][round-trip]") {
    const Folder folder;
    Image image;
    image.pixels = {4, 3, -2e-5, 2e-5, 1.25, 0.75, 1.2, 0.4, 0.3, "TAN", "ICRS"};
    image.value = {0, 1, 2, 3, 4, NAN, 6, 7, 8, 9, 10, 11};
    image.unit = "Jy/beam";
    image.beam = Beam{8e-5, 6e-5, 0.5};
    image.frequency = 1.44e8;
    MapOrigin origin;
    origin.distance = 1e4 * constants::kiloparsec;
    origin.inclination = 1.5;
    origin.position_angle = 0.6;
    write_radio_map(folder.path / "map.fits", image, origin, {}, true);
    const auto maps = read_maps((folder.path / "map.fits").string());
    REQUIRE(maps.size() == 1);
    const Image& back = maps[0];
    CHECK(back.unit == "Jy/beam");
    CHECK(back.frequency == Approx(1.44e8).epsilon(1e-15));
    CHECK(back.beam->major == Approx(8e-5).epsilon(1e-14));
    CHECK(back.beam->position_angle == Approx(0.5).epsilon(1e-14));
    CHECK(back.pixels.step_x == Approx(-2e-5).epsilon(1e-14));
    CHECK(back.pixels.step_y == Approx(2e-5).epsilon(1e-14));
    CHECK(back.pixels.rotation == Approx(0.3).epsilon(1e-14));
    CHECK(back.pixels.centre_x == 1.25);
    CHECK(back.pixels.lon == Approx(1.2).epsilon(1e-14));
    CHECK(back.pixels.frame == "ICRS");
    for (std::size_t k = 0; k < image.value.size(); ++k) {
        CHECK((std::isnan(image.value[k]) ? std::isnan(back.value[k]) : back.value[k] == image.value[k]));
    }
    const MapFacts facts = read_facts((folder.path / "map.fits").string());
    CHECK(*facts.distance == Approx(origin.distance).epsilon(1e-14));
    CHECK(*facts.position_angle == Approx(0.6).epsilon(1e-14));
}

TEST_CASE("axes are found by their names in any order", "[maps]") {
    const Folder folder;
    auto cards = telescope_cards();
    for (const char* axis : {"1", "2"}) { // RA and DEC become axes 2 and 4, behind STOKES and FREQ
        const std::string to = *axis == '1' ? "2" : "4";
        for (const char* keyword : {"CTYPE", "CRPIX", "CRVAL", "CDELT"}) {
            for (Card& card : cards) {
                if (card.keyword == std::string(keyword) + axis) {
                    card.keyword = "X" + std::string(keyword) + to;
                }
            }
        }
    }
    for (Card& card : cards) {
        if (card.keyword.front() == 'X') {
            card.keyword.erase(0, 1);
        }
    }
    for (const Card& card :
         {Card{"CTYPE1", std::string("STOKES"), ""}, Card{"CRVAL1", 1.0, ""}, Card{"CRPIX1", 2.0, ""},
          Card{"CDELT1", 1.0, ""}, Card{"CTYPE3", std::string("FREQ"), ""}, Card{"CRVAL3", 1.4, ""},
          Card{"CUNIT3", std::string("GHz"), ""}, Card{"CRPIX3", 2.0, ""}, Card{"CDELT3", 0.1, ""}}) {
        cards.push_back(card);
    }
    // STOKES planes have the codes 0, 1, 2: I is the second.
    const auto maps = read_maps(write(folder, {3, 5, 2, 4}, cards));
    REQUIRE(maps.size() == 2);
    CHECK(maps[0].frequency == Approx(1.3e9).epsilon(1e-12));
    CHECK(maps[1].frequency == Approx(1.4e9).epsilon(1e-12));
    CHECK(maps[0].pixels.nx == 5);
    CHECK(maps[0].pixels.ny == 4);
    CHECK(maps[0].pixels.centre_x == 2);
    CHECK(maps[1].value[3 + 5 * 2] == 1 + 3 * 3 + 15 * 1 + 30 * 2);
    CHECK_THAT(maps[1].name, Contains("channel 2"));
}

TEST_CASE("CD, CDELT with CROTA2 and PC matrices of one rotation give one pixel grid", "[maps]") {
    const Folder folder;
    const double c = std::cos(0.4);
    const double s = std::sin(0.4);
    auto turned = telescope_cards();
    set(turned, {"CROTA2", 0.4 / constants::degree, ""});
    auto pc = telescope_cards();
    for (const Card& card :
         {Card{"PC1_1", c, ""}, Card{"PC1_2", s, ""}, Card{"PC2_1", -s, ""}, Card{"PC2_2", c, ""}}) {
        set(pc, card); // CDELT of either sign: the signs of the off-diagonal terms turn over
    }
    auto cd = telescope_cards();
    drop(cd, "CDELT1");
    drop(cd, "CDELT2");
    for (const Card& card : {Card{"CD1_1", -0.001 * c, ""}, Card{"CD1_2", -0.001 * s, ""},
                             Card{"CD2_1", -0.001 * s, ""}, Card{"CD2_2", 0.001 * c, ""}}) {
        set(cd, card);
    }
    for (const auto& cards : {turned, pc, cd}) {
        const PixelGrid pixels = read_maps(write(folder, {6, 5}, cards))[0].pixels;
        CHECK(pixels.step_x == Approx(-0.001 * constants::degree).epsilon(1e-12));
        CHECK(pixels.step_y == Approx(0.001 * constants::degree).epsilon(1e-12));
        CHECK(pixels.rotation == Approx(-0.4).epsilon(1e-12));
    }
}

TEST_CASE("spellings of brightness units are understood and values scaled", "[maps][units]") {
    const Folder folder;
    const struct {
        const char *found, *meant;
        double factor;
    } cases[] = {{"JY/BEAM", "Jy/beam", 1},
                 {"Jy beam-1", "Jy/beam", 1},
                 {"mJy/beam", "Jy/beam", 1e-3},
                 {"uJy / beam", "Jy/beam", 1e-6},
                 {"JY/PIXEL", "Jy/pixel", 1},
                 {"MJY/SR", "MJy/sr", 1},
                 {"Jy/arcsec2", "MJy/sr", 42545.170296},
                 {"KELVIN", "K", 1},
                 {"mK", "K", 1e-3},
                 {"ph cm-2 s-1 sr-1 GeV-1", "cm-2 s-1 sr-1 MeV-1", 1e-3},
                 {"cm-2 s-1 sr-1", "cm-2 s-1 sr-1", 1}};
    for (const auto& row : cases) {
        INFO(row.found);
        auto cards = telescope_cards();
        set(cards, {"BUNIT", std::string(row.found), ""});
        const Image image = read_maps(write(folder, {6, 5}, cards))[0];
        CHECK(image.unit == row.meant);
        CHECK(image.value[7] == Approx(7 * row.factor).epsilon(1e-6)); // float32
    }
    for (const char* unit : {"counts", "MJY/BEAM", "Jy", ""}) {
        auto cards = telescope_cards();
        set(cards, {"BUNIT", std::string(unit), ""});
        CHECK_THAT(refusal(write(folder, {6, 5}, cards)), Contains("BUNIT"));
    }
}

TEST_CASE("the last CLEAN beam of the history stands in for BMAJ", "[maps]") {
    const Folder folder;
    auto cards = telescope_cards();
    for (const char* keyword : {"BMAJ", "BMIN", "BPA"}) {
        drop(cards, keyword);
    }
    const Image image = read_maps(write(folder, {6, 5}, cards,
                                        {"AIPS   CLEAN BMAJ=  9.9999E-03 BMIN=  9.9999E-03 BPA=   0.00",
                                         "AIPS   CLEAN BMAJ=  4.1667E-03 BMIN=  2.0833E-03 BPA= -12.50"}))[0];
    REQUIRE(image.beam);
    CHECK(image.beam->major == Approx(15.00012 * constants::arcsecond).epsilon(1e-9));
    CHECK(image.beam->minor == Approx(7.49988 * constants::arcsecond).epsilon(1e-9));
    CHECK(image.beam->position_angle == Approx(-12.5 * constants::degree).epsilon(1e-9));
    CHECK_THAT(refusal(write(folder, {6, 5}, cards)), Contains("BMAJ"));
}

TEST_CASE("frequency comes from the axis, else from keywords, and only in Hz", "[maps]") {
    const Folder folder;
    auto cards = telescope_cards();
    CHECK(read_maps(write(folder, {6, 5}, cards))[0].frequency == 0);
    for (const char* keyword : {"FREQ", "RESTFREQ", "RESTFRQ"}) {
        set(cards, {keyword, 1.5e8, ""});
        CHECK(read_maps(write(folder, {6, 5}, cards))[0].frequency == 1.5e8);
        drop(cards, keyword);
    }
    set(cards, {"FREQ", 1.4, ""});
    CHECK_THAT(refusal(write(folder, {6, 5}, cards)), Contains("FREQ") && Contains("Hz"));
}

TEST_CASE("what cannot be used is refused by file and keyword", "[maps][bad-input]") {
    const Folder folder;
    const struct {
        Card card;
        const char* word;
    } cases[] = {{{"CTYPE1", std::string("RA---AIT"), ""}, "CTYPE1"},
                 {{"CTYPE1", std::string("OFFSET"), ""}, "CTYPE1"},
                 {{"CTYPE1", std::string("RA---TPV"), ""}, "CTYPE1"},
                 {{"PC1_2", 0.1, ""}, "sheared"},
                 {{"CDELT1", 0.0, ""}, "inverted"},
                 {{"RADESYS", std::string("FK4"), ""}, "RADESYS"},
                 {{"EQUINOX", 1950.0, ""}, "FK4"},
                 {{"LONPOLE", 90.0, ""}, "LONPOLE"},
                 {{"BMIN", 0.005, ""}, "BMAJ >= BMIN"},
                 {{"CUNIT1", std::string("kpc"), ""}, "CUNIT1"}};
    for (const auto& row : cases) {
        INFO(row.card.keyword);
        auto cards = telescope_cards();
        set(cards, row.card);
        CHECK_THAT(refusal(write(folder, {6, 5}, cards)), Contains("map.fits") && Contains(row.word));
    }
    auto cards = telescope_cards();
    set(cards, {"CTYPE3", std::string("VRAD"), ""});
    CHECK_THAT(refusal(write(folder, {6, 5, 2}, cards)), Contains("CTYPE3") && Contains("VRAD"));
    cards = telescope_cards();
    set(cards, {"CDELT1", -1.0, ""});
    set(cards, {"CDELT2", 1.0, ""});
    set(cards, {"CTYPE1", std::string("RA---ARC"), ""});
    CHECK_THAT(refusal(write(folder, {60, 50}, cards)), Contains("strays"));
    set(cards, {"CDELT1", -0.001, ""});
    set(cards, {"CDELT2", 0.001, ""});
    CHECK(read_maps(write(folder, {60, 50}, cards))[0].pixels.projection == "TAN");
}

TEST_CASE("regions mask the pixels whose centres they hold", "[maps][regions]") {
    PixelGrid pixels{101,   101,   -constants::arcsecond, constants::arcsecond, 50, 50, 2.0, 0.5, 0,
                     "TAN", "ICRS"};
    const auto count = [&](const std::string& text) {
        const auto mask = region_mask(text, "list.reg", pixels);
        return std::count(mask.begin(), mask.end(), 1);
    };
    const std::string place = "114.59155902616465,28.64788975654116";
    CHECK(count("circle(" + place + ",10.1\")") == 325); // lattice points with i2 + j2 <= 102.01
    CHECK(count("icrs;box(" + place + ",21\",11\",0)") == 21 * 11);
    CHECK(count("fk5\nbox(" + place + ",21\",11\",90) # a comment") == 11 * 21);
    CHECK(count("box(" + place + ",21\",21\",0)\n-box(" + place + ",11\",11\",0)") == 21 * 21 - 11 * 11);
    CHECK(count("box(7:38:21.97417,28:38:52.4031,21\",11\",0)") == 21 * 11);
    // The first axis of an ellipse at 0 deg runs along right ascension, at 90 deg along declination.
    const auto flat = region_mask("ellipse(" + place + ",30\",2\",0)", "", pixels);
    CHECK((flat[75 + 101 * 50] == 1 && flat[50 + 101 * 75] == 0));
    const auto tall = region_mask("ellipse(" + place + ",30\",2\",90)", "", pixels);
    CHECK((tall[75 + 101 * 50] == 0 && tall[50 + 101 * 75] == 1));
    // At 45 deg it runs from North-West to South-East; pixel i counts to the West.
    const auto slant = region_mask("ellipse(" + place + ",30\",2\",45)", "", pixels);
    CHECK((slant[65 + 101 * 65] == 1 && slant[35 + 101 * 65] == 0));
    const SkyPosition galactic = change_frame({2.0, 0.5}, "ICRS", "GALACTIC");
    CHECK(count("galactic\ncircle(" + std::to_string(galactic.lon / constants::degree) + "," +
                std::to_string(galactic.lat / constants::degree) + ",10.1\")") == 325);
    const SkyPosition corners[] = {sky_position(pixels, 19.5, 29.5), sky_position(pixels, 39.5, 29.5),
                                   sky_position(pixels, 39.5, 59.5), sky_position(pixels, 19.5, 59.5)};
    std::string polygon = "polygon(";
    for (const SkyPosition& corner : corners) {
        polygon += std::to_string(corner.lon / constants::degree) + "," +
                   std::to_string(corner.lat / constants::degree) + ",";
    }
    polygon.back() = ')';
    CHECK(count(polygon) == 20 * 30);
    const std::pair<const char*, const char*> wrong[] = {
        {"icrs\n\nannulus(1,2,3,4)", "line 3"}, {"circle(1,2)", "line 1"},
        {"circle(1,2,-3)", "length"},           {"circle(1,95,3)", "position"},
        {"image\ncircle(1,2,3)", "line 1"},     {"# nothing", "no region"}};
    for (const auto& [text, word] : wrong) {
        CHECK_THROWS_WITH(region_mask(text, "list.reg", pixels), Contains(word) && Contains("list.reg"));
    }
}

TEST_CASE("a FITS mask on other pixels is sampled at the nearest one", "[maps][regions]") {
    const Folder folder;
    const auto path = write(folder, {6, 5}, telescope_cards()); // only the first pixel is 0
    const PixelGrid own = read_maps(path)[0].pixels;
    auto mask = read_mask(path, own);
    CHECK(mask[0] == 0);
    CHECK(std::count(mask.begin(), mask.end(), 1) == 29);
    PixelGrid fine = own;
    fine.nx = 12;
    fine.ny = 10;
    fine.step_x /= 2;
    fine.step_y /= 2;
    fine.centre_x = 2 * own.centre_x + 0.5;
    fine.centre_y = 2 * own.centre_y + 0.5;
    mask = read_mask(path, fine);
    CHECK(std::count(mask.begin(), mask.end(), 0) == 4);
    CHECK((mask[0] == 0 && mask[1] == 0 && mask[12] == 0 && mask[13] == 0));
}
