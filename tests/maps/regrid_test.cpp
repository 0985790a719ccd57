#include "aureole/base/constants.hpp"
#include "aureole/base/error.hpp"
#include "aureole/maps/regrid.hpp"
#include "aureole/maps/sky.hpp"

#include <catch2/catch.hpp>

#include <algorithm>
#include <cmath>

using namespace aureole;
using namespace aureole::maps;
using Catch::Matchers::Contains;

namespace {

constexpr double arcsec = constants::arcsecond;

PixelGrid grid(std::size_t size, double pixel_arcsec, double rotation, const char* projection = "TAN") {
    const double middle = 0.5 * static_cast<double>(size - 1);
    return {
        size,       size,  -pixel_arcsec * arcsec, pixel_arcsec * arcsec, middle, middle, 2.6, 0.55, rotation,
        projection, "ICRS"};
}

/// A round Gaussian source (FWHM in arcsec) at `place`, drawn by distance on the sphere.
Image source(const PixelGrid& pixels, const SkyPosition& place, double fwhm_arcsec) {
    Image image;
    image.pixels = pixels;
    image.unit = "MJy/sr";
    image.frequency = 1.4e9;
    image.name = "drawn";
    image.beam = Beam{fwhm_arcsec * arcsec, fwhm_arcsec * arcsec, 0};
    const double sigma = fwhm_arcsec * arcsec / std::sqrt(8 * std::log(2.0));
    for (std::size_t j = 0; j < pixels.ny; ++j) {
        for (std::size_t i = 0; i < pixels.nx; ++i) {
            const double d =
                angular_distance(place, sky_position(pixels, static_cast<double>(i), static_cast<double>(j)));
            image.value.push_back(static_cast<float>(std::exp(-0.5 * d * d / (sigma * sigma))));
        }
    }
    return image;
}

double greatest_difference(const Image& a, const Image& b) {
    double worst = 0;
    for (std::size_t k = 0; k < a.value.size(); ++k) {
        if (!std::isnan(a.value[k]) && !std::isnan(b.value[k])) {
            worst =
                std::max(worst, std::abs(static_cast<double>(a.value[k]) - static_cast<double>(b.value[k])));
        }
    }
    return worst;
}

/// Variance of a beam in the direction `angle` (FWHM squared).
double width2(const Beam& beam, double angle) {
    const double c = std::cos(angle - beam.position_angle);
    const double s = std::sin(angle - beam.position_angle);
    return beam.major * beam.major * c * c + beam.minor * beam.minor * s * s;
}

} // namespace

TEST_CASE("pixels and sky positions are each other's inverse", "[maps][sky]") {
    for (const char* projection : {"TAN", "SIN"}) {
        PixelGrid pixels = grid(801, 20, 0.7, projection);
        pixels.lat = 1.45; // near the pole
        for (const auto& [i, j] : {std::array{0.0, 0.0}, {800.0, 3.5}, {400.0, 400.0}, {12.0, 799.0}}) {
            const auto back = pixel_position(pixels, sky_position(pixels, i, j));
            REQUIRE(back);
            CHECK((*back)[0] == Approx(i).margin(1e-8));
            CHECK((*back)[1] == Approx(j).margin(1e-8));
        }
    }
}

TEST_CASE("positions agree with astropy", "[maps][sky]") {
    // astropy 5.2.1 (WCSLIB): TAN and SIN, CRVAL 200, -40 deg, CDELT -+0.01, CRPIX 51, 31, PC of 30 deg;
    // pixel (7, 88).
    PixelGrid pixels{100,
                     100,
                     -0.01 * constants::degree,
                     0.01 * constants::degree,
                     50,
                     30,
                     200 * constants::degree,
                     -40 * constants::degree,
                     30 * constants::degree,
                     "TAN",
                     "ICRS"};
    const SkyPosition tan = sky_position(pixels, 7, 88);
    CHECK(tan.lon / constants::degree == Approx(200.86100223038596).epsilon(1e-13));
    CHECK(tan.lat / constants::degree == Approx(-39.70952788136709).epsilon(1e-13));
    pixels.projection = "SIN";
    const SkyPosition sin = sky_position(pixels, 7, 88);
    CHECK(sin.lon / constants::degree == Approx(200.8610703041077).epsilon(1e-13));
    CHECK(sin.lat / constants::degree == Approx(-39.7095045660732).epsilon(1e-13));
    // M31 in Galactic coordinates by astropy (ICRS through FK5): 0.1 arcsec.
    const SkyPosition galactic =
        change_frame({10.684708 * constants::degree, 41.268750 * constants::degree}, "ICRS", "GALACTIC");
    CHECK(galactic.lon / constants::degree == Approx(121.17432879).margin(3e-5));
    CHECK(galactic.lat / constants::degree == Approx(-21.57330883).margin(3e-5));
}

TEST_CASE("interpolating a beam is as accurate as documented, and no better by a factor of 4",
          "[maps][regrid]") {
    // FWHM in pixels and the accuracy the header states.
    for (const auto& [fwhm, bound] : {std::array{3.0, 1.7e-2}, {4.0, 4e-3}, {5.0, 1.2e-3}, {6.0, 4e-4}}) {
        const PixelGrid from = grid(81, 2, 0.35, "SIN");
        const PixelGrid onto = grid(97, 1.3, -0.1);
        const SkyPosition place = sky_position(from, 40.5, 40.5);
        const Image result = reproject(source(from, place, 2 * fwhm), onto);
        const double miss = greatest_difference(result, source(onto, place, 2 * fwhm));
        INFO("beam of " << fwhm << " pixels, error " << miss);
        CHECK(miss < bound);
        CHECK(miss > bound / 4);
    }
}

TEST_CASE("interpolation reproduces polynomials of the fifth degree exactly", "[maps][regrid]") {
    const PixelGrid from = grid(40, 2, 0);
    PixelGrid onto = from;
    onto.centre_x += 0.37;
    onto.centre_y -= 0.81;
    Image image;
    image.pixels = from;
    image.unit = "K";
    const auto polynomial = [](double i, double j) {
        const double x = (i - 20) / 20;
        const double y = (j - 20) / 20;
        return 1 + x - 2 * x * y + std::pow(x, 5) - std::pow(y, 5) + std::pow(x * y, 2);
    };
    for (int j = 0; j < 40; ++j) {
        for (int i = 0; i < 40; ++i) {
            image.value.push_back(static_cast<float>(polynomial(i, j)));
        }
    }
    const Image result = reproject(image, onto);
    for (std::size_t j = 5; j < 35; ++j) {
        for (std::size_t i = 5; i < 35; ++i) {
            const double expected = polynomial(static_cast<double>(i) - 0.37, static_cast<double>(j) + 0.81);
            REQUIRE(result.value[i + 40 * j] ==
                    Approx(expected).margin(2e-6)); // float32 values up to 6, weights 1.5
        }
    }
}

TEST_CASE("blanks stay blank and spoil nothing beyond the nearest pixels", "[maps][regrid]") {
    const PixelGrid from = grid(30, 2, 0);
    PixelGrid onto = from;
    onto.centre_x += 0.5;
    Image image;
    image.pixels = from;
    image.unit = "K";
    image.value.assign(900, 3.0F);
    image.value[15 + 30 * 15] = NAN;
    const Image result = reproject(image, onto);
    std::size_t blanks = 0;
    for (std::size_t j = 0; j < 30; ++j) {
        for (std::size_t i = 1; i < 30; ++i) {
            const float value = result.value[i + 30 * j];
            blanks += std::isnan(value) ? 1 : 0;
            CHECK((std::isnan(value) || std::abs(value - 3) < 1e-5F));
        }
    }
    CHECK(blanks == 2);
}

TEST_CASE("the common beam holds all beams and the touching directions show it is the least",
          "[maps][beam]") {
    const std::vector<Beam> two{{10 * arcsec, 4 * arcsec, 0.2}, {9 * arcsec, 5 * arcsec, 1.4}};
    const std::vector<Beam> three{
        {10 * arcsec, 4 * arcsec, 0.2}, {9 * arcsec, 5 * arcsec, 1.4}, {8 * arcsec, 6 * arcsec, 2.5}};
    for (const auto& beams : {two, three}) {
        const Beam common = smallest_common_beam(beams);
        for (const Beam& beam : beams) {
            double least = HUGE_VAL;
            for (int k = 0; k < 3600; ++k) {
                const double angle = constants::pi * k / 3600;
                least = std::min(least, width2(common, angle) - width2(beam, angle));
            }
            CHECK(least > 0);
        }
    }
    // Two beams in closed form: in the frame where one is round with unit width the least C has the greater
    // of 1 and the other's eigenvalue along the other's axes. Here 6 x 6 and 10 x 4: 10 x 6.
    const Beam crossed =
        smallest_common_beam(std::vector<Beam>{{6 * arcsec, 6 * arcsec, 0}, {10 * arcsec, 4 * arcsec, 0.7}});
    CHECK(crossed.major / arcsec == Approx(10).epsilon(1e-7));
    CHECK(crossed.minor / arcsec == Approx(6).epsilon(1e-7));
    CHECK(crossed.position_angle == Approx(0.7).margin(1e-6));
    // A beam that holds the others comes back as it is.
    CHECK(
        smallest_common_beam(std::vector<Beam>{{10 * arcsec, 6 * arcsec, 1}, {6 * arcsec, 5 * arcsec, 0}}) ==
        Beam{10 * arcsec, 6 * arcsec, 1});
}

TEST_CASE("two telescopes' maps of a source agree once brought to common", "[maps][regrid]") {
    const SkyPosition place{2.6, 0.55};
    const Image first = source(grid(120, 2, 0.2), place, 12);
    Image second = source(grid(150, 1.5, -0.5, "SIN"), place, 9);
    // Seen with 9 arcsec the same flux is (12/9)^2 as bright at the peak.
    for (float& value : second.value) {
        value *= 144.0F / 81.0F;
    }
    second = convert_unit(second, "Jy/beam");
    const CommonMaps common = bring_to_common({first, second});
    REQUIRE(common.images.size() == 2);
    CHECK(common.images[1].unit == "MJy/sr");
    CHECK(common.images[1].pixels == first.pixels);
    CHECK(*common.images[1].beam == *first.beam);
    CHECK(common.notes.size() == 3);
    // Interpolated from a beam of 8 pixels: 1e-4 of the peak.
    CHECK(greatest_difference(common.images[1], common.images[0]) < 2e-4);
    // Already alike: untouched.
    const CommonMaps same = bring_to_common({first, first});
    CHECK(same.notes.empty());
    CHECK(same.images[1].value == first.value);
}

TEST_CASE("units are converted through brightness", "[maps][units]") {
    Image image = source(grid(20, 2, 0), {2.6, 0.55}, 10);
    const double value = static_cast<double>(image.value[210]);
    // 1 MJy/sr = 1e-17 erg s-1 cm-2 Hz-1 sr-1; in K times c^2/(2 k nu^2) at 1.4 GHz: 0.01660 K, from memory
    // of the formula.
    const double kelvin = 1e-17 * std::pow(constants::speed_of_light / 1.4e9, 2) / (2 * constants::boltzmann);
    CHECK(static_cast<double>(convert_unit(image, "K").value[210]) == Approx(value * kelvin).epsilon(1e-6));
    const double beam_area = constants::pi * 100 * arcsec * arcsec / (4 * std::log(2.0));
    CHECK(static_cast<double>(convert_unit(image, "Jy/beam").value[210]) ==
          Approx(value * 1e6 * beam_area).epsilon(1e-6));
    CHECK(static_cast<double>(convert_unit(image, "Jy/pixel").value[210]) ==
          Approx(value * 1e6 * 4 * arcsec * arcsec).epsilon(1e-6));
    // Jy/pixel on pixels of half the size is a quarter.
    const Image per_pixel = convert_unit(image, "Jy/pixel");
    const Image finer = reproject(per_pixel, grid(39, 1, 0));
    CHECK(finer.value[19 + 39 * 19] ==
          Approx(0.25 * static_cast<double>(convert_unit(image, "Jy/pixel").value[0]) *
                 static_cast<double>(finer.value[19 + 39 * 19]) /
                 (0.25 * static_cast<double>(per_pixel.value[0]))));
    Image gamma = image;
    gamma.unit = "cm-2 s-1 sr-1 MeV-1";
    CHECK(static_cast<double>(convert_unit(gamma, "cm-2 s-1 sr-1 GeV-1").value[210]) ==
          Approx(1e3 * value).epsilon(1e-6));
}

TEST_CASE("maps that cannot be compared are refused with the reason", "[maps][bad-input]") {
    const Image first = source(grid(20, 2, 0), {2.6, 0.55}, 10);
    const auto refused = [&](auto&& change, const char* word,
                             const std::optional<Beam>& beam = std::nullopt) {
        Image other = first;
        other.name = "other.fits";
        change(other);
        INFO(word);
        CHECK_THROWS_WITH(bring_to_common({first, other}, beam), Contains(word));
    };
    refused([](Image& image) { image.pixels.frame = "GALACTIC"; }, "frame GALACTIC");
    refused([](Image& image) { image.pixels.lon += 0.1; }, "does not overlap");
    refused([](Image& image) { image.pixels.lon += 3; }, "does not overlap");
    refused([](Image& image) { image.beam.reset(); }, "found no beam");
    refused([](Image& image) { image.unit = "cm-2 s-1 sr-1"; }, "cm-2 s-1 sr-1");
    refused(
        [](Image& image) {
            image.unit = "K";
            image.frequency = 0;
        },
        "no frequency");
    refused([](Image&) {}, "narrower", Beam{5 * arcsec, 5 * arcsec, 0});
}
