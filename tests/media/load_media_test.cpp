#include "../grid/sample_file.hpp"

#include "aureole/base/constants.hpp"
#include "aureole/base/error.hpp"
#include "aureole/media/media.hpp"
#include "aureole/physics/radiation.hpp"

#include <catch2/catch.hpp>

#include <cmath>

using namespace aureole;
using namespace aureole::media;
using Catch::Matchers::Contains;

namespace {

const TestFolder& folder() {
    static const TestFolder one;
    return one;
}

grid::GridFile opened(const SampleFile& sample) {
    const std::string path = folder().file("halo.fits");
    sample.write(path);
    return grid::open_grid_file(path);
}

Media loaded(const std::string& toml, const grid::Grid& grid, const grid::GridFile* file = nullptr) {
    return load_media(scenario::parse(toml, "test.toml", {}), grid, file, RunContext{});
}

std::string refusal(const std::string& toml, const grid::GridFile* file) {
    const grid::Grid grid{grid::Geometry::rz, {0, 1e21}, {}, {0, 1e21}, false};
    try {
        loaded(toml, file != nullptr ? file->grid : grid, file);
    } catch (const Error& error) {
        CHECK(error.kind() == ErrorKind::scenario);
        return error.what();
    }
    return "accepted";
}

grid::Grid box() {
    const double kpc = constants::kiloparsec;
    return {
        grid::Geometry::xyz, {-2 * kpc, -kpc, 0, 3 * kpc}, {-kpc, kpc, 2 * kpc}, {-2 * kpc, 0, kpc}, false};
}

} // namespace

TEST_CASE("media come from the file where the scenario says nothing", "[media][load]") {
    const auto file = opened(sample_file(true));
    const auto media = loaded("", file.grid, &file);
    REQUIRE(media.gas.hi.size() == 15);
    CHECK(media.gas.hi[3] == Approx(0.4).epsilon(1e-6));
    REQUIRE(media.field.ordered.size() == 15);
    CHECK(media.field.ordered[0][1] == Approx(2e-6).epsilon(1e-6));
    CHECK(media.gas.h2.empty());
    CHECK(media.field.random_rms.empty());
}

TEST_CASE("a profile in the scenario goes before the file", "[media][load]") {
    const auto file = opened(sample_file(true));
    const auto media =
        loaded("gas.hi.profile = 'constant'\ngas.hi.value = '2 cm-3'\nfield.ordered.profile = 'none'",
               file.grid, &file);
    CHECK(media.gas.hi == std::vector<float>(15, 2.0F));
    CHECK(media.field.ordered.empty());
}

TEST_CASE("a file asked for what it lacks is refused by key and HDU", "[media][load][bad-input]") {
    const auto file = opened(sample_file(true));
    CHECK_THAT(refusal("input.grid = 'halo.fits'\ngas.h2.profile = 'file'", &file),
               Contains("gas.h2.profile") && Contains("halo.fits") && Contains("GAS_H2"));
    CHECK_THAT(refusal("gas.h2.profile = 'file'", nullptr),
               Contains("gas.h2.profile") && Contains("input.grid"));
    auto without_field = sample_file(true);
    without_field.remove("B_VECTOR");
    const auto bare = opened(without_field);
    CHECK_THAT(refusal("input.grid = 'halo.fits'\nfield.ordered.profile = 'file'", &bare),
               Contains("B_VECTOR"));
    CHECK_THAT(refusal("input.grid = 'halo.fits'\n[radiation.component.stars]\ntemperature = '4000 K'\nvalue "
                       "= '1 eV cm-3'\nprofile = 'file'",
                       &file),
               Contains("radiation.component.stars.profile"));
}

TEST_CASE("the background has the temperature of the file, or the scenario's", "[media][load]") {
    auto sample = sample_file(true);
    sample.primary().set("TCMB", 5.5);
    const auto file = opened(sample);
    CHECK(loaded("", file.grid, &file).radiation.front().temperature == 5.5);
    CHECK(loaded("radiation.cmb_temperature = '3 K'", file.grid, &file).radiation.front().temperature == 3);
    const auto alone = loaded("", file.grid).radiation;
    REQUIRE(alone.size() == 1);
    CHECK(alone.front().temperature == 2.7255);
    CHECK(alone.front().uniform_density == Approx(4.1747e-13).epsilon(1e-4)); // erg cm-3: 4 sigma T^4 / c
    CHECK(loaded("radiation.cmb = false", file.grid).radiation.empty());
}

TEST_CASE("a radiation field of the file replaces the background it includes", "[media][load]") {
    auto sample = sample_file(true);
    sample.add(sample_axis("EPS_PHOTON", {0.001, 0.01, 0.1, 1, 10}, "eV"));
    auto& hdu = sample.add(sample_data("RADIATION", sample_shape(true, 5), "eV-1 cm-3", "EPS_PHOTON,R,Z",
                                       [](std::size_t v) { return static_cast<double>(v); }));
    const auto beside = opened(sample);
    const auto both = loaded("", beside.grid, &beside).radiation;
    REQUIRE(both.size() == 2);
    CHECK(both[1].photon_energy.front() == Approx(0.001 * constants::electronvolt).epsilon(1e-14));
    CHECK(both[1].photon_density[7] == Approx(7 / constants::electronvolt).epsilon(1e-6));
    hdu.set("CMBINCL", true);
    const auto included = opened(sample);
    CHECK(loaded("", included.grid, &included).radiation.size() == 1);
}

TEST_CASE("the parity of the field is the file's, or follows from its direction", "[media][load]") {
    auto sample = sample_file(true);
    sample.primary().set("BPARITY", std::string("ODD"));
    const auto file = opened(sample);
    CHECK(loaded("", file.grid, &file).field.parity == Parity::odd);
    const std::string ordered = "field.ordered.profile = 'constant'\nfield.ordered.value = '1 uG'\n";
    CHECK(loaded(ordered, file.grid, &file).field.parity == Parity::even);
    CHECK(loaded(ordered + "field.ordered.direction = 'vertical'", file.grid).field.parity == Parity::odd);
}

TEST_CASE("an ordered field has its strength and direction in every cell", "[media][field]") {
    const auto grid = box();
    const std::string head = "field.ordered.profile = 'constant'\nfield.ordered.value = '4 uG'\n"
                             "field.ordered.pitch = '20 deg'\nfield.ordered.direction = ";
    for (const std::string kind : {"toroidal", "spiral", "vertical", "x_shaped"}) {
        INFO(kind);
        const auto field = loaded(head + "'" + kind + "'", grid).field.ordered;
        for (std::size_t k = 0; k < grid.nz(); ++k) {
            for (std::size_t j = 0; j < grid.ny(); ++j) {
                for (std::size_t i = 0; i < grid.nx(); ++i) {
                    const double x = 0.5 * (grid.x[i] + grid.x[i + 1]);
                    const double y = 0.5 * (grid.y[j] + grid.y[j + 1]);
                    const auto& b = field[i + grid.nx() * (j + grid.ny() * k)];
                    const double strength = std::hypot(b[0], b[1], b[2]);
                    CHECK(strength == Approx(4e-6).epsilon(1e-6));
                    const double outwards = (b[0] * x + b[1] * y) / std::hypot(x, y);
                    if (kind == "toroidal") {
                        CHECK(outwards == Approx(0).margin(1e-12));
                        CHECK(b[1] * x - b[0] * y > 0); // counter-clockwise seen from +z
                    } else if (kind == "spiral") {
                        CHECK(outwards == Approx(4e-6 * std::sin(20 * constants::degree)).epsilon(1e-5));
                        CHECK(b[2] == 0);
                    } else if (kind == "vertical") {
                        CHECK(b[2] == Approx(4e-6).epsilon(1e-6));
                    } else {
                        CHECK((k == 0 ? b[2] < 0 : b[2] > 0)); // away from the plane on both sides
                    }
                }
            }
        }
    }
}

TEST_CASE("rings hold the components along R, azimuth and z", "[media][field]") {
    const double kpc = constants::kiloparsec;
    const grid::Grid rings{grid::Geometry::rz, {0, kpc, 3 * kpc}, {}, {0, kpc}, true};
    const std::string head = "field.ordered.profile = 'constant'\nfield.ordered.value = '2 uG'\n";
    const auto spiral =
        loaded(head + "field.ordered.direction = 'spiral'\nfield.ordered.pitch = '30 deg'", rings)
            .field.ordered;
    CHECK(spiral[1][0] == Approx(1e-6).epsilon(1e-6));
    CHECK(spiral[1][1] == Approx(std::sqrt(3.0) * 1e-6).epsilon(1e-6));
    const auto typed = loaded(head + "field.ordered.direction = 'components'\nfield.ordered.formula_x = 'R'\n"
                                     "field.ordered.formula_z = '-z'",
                              rings)
                           .field.ordered;
    CHECK(typed[1][0] == Approx(4e-6).epsilon(1e-6)); // R = 2 kpc in the middle of the second ring
    CHECK(typed[1][1] == 0);
    CHECK(typed[1][2] == Approx(-1e-6).epsilon(1e-6));
    CHECK_THROWS_WITH(
        loaded(head + "field.ordered.direction = 'components'\nfield.ordered.formula_y = '1/(R-R)'", rings),
        Contains("field.ordered.formula_y") && Contains("inf"));
}

TEST_CASE("starlight and dust are added to the background", "[media][load]") {
    const auto grid = box();
    const auto fields =
        loaded("[radiation.component.stars]\ntemperature = '5000 K'\nvalue = '2 eV cm-3'\n"
               "[radiation.component.dust]\ntemperature = '30 K'\nvalue = '1 eV cm-3'\nprofile = 'none'\n",
               grid)
            .radiation;
    REQUIRE(fields.size() == 2);
    CHECK(fields[0].name == "cmb");
    CHECK(fields[1].name == "stars");
    CHECK(fields[1].temperature == 5000);
    CHECK(fields[1].energy_density.at(5) == Approx(2 * constants::electronvolt).epsilon(1e-6));
}
