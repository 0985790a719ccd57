#include "emission/sample_galaxy.hpp"

#include "aureole/sight/orientation.hpp"

#include <catch2/catch.hpp>

#include <cmath>

using namespace aureole;
using sight::Vec3;
using sight::View;

namespace {

constexpr double rest = constants::electron_rest_energy;
constexpr double kpc = constants::kiloparsec;

std::vector<View> views() {
    std::vector<View> result;
    for (const double inclination : {0.0, 60.0, 90.0, 130.0}) {
        for (const double angle : {0.0, 35.0, 200.0}) {
            View view;
            view.inclination = inclination * constants::degree;
            view.position_angle = angle * constants::degree;
            view.azimuth = 0.7 * angle * constants::degree;
            view.distance = 50 * kpc;
            result.push_back(view);
        }
    }
    return result;
}

} // namespace

TEST_CASE("the E-vector stands across the field as it lies on the sky, North through East",
          "[sight][polarisation]") {
    // A power law of index 3 in an ordered field is polarised to 3/4, at the field's position angle + 90 deg.
    const auto electrons =
        sample::source(spectra::Species::electrons, sample::log_nodes(9 * rest, 1e6 * rest, 10), 1,
                       [](double t, std::size_t) { return 1e-6 * std::pow(1 + t / rest, -3.0) / rest; });
    emission::Processes processes;
    processes.polarisation = true;
    for (View view : views()) {
        for (const auto projection : {sight::Projection::orthographic, sight::Projection::perspective}) {
            view.projection = projection;
            for (const Vec3& b : {Vec3{3e-6, 0, 0}, Vec3{0, 2e-6, 2e-6}, Vec3{1e-6, -3e-6, 2e-6}}) {
                const Vec3 seen = sight::to_view(view, b);
                const auto sky = sight::to_sky(view, seen[0], seen[1]);
                const double angle = std::atan2(sky[0], sky[1]); // East, North
                if (std::hypot(sky[0], sky[1]) < 1e-7) {
                    continue; // along the sight line
                }
                media::Media media;
                media.field.ordered.push_back(
                    {static_cast<float>(b[0]), static_cast<float>(b[1]), static_cast<float>(b[2])});
                // The cell lies at the centre, where the sight lines of both projections are the same.
                const auto emitted =
                    emission::emit(sample::box(), media, {electrons}, {{emission::Band::radio, 1e9, 1e9}},
                                   processes, sight::orientation(view), RunContext{});
                const double i = sample::value(emitted, 0, 0);
                INFO("inclination " << view.inclination << ", position angle " << view.position_angle);
                CHECK(sample::value(emitted, 0, 1) ==
                      Approx(-0.75 * i * std::cos(2 * angle)).margin(2e-3 * i));
                CHECK(sample::value(emitted, 0, 2) ==
                      Approx(-0.75 * i * std::sin(2 * angle)).margin(2e-3 * i));
            }
        }
    }
}

TEST_CASE("the observer is one distance away, where the sight line points", "[sight]") {
    for (View view : views()) {
        CHECK_FALSE(sight::orientation(view).observer);
        view.projection = sight::Projection::perspective;
        const auto orientation = sight::orientation(view);
        REQUIRE(orientation.observer);
        for (std::size_t a = 0; a < 3; ++a) {
            CHECK((*orientation.observer)[a] ==
                  Approx(view.distance * orientation.towards[a]).margin(1e-12 * view.distance));
        }
        // Inclination 0 shows the +z side.
        CHECK(orientation.towards[2] == Approx(std::cos(view.inclination)).margin(1e-14));
    }
}
