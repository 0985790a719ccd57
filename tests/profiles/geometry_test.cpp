#include "synthetic.hpp"

#include "aureole/base/error.hpp"
#include "aureole/profiles/geometry.hpp"
#include "aureole/profiles/profile.hpp"

#include <catch2/catch.hpp>

#include <cmath>
#include <numeric>

using namespace aureole::profiles;
using synthetic::kpc;

TEST_CASE("with position angle 270 deg X runs West and Y North", "[profiles]") {
    const auto image = synthetic::blank_map(11, 11, 0.5, 1);
    const auto spec = synthetic::spec(1, 2, 0.5, 2);
    const auto west = strip_position(image.pixels, spec, 7, 5);
    CHECK(west[0] == Approx(1.0 * kpc));
    CHECK(west[1] == Approx(0).margin(1e-9 * kpc));
    const auto north = strip_position(image.pixels, spec, 5, 8);
    CHECK(north[0] == Approx(0).margin(1e-9 * kpc));
    CHECK(north[1] == Approx(1.5 * kpc));
}

TEST_CASE("boxes on the map are covered exactly whatever the turn of the pixels",
          "[profiles][conservation]") {
    for (const double turn : {0.0, 0.3, 0.785398, 1.2}) {
        for (const double angle : {4.712, 0.4}) {
            auto image = synthetic::blank_map(80, 90, 0.23, 0.9);
            image.pixels.rotation = turn;
            auto spec = synthetic::spec(3, 1.37, 0.41, 4.1);
            spec.position_angle = angle;
            spec.centre = {0.3 * kpc / synthetic::distance, -0.4 * kpc / synthetic::distance};
            for (const Strip& strip : lay_strips(image.pixels, spec)) {
                for (const Box& box : strip.box) {
                    const double sum = std::accumulate(box.area.begin(), box.area.end(), 0.0);
                    CHECK(sum == Approx(1.37 * 0.41 * kpc * kpc).epsilon(1e-8));
                }
            }
        }
    }
}

TEST_CASE("a linear map has the box means of its centre heights", "[profiles]") {
    auto image = synthetic::blank_map(80, 90, 0.23, 0.9);
    image.pixels.rotation = 0.4;
    auto spec = synthetic::spec(3, 1.37, 0.41, 4.1);
    spec.position_angle = 1.0;
    spec.rms = 0.01;
    synthetic::fill(image, spec, [](double, double y) { return 3 + 0.5 * y; });
    for (const Profile& profile : measure(image, spec)) {
        for (std::size_t b = 0; b < profile.height.size(); ++b) {
            CHECK(profile.mean[b] == Approx(3 + 0.5 * profile.height[b] / kpc).epsilon(1e-6));
            CHECK(profile.coverage[b] == Approx(1).epsilon(1e-8));
        }
    }
}

TEST_CASE("mean and scatter of the heights carry a curved map to fourth order", "[profiles]") {
    // A parabola has third and higher derivatives of zero, so its box means must come out exactly.
    auto image = synthetic::blank_map(80, 90, 0.3, 0.9);
    auto spec = synthetic::spec(1, 3, 0.5, 4);
    spec.rms = 0.01;
    synthetic::fill(image, spec, [](double, double y) { return 7 + y * y; });
    const Profile profile = measure(image, spec).back();
    for (std::size_t b = 0; b < profile.height.size(); ++b) {
        const double z = profile.height[b] / kpc;
        const double width = profile.width[b] / kpc;
        CHECK(profile.mean[b] == Approx(7 + z * z + width * width / 12).epsilon(1e-6));
    }
}

TEST_CASE("blanks, masks and the edge of the map count nothing", "[profiles]") {
    auto image = synthetic::blank_map(40, 40, 0.25, 1);
    auto spec = synthetic::spec(1, 4, 1, 7);
    spec.rms = 0.1;
    synthetic::fill(image, spec, [](double, double) { return 2.0; });
    spec.mask.assign(image.value.size(), 0);
    for (std::size_t i = 0; i < 20; ++i) {
        image.value[i + 40 * 22] = std::nanf("");
        spec.mask[i + 40 * 18] = 1;
        image.value[i + 40 * 18] = 1e6F;
    }
    const Profile profile = measure(image, spec).back();
    CHECK(profile.height.size() == 10); // 5 kpc of map to a side
    for (std::size_t b = 0; b < profile.height.size(); ++b) {
        CHECK(profile.mean[b] == Approx(2));
    }
    CHECK(profile.coverage[5] == Approx(0.875));
}

TEST_CASE("a beam along the major axis of the galaxy is wide along X", "[profiles]") {
    const auto spec = synthetic::spec(1, 4, 1, 7);
    const double unit = kpc / synthetic::distance;
    const auto along = beam_in_strips({2 * unit, 1 * unit, spec.position_angle}, spec);
    CHECK(along.xx == Approx(4 * along.yy));
    CHECK(along.xy == Approx(0).margin(1e-12 * along.xx));
    // Major axis towards X + Y: position angle of X plus 45 deg, positive covariance.
    const auto slant =
        beam_in_strips({2 * unit, 1 * unit, spec.position_angle + aureole::constants::pi / 4}, spec);
    CHECK(slant.xy > 0);
    CHECK(slant.xx == Approx(slant.yy));
}

TEST_CASE("offsets of sky positions are those of the tangent plane", "[profiles]") {
    aureole::maps::PixelGrid pixels;
    pixels.lon = 1.0;
    pixels.lat = 0.5;
    const SkyOffset north = offset_of(pixels, 1.0, 0.5 + 1e-3);
    CHECK(north.north == Approx(std::tan(1e-3)).epsilon(1e-9));
    CHECK(north.east == Approx(0).margin(1e-15));
    const SkyOffset east = offset_of(pixels, 1.0 + 1e-5, 0.5);
    CHECK(east.east == Approx(1e-5 * std::cos(0.5)).epsilon(1e-6));
    pixels.projection = "ZEA";
    CHECK_THROWS_AS(offset_of(pixels, 1, 0.5), aureole::Error);
    pixels.projection = "TAN";
    CHECK_THROWS_AS(offset_of(pixels, 1 + aureole::constants::pi, -0.5), aureole::Error);
}

TEST_CASE("a spec that cannot be used names all its faults", "[profiles][bad-input]") {
    auto spec = synthetic::spec(1, 4, 1, 7);
    spec.distance = 0;
    spec.strip_width = -1;
    try {
        check(spec);
        FAIL("accepted");
    } catch (const aureole::Error& error) {
        CHECK(error.kind() == aureole::ErrorKind::scenario);
        CHECK_THAT(error.what(), Catch::Contains("distance") && Catch::Contains("strip width"));
    }
}
