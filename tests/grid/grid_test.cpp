#include "aureole/base/constants.hpp"
#include "aureole/base/error.hpp"
#include "aureole/grid/grid.hpp"

#include <catch2/catch.hpp>

#include <cmath>
#include <limits>
#include <numeric>

using namespace aureole;
using namespace aureole::grid;

namespace {

std::string message_of(const Grid& grid) {
    try {
        validate(grid);
    } catch (const Error& error) {
        CHECK(error.kind() == ErrorKind::input);
        return error.what();
    }
    return "";
}

} // namespace

TEST_CASE("cell volumes of a box and of a cylinder add up to the whole", "[grid]") {
    const Grid box{Geometry::xyz, {-1, 0.5, 2}, {0, 3, 4, 7}, {-2, 5}, false};
    const auto boxes = cell_volumes(box);
    REQUIRE(boxes.size() == 6);
    CHECK(boxes[1 + 2 * 2] == Approx(1.5 * 3 * 7).epsilon(1e-15)); // i = 1, j = 2, k = 0
    CHECK(std::accumulate(boxes.begin(), boxes.end(), 0.0) == Approx(3.0 * 7 * 7).epsilon(1e-14));
    const Grid cylinder{Geometry::rz, {0, 1, 4, 5}, {}, {0, 0.5, 3}, true};
    const auto rings = cell_volumes(cylinder);
    REQUIRE(rings.size() == 6);
    CHECK(rings[1 + 3 * 1] == Approx(constants::pi * 15 * 2.5).epsilon(1e-15));
    CHECK(std::accumulate(rings.begin(), rings.end(), 0.0) == Approx(constants::pi * 25 * 3).epsilon(1e-14));
}

TEST_CASE("a faulty grid is refused with all its problems", "[grid][bad-input]") {
    CHECK(message_of({Geometry::xyz, {0, 1}, {0, 1}, {0, 1}, true}).empty());
    CHECK(message_of({Geometry::rz, {0, 1}, {}, {-1, 1}, false}).empty());
    const double nan = std::numeric_limits<double>::quiet_NaN();
    const auto message = message_of({Geometry::xyz, {0}, {0, 2, 2}, {0.25, nan}, true});
    for (const char* part :
         {"X edges: found 1 edges", "Y edges: edge 2 (2 cm) is not above edge 1", "Z edges: edge 1 is nan",
          "Z edges: found a first edge of 0.25 cm, expected 0 on a mirrored grid"}) {
        CHECK_THAT(message, Catch::Contains(part));
    }
    CHECK_THAT(message_of({Geometry::rz, {1, 2}, {}, {0, 1}, false}),
               Catch::Contains("R edges: found a first edge of 1 cm, expected 0"));
    CHECK_THAT(message_of({Geometry::rz, {0, 2}, {0, 1}, {0, 1}, false}),
               Catch::Contains("Y edges: found 2, expected none"));
}

TEST_CASE("stretched edges start with the smallest cell, grow evenly and end at the extent", "[grid]") {
    for (const bool two_sided : {false, true}) {
        for (const std::size_t cells : {1U, 2U, 7U, 40U, 41U}) {
            INFO("cells " << cells << ", two-sided " << two_sided);
            const double smallest = 0.2;
            const auto edges = stretched_edges(30, cells, smallest, two_sided);
            REQUIRE(edges.size() == cells + 1);
            CHECK(edges.back() == 30);
            CHECK(edges.front() == (two_sided ? -30 : 0));
            const std::size_t first = two_sided ? (cells + 1) / 2 : 0;
            for (std::size_t i = first; i + 2 < edges.size() && cells > 2; ++i) {
                const double width = edges[i + 1] - edges[i];
                CHECK(edges[i + 1] > edges[i]);
                // One ratio for all, seen in the first and last pair.
                CHECK((edges[i + 2] - edges[i + 1]) / width ==
                      Approx((edges.back() - edges[cells - 1]) / (edges[cells - 1] - edges[cells - 2]))
                          .epsilon(1e-9));
            }
            if (cells > 2) {
                const std::size_t middle = two_sided ? cells / 2 : 0;
                CHECK(edges[middle + 1] - edges[middle] == Approx(smallest).epsilon(1e-12));
            }
            for (std::size_t i = 0; two_sided && i < edges.size(); ++i) {
                CHECK(edges[i] == -edges[cells - i]);
            }
        }
    }
}

TEST_CASE("stretched edges without room to grow are even", "[grid]") {
    const auto one = stretched_edges(10, 4, 0, false);
    const auto two = stretched_edges(10, 5, 4, true);
    for (std::size_t i = 0; i < one.size(); ++i) {
        CHECK(one[i] == Approx(2.5 * static_cast<double>(i)).margin(1e-14));
    }
    for (std::size_t i = 0; i < two.size(); ++i) {
        CHECK(two[i] == Approx(-10 + 4.0 * static_cast<double>(i)).margin(1e-14));
    }
    CHECK_THROWS_AS(stretched_edges(0, 4, 0, false), Error);
    CHECK_THROWS_AS(stretched_edges(1, 0, 0, false), Error);
    CHECK_THROWS_AS(stretched_edges(1, 4, -1, false), Error);
}
