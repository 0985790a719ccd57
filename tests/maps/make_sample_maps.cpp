// Writes sample maps and reads foreign ones, for checks by other programs (tests/outside/fits_standards.py).
#include "aureole/base/constants.hpp"
#include "aureole/base/error.hpp"
#include "aureole/files/ecsv.hpp"
#include "aureole/files/json.hpp"
#include "aureole/files/pending.hpp"
#include "aureole/maps/read_fits.hpp"
#include "aureole/maps/regrid.hpp"
#include "aureole/maps/sky.hpp"
#include "aureole/maps/write_fits.hpp"

#include <fmt/format.h>

#include <cmath>
#include <cstdio>
#include <filesystem>
#include <limits>
#include <string>
#include <vector>

namespace {

using namespace aureole;
using maps::Image;

Image sample(double rotation, const std::string& projection, const std::string& frame) {
    Image image;
    image.pixels = {40,
                    30,
                    -20 * constants::arcsecond,
                    20 * constants::arcsecond,
                    19.5,
                    14.5,
                    2.1,
                    0.7,
                    rotation,
                    projection,
                    frame};
    image.value.resize(40 * 30);
    for (std::size_t j = 0; j < 30; ++j) {
        for (std::size_t i = 0; i < 40; ++i) {
            image.value[i + 40 * j] = static_cast<float>(
                std::exp(-0.01 * std::hypot(static_cast<double>(i) - 19, static_cast<double>(j) - 12)));
        }
    }
    image.value[0] = std::numeric_limits<float>::quiet_NaN();
    image.unit = "Jy/beam";
    image.beam = maps::Beam{80 * constants::arcsecond, 60 * constants::arcsecond, 0.3};
    image.frequency = 1.4e9;
    return image;
}

void write_all(const std::filesystem::path& folder) {
    maps::MapOrigin origin;
    origin.title = "Gal\xc3\xa9xia 'sample', a title that is longer than the sixty-eight characters one card "
                   "of a FITS header holds";
    origin.inclination = 1.5;
    origin.distance = 10000 * constants::kiloparsec;
    origin.scenario_hash = "0123456789abcdef";
    origin.history = {"aureole predict scenario.toml -o \xc3\xa9t\xc3\xa9", std::string(150, 'x')};
    maps::MapNotes notes;
    notes.flux = 0.1;
    notes.flux_unit = "Jy";
    notes.numerical_error = 1e-3;
    notes.flux_error = std::numeric_limits<double>::quiet_NaN();
    notes.more = {
        {"RMSNOISE", 1.0 / 3, "left over"}, {"NSAMP", 4L, ""}, {"SPACINGS", std::string("FULL"), ""}};
    maps::write_radio_map(folder / "radio.fits", sample(0, "TAN", "ICRS"), origin, notes, true);
    maps::write_radio_map(folder / "turned.fits", sample(0.5, "SIN", "GALACTIC"), origin, notes, true);
    Image index = sample(0, "TAN", "ICRS");
    index.unit = "";
    notes.type = "Spectral index";
    maps::write_plane(folder / "index.fits", index, origin, notes, true);
    notes.type = "Intensity";
    Image plane = sample(0.2, "TAN", "ICRS");
    plane.unit = "cm-2 s-1 sr-1 MeV-1";
    plane.frequency = 0;
    const double gev = constants::gigaelectronvolt;
    const std::vector<Image> planes(3, plane);
    const std::vector<maps::MapNotes> three(3, notes);
    maps::write_gamma_cube(folder / "even.fits", planes, {gev, 10 * gev, 100 * gev}, origin, three, true);
    maps::write_gamma_cube(folder / "uneven.fits", planes, {gev, 3 * gev, 100 * gev}, origin, three, true);
    maps::write_gamma_cube(folder / "bands.fits", planes, {gev, 3 * gev, 9 * gev, 27 * gev}, origin, three,
                           true);
    maps::write_channel_table(folder / "channels.fits", {1e8, 3e8}, {1e6, 2e6},
                              {"maps/a.fits", "maps/\xc3\xa9.fits"}, true);
    const double third = 1.0 / 3;
    files::write_text(
        folder / "table.ecsv",
        files::ecsv_text(
            {{"h", "kpc", "scale height, \"exponential\"", std::vector<double>{third, std::nan(""), 1e-300}},
             {"n", "", "", std::vector<long>{1, -2, 3}},
             {"label", "", "", std::vector<std::string>{"144 MHz", "", "a,\"b\" # c"}},
             {"fitted", "", "", std::vector<bool>{true, false, true}},
             {"f", "cm-2 s-1 sr-1 MeV-1", "", std::vector<double>{1, 2, 3}}},
            {{"command", "aureole predict \"a b.toml\""}, {"odd: key", "1.4e9"}}),
        true);
    files::write_text(folder / "summary.json",
                      files::Json(files::Json::Object{{"third", third},
                                                      {"nan", std::nan("")},
                                                      {"text", "a \"b\"\n\\ \xc3\xa9 \xff"},
                                                      {"empty", files::Json::Array{}},
                                                      {"list", files::Json::Array{1, true, files::Json()}}})
                          .text(),
                      true);
}

void print_positions(const std::string& path) {
    for (const Image& image : maps::read_maps(path)) {
        for (std::size_t j = 0; j < image.pixels.ny; j += 7) {
            for (std::size_t i = 0; i < image.pixels.nx; i += 7) {
                const auto x = static_cast<double>(i);
                const auto y = static_cast<double>(j);
                const maps::SkyPosition sky = maps::sky_position(image.pixels, x, y);
                const auto back = maps::pixel_position(image.pixels, sky).value();
                fmt::print("{} {} {} {} {} {} {} {} {}\n", i, j, sky.lon / constants::degree,
                           sky.lat / constants::degree, image.value[i + image.pixels.nx * j],
                           std::hypot(back[0] - x, back[1] - y), image.frequency,
                           image.beam ? image.beam->major / constants::degree : 0.0, image.unit);
            }
        }
    }
}

} // namespace

int main(int argc, char** argv) {
    try {
        const std::vector<std::string> words(argv, argv + argc);
        if (words.size() == 3 && words[1] == "write") {
            write_all(words[2]);
        } else if (words.size() == 3 && words[1] == "positions") {
            print_positions(words[2]);
        } else if (words.size() == 4 && words[1] == "regrid") {
            const Image image = maps::read_maps(words[2]).front();
            const Image target = maps::read_maps(words[3]).front();
            for (const float value : maps::reproject(image, target.pixels).value) {
                fmt::print("{}\n", value);
            }
        } else {
            fmt::print(stderr,
                       "usage: make_sample_maps write FOLDER | positions FILE | regrid FILE TARGET\n");
            return 2;
        }
    } catch (const Error& error) {
        fmt::print(stderr, "{}\n", error.what());
        return static_cast<int>(error.kind());
    }
    return 0;
}
