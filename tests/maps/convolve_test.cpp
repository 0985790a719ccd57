#include "aureole/base/constants.hpp"
#include "aureole/base/error.hpp"
#include "aureole/maps/image.hpp"

#include <catch2/catch.hpp>

#include <cmath>
#include <limits>
#include <random>

using namespace aureole;
using namespace aureole::maps;

namespace {

constexpr double arcsec = constants::arcsecond;

Image blank_map(std::size_t nx, std::size_t ny, double rotation = 0) {
    Image image;
    image.pixels.nx = nx;
    image.pixels.ny = ny;
    image.pixels.step_x = -2 * arcsec;
    image.pixels.step_y = 2 * arcsec;
    image.pixels.centre_x = std::floor(0.5 * static_cast<double>(nx));
    image.pixels.centre_y = std::floor(0.5 * static_cast<double>(ny));
    image.pixels.rotation = rotation;
    image.value.assign(nx * ny, 0.0F);
    image.unit = "MJy/sr";
    image.name = "halo.fits";
    return image;
}

struct Sky {
    double east, north;
};

/// Offsets of a pixel, rad.
Sky offset(const PixelGrid& pixels, std::size_t i, std::size_t j) {
    const double p = static_cast<double>(i) - pixels.centre_x;
    const double q = static_cast<double>(j) - pixels.centre_y;
    const double cosine = std::cos(pixels.rotation);
    const double sine = std::sin(pixels.rotation);
    return {pixels.step_x * (cosine * p - sine * q), pixels.step_y * (sine * p + cosine * q)};
}

/// exp(-4 ln 2 ...) of a beam with peak 1.
double profile(const Beam& beam, const Sky& at) {
    const double sine = std::sin(beam.position_angle);
    const double cosine = std::cos(beam.position_angle);
    const double along = (at.east * sine + at.north * cosine) / beam.major;
    const double across = (at.east * cosine - at.north * sine) / beam.minor;
    return std::exp(-4 * std::log(2.0) * (along * along + across * across));
}

void draw(Image& image, const Beam& source, double peak) {
    for (std::size_t j = 0; j < image.pixels.ny; ++j) {
        for (std::size_t i = 0; i < image.pixels.nx; ++i) {
            image.value[i + image.pixels.nx * j] +=
                static_cast<float>(peak * profile(source, offset(image.pixels, i, j)));
        }
    }
}

struct Moments {
    double sum = 0, ee = 0, en = 0, nn = 0;
};

Moments moments(const Image& image) {
    Moments m;
    for (std::size_t j = 0; j < image.pixels.ny; ++j) {
        for (std::size_t i = 0; i < image.pixels.nx; ++i) {
            const Sky at = offset(image.pixels, i, j);
            const double value = image.value[i + image.pixels.nx * j];
            m.sum += value;
            m.ee += value * at.east * at.east;
            m.en += value * at.east * at.north;
            m.nn += value * at.north * at.north;
        }
    }
    m.ee /= m.sum;
    m.en /= m.sum;
    m.nn /= m.sum;
    return m;
}

Moments moments(const Beam& beam) {
    const double major = beam.major * beam.major / (8 * std::log(2.0));
    const double minor = beam.minor * beam.minor / (8 * std::log(2.0));
    const double sine = std::sin(beam.position_angle);
    const double cosine = std::cos(beam.position_angle);
    return {1, major * sine * sine + minor * cosine * cosine, (major - minor) * sine * cosine,
            major * cosine * cosine + minor * sine * sine};
}

std::string message_of(const Image& image, const Beam& beam) {
    try {
        convolve(image, beam);
    } catch (const Error& error) {
        CHECK(error.kind() == ErrorKind::input);
        return error.what();
    }
    return "no error";
}

} // namespace

TEST_CASE("a Gaussian beam has the solid angle 1.133090 a b", "[maps][beam]") {
    CHECK(solid_angle({2e-5, 1e-5, 0.3}) == Approx(1.133090035456798 * 2e-10).epsilon(1e-14));
}

TEST_CASE("a point source becomes the beam", "[maps][beam]") {
    for (const double rotation : {0.0, 0.4}) {
        auto image = blank_map(101, 90, rotation);
        image.value[50 + 101 * 45] = 1;
        const Beam beam{20 * arcsec, 10 * arcsec, 30 * constants::degree}; // 5 pixels across
        const auto seen = convolve(image, beam);
        CHECK(seen.beam == beam);
        CHECK(seen.unit == "MJy/sr");
        const double peak = image.pixels.pixel_area() / solid_angle(beam);
        double worst = 0;
        for (std::size_t j = 0; j < 90; ++j) {
            for (std::size_t i = 0; i < 101; ++i) {
                const double wanted = peak * profile(beam, offset(image.pixels, i, j));
                worst = std::max(worst, std::abs(seen.value[i + 101 * j] - wanted) / peak);
            }
        }
        CHECK(worst < 1e-6);
    }
}

TEST_CASE("a Gaussian source under a beam stays Gaussian: flux kept, second moments add", "[maps][beam]") {
    auto image = blank_map(160, 150, 0.7);
    const Beam source{24 * arcsec, 12 * arcsec, 100 * constants::degree};
    draw(image, source, 3);
    const Beam beam{30 * arcsec, 16 * arcsec, -20 * constants::degree};
    const auto before = moments(image);
    const auto kernel = moments(beam);
    const auto seen = convolve(image, beam);
    const auto after = moments(seen);
    CHECK(after.sum == Approx(before.sum).epsilon(1e-6));
    CHECK(after.ee == Approx(before.ee + kernel.ee).epsilon(1e-5));
    CHECK(after.nn == Approx(before.nn + kernel.nn).epsilon(1e-5));
    CHECK(after.en == Approx(before.en + kernel.en).epsilon(1e-5));
    // Closed form: peak times the ratio of the roots of the determinants.
    const auto own = moments(source);
    const double ee = own.ee + kernel.ee;
    const double en = own.en + kernel.en;
    const double nn = own.nn + kernel.nn;
    const double determinant = ee * nn - en * en;
    const double peak = 3 * std::sqrt((own.ee * own.nn - own.en * own.en) / determinant);
    double worst = 0;
    for (std::size_t j = 0; j < 150; ++j) {
        for (std::size_t i = 0; i < 160; ++i) {
            const Sky at = offset(image.pixels, i, j);
            const double q =
                (nn * at.east * at.east - 2 * en * at.east * at.north + ee * at.north * at.north) /
                determinant;
            worst = std::max(worst, std::abs(seen.value[i + 160 * j] - peak * std::exp(-0.5 * q)) / peak);
        }
    }
    CHECK(worst < 1e-6);
}

TEST_CASE("two steps to a beam equal one", "[maps][beam]") {
    auto image = blank_map(80, 80);
    std::mt19937 random(5);
    for (std::size_t n = 0; n < 40; ++n) {
        image.value[20 + random() % 40 + 80 * (20 + random() % 40)] = 1;
    }
    const Beam first{12 * arcsec, 10 * arcsec, 0.5};
    const Beam last{14 * arcsec, 14 * arcsec, 0}; // 1.4 and 1.17 times as wide
    const auto once = convolve(image, last);
    const auto twice = convolve(convolve(image, first), last);
    for (std::size_t pixel = 0; pixel < image.value.size(); ++pixel) {
        CHECK(twice.value[pixel] == Approx(once.value[pixel]).epsilon(0).margin(2e-7));
    }
    const auto same = convolve(once, last);
    for (std::size_t pixel = 0; pixel < image.value.size(); ++pixel) {
        CHECK(same.value[pixel] == Approx(once.value[pixel]).epsilon(0).margin(1e-7));
    }
}

TEST_CASE("a Jy/beam map is rescaled to the new beam, a surface brightness is not", "[maps][beam]") {
    for (const char* unit : {"Jy/beam", "mJy beam-1", "JY/BEAM", "MJy/sr", "K"}) {
        auto image = blank_map(96, 96);
        image.unit = unit;
        image.beam = Beam{12 * arcsec, 12 * arcsec, 0};
        draw(image, *image.beam, 1); // a point source of 1 Jy
        const auto seen = convolve(image, {12 * 1.4 * arcsec, 12 * 1.4 * arcsec, 0});
        const bool per_beam = std::string(unit).size() > 6;
        CHECK(seen.value[48 + 96 * 48] == Approx(per_beam ? 1.0 : 1 / 1.96).epsilon(2e-6));
    }
}

TEST_CASE("blanks stay blank and weigh nothing", "[maps][beam]") {
    const float nan = std::numeric_limits<float>::quiet_NaN();
    auto image = blank_map(90, 80);
    image.value.assign(90 * 80, 2.5F);
    const Beam beam{16 * arcsec, 12 * arcsec, 1};
    const auto plain = convolve(image, beam);
    auto holes = image;
    for (std::size_t j = 30; j < 50; ++j) {
        for (std::size_t i = 40; i < 44; ++i) {
            holes.value[i + 90 * j] = nan;
        }
    }
    const auto seen = convolve(holes, beam);
    for (std::size_t j = 0; j < 80; ++j) {
        for (std::size_t i = 0; i < 90; ++i) {
            const float value = seen.value[i + 90 * j];
            if (std::isnan(holes.value[i + 90 * j])) {
                CHECK(std::isnan(value));
                continue;
            }
            const bool inner = i >= 25 && i < 65 && j >= 25 &&
                               j < 55; // where the plain map has not yet lost light over the border
            CHECK(value == Approx(inner ? 2.5F : plain.value[i + 90 * j]).epsilon(1e-6));
        }
    }
    CHECK(plain.value[0] < 1); // beyond the border the sky is dark
    image.value.assign(90 * 80, nan);
    CHECK(std::isnan(convolve(image, beam).value[100]));
}

TEST_CASE("nothing wraps around the border", "[maps][beam]") {
    auto image = blank_map(64, 48);
    image.value[0] = 1;
    const auto seen = convolve(image, {20 * arcsec, 20 * arcsec, 0});
    CHECK(std::abs(seen.value[63]) < 1e-6F * seen.value[0]);
    CHECK(std::abs(seen.value[64 * 47]) < 1e-6F * seen.value[0]);
}

TEST_CASE("a beam that does not hold the map's own is refused by name", "[maps][beam][bad-input]") {
    auto image = blank_map(32, 32);
    image.beam = Beam{20 * arcsec, 10 * arcsec, 0};
    // Wider in area and in each width, but turned: 20 arcsec along North do not fit into 18.
    const auto message = message_of(image, {30 * arcsec, 18 * arcsec, 90 * constants::degree});
    for (const char* part : {"halo.fits", "30 x 18 arcsec", "position angle 90 deg", "20 x 10 arcsec"}) {
        CHECK_THAT(message, Catch::Contains(part));
    }
    CHECK(message_of(image, {30 * arcsec, 18 * arcsec, 0}) == "no error");
    CHECK(message_of(image, {20 * (1 + 1e-8) * arcsec, 10 * (1 - 1e-8) * arcsec, 0}) ==
          "no error"); // digits of a header
    CHECK_THAT(message_of(image, {20 * arcsec, 0, 0}), Catch::Contains("expected widths > 0"));
    image.beam.reset();
    image.unit = "Jy/beam";
    CHECK_THAT(message_of(image, {30 * arcsec, 18 * arcsec, 0}), Catch::Contains("Jy/beam without a beam"));
    image.value.pop_back();
    CHECK_THAT(message_of(image, {30 * arcsec, 18 * arcsec, 0}),
               Catch::Contains("found 1023 values, expected 32 x 32"));
}
