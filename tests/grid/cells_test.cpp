#include "aureole/base/constants.hpp"
#include "aureole/grid/cells.hpp"

#include <catch2/catch.hpp>

#include <numeric>

using namespace aureole;
using namespace aureole::grid;

TEST_CASE("the whole galaxy of a mirrored grid has both sides and twice the volume", "[grid]") {
    const Grid stored{Geometry::xyz, {-1, 0, 2}, {0, 1, 3, 4}, {0, 0.5, 2, 5}, true};
    const Cells cells = whole_galaxy(stored, 8);
    CHECK(cells.sectors == 1);
    CHECK(cells.z == std::vector<double>{-5, -2, -0.5, 0, 0.5, 2, 5});
    CHECK(cells.size() == 2 * 3 * 6);
    CHECK(cells.stored_plane(0) == 2);
    CHECK(cells.stored_plane(2) == 0);
    CHECK(cells.stored_plane(3) == 0);
    CHECK(cells.stored_plane(5) == 2);
    CHECK(cells.is_mirror_image(2));
    CHECK_FALSE(cells.is_mirror_image(3));
    CHECK(cells.stored_cell(1, 2, 0) == 1 + 2 * (2 + 3 * 2));
    const auto volumes = cell_volumes(cells);
    REQUIRE(volumes.size() == cells.size());
    CHECK(volumes[1 + 2 * (1 + 3 * 5)] == Approx(2.0 * 2 * 3).epsilon(1e-15));
    CHECK(std::accumulate(volumes.begin(), volumes.end(), 0.0) == Approx(3.0 * 4 * 10).epsilon(1e-14));
}

TEST_CASE("sectors share the volume of their ring", "[grid]") {
    const Grid stored{Geometry::rz, {0, 1, 3}, {}, {-1, 0, 4}, false};
    const Cells cells = whole_galaxy(stored, 6);
    CHECK(cells.size() == 2 * 6 * 2);
    CHECK(cells.z == stored.z);
    CHECK(cells.stored_cell(1, 4, 1) == 1 + 2 * 1);
    const auto volumes = cell_volumes(cells);
    CHECK(volumes[1 + 2 * (5 + 6 * 1)] == Approx(constants::pi * 8 * 4 / 6).epsilon(1e-15));
    CHECK(std::accumulate(volumes.begin(), volumes.end(), 0.0) ==
          Approx(constants::pi * 9 * 5).epsilon(1e-14));
    CHECK(whole_galaxy(stored, 0).sectors == 1);
}
