#include "aureole/app/predict.hpp"
#include "aureole/base/error.hpp"
#include "aureole/files/fits_reader.hpp"

#include <catch2/catch.hpp>

#include <algorithm>
#include <cmath>
#include <filesystem>
#include <string>
#include <unistd.h>
#include <vector>

using namespace aureole;

namespace {

const std::string galaxy = R"(
[field.ordered]
profile = "double_exponential"
value = "4 uG"
radius = "6 kpc"
height = "3 kpc"
direction = "x_shaped"
pitch = "15 deg"
tilt = "50 deg"
[field.random]
profile = "double_exponential"
value = "5 uG"
radius = "6 kpc"
height = "2.5 kpc"
[gas.hi]
profile = "double_exponential"
value = "1 cm-3"
radius = "5 kpc"
height = "1.5 kpc"
[electrons]
energy_nodes = 25
[electrons.space]
radius = "4 kpc"
height = "2.5 kpc"
[protons]
energy_nodes = 25
[protons.space]
radius = "4 kpc"
height = "2.5 kpc"
[radio]
frequencies = ["150 MHz", "1.4 GHz"]
unit = "MJy/sr"
[gamma]
energies = ["1 GeV"]
[view]
inclination = "70 deg"
position_angle = "30 deg"
distance = "10 Mpc"
[map]
width = "400 arcsec"
height = "400 arcsec"
pixel = "20 arcsec"
polarisation = true
[accuracy]
estimate = false
[heights]
models = ["exponential"]
strips = 1
)";

const std::string rings = R"(
[grid]
geometry = "RZ"
radius = "9 kpc"
height = "6 kpc"
cells_r = 18
cells_z = 12
sectors = 48
)";

/// Both sides stored, or one and mirrored.
std::string boxes(bool mirror) {
    return std::string(R"(
[grid]
geometry = "XYZ"
half_width = "9 kpc"
height = "6 kpc"
cells_xy = 36
cells_z = 12
)") + (mirror ? "mirror = true\n" : "mirror = false\n");
}

scenario::Scenario scenario_of(const std::string& grid, const std::vector<std::string>& overrides = {}) {
    return scenario::parse(grid + galaxy, "test.toml", overrides);
}

/// The maps of a run, in memory.
class Run {
  public:
    explicit Run(const scenario::Scenario& scenario, RunContext context = {}) {
        std::string pattern = (std::filesystem::temp_directory_path() / "aureole_test_XXXXXX").string();
        REQUIRE(mkdtemp(pattern.data()) != nullptr);
        folder_ = pattern;
        context.threads = 2;
        result = app::predict(scenario, {folder_ / "results", false, "test"}, context);
    }
    ~Run() { std::filesystem::remove_all(folder_); }
    Run(const Run&) = delete;
    Run& operator=(const Run&) = delete;

    std::vector<double> map(const std::string& name) const {
        files::FitsReader reader((folder_ / "results" / "maps" / name).string());
        return reader.read_all(reader.hdus().front());
    }
    app::PredictResult result;

  private:
    std::filesystem::path folder_;
};

const std::vector<std::string> all_maps{"radio_150MHz.fits", "radio_1.4GHz.fits", "radio_1.4GHz_q.fits",
                                        "radio_1.4GHz_u.fits", "gamma.fits"};

/// Largest difference over the largest value of the total map of the same band.
double difference(const Run& one, const Run& two, const std::string& name) {
    const auto a = one.map(name);
    const auto b = two.map(name);
    const auto total = one.map(name == "gamma.fits" ? name : "radio_1.4GHz.fits");
    REQUIRE(a.size() == b.size());
    double largest = 0;
    double peak = 0;
    for (std::size_t i = 0; i < a.size(); ++i) {
        largest = std::max(largest, std::abs(a[i] - b[i]));
        peak = std::max(peak, total[i]);
    }
    REQUIRE(peak > 0);
    return largest / peak;
}

} // namespace

TEST_CASE("a mirrored grid with an X-shaped field gives the maps of the whole grid", "[app][predict]") {
    const Run one(scenario_of(boxes(true)));
    const Run two(scenario_of(boxes(false)));
    for (const auto& name : all_maps) {
        INFO(name);
        CHECK(difference(one, two, name) < 1e-5);
    }
}

TEST_CASE("rings and boxes of one galaxy give one sky within the size of their cells", "[app][predict]") {
    const Run one(scenario_of(rings));
    const Run two(scenario_of(boxes(true)));
    for (const auto& name :
         {"radio_1.4GHz.fits", "radio_1.4GHz_q.fits", "radio_1.4GHz_u.fits", "gamma.fits"}) {
        INFO(name);
        CHECK(difference(one, two, name) < 0.03);
    }
}

TEST_CASE("the plan counts cells, planes and memory, and the memory limit is held to it", "[app][plan]") {
    RunContext context;
    const auto plan = app::plan(scenario_of(rings), context);
    CHECK(plan.stored_cells == 18 * 12);
    CHECK(plan.cells == 18 * 24 * 48); // both sides, and sectors for the ordered field
    CHECK(plan.planes == 3 + 2 * 2);   // totals, and Q and U of two frequencies
    CHECK((plan.pixels_x == 20 && plan.pixels_y == 20));
    CHECK(plan.emissivity_bytes == plan.cells * plan.planes * 4);
    CHECK(plan.total_bytes > plan.emissivity_bytes);
    CHECK(plan.total_bytes < plan.emissivity_bytes + (50U << 20U));
    CHECK(plan.seconds > 0.1);
    CHECK(plan.seconds < 20);

    // Heights that change with energy keep every spectrum: 25 floats for each of 216 cells.
    const auto held = app::plan(scenario_of(rings, {"electrons.height_slope=-0.2"}), context);
    CHECK(held.total_bytes - plan.total_bytes == 24 * 4 * plan.stored_cells);

    CHECK(plan.passes == 1);
    context.memory_limit = plan.total_bytes - 1;
    const auto tight = app::plan(scenario_of(rings), context);
    CHECK(tight.passes == 2);
    CHECK(tight.total_bytes <= context.memory_limit);

    // A single channel of 144 MHz, with Q and U, is the least that can be held.
    context.memory_limit = plan.total_bytes - 4 * 4 * plan.cells - 1;
    try {
        app::predict(scenario_of(rings),
                     {std::filesystem::temp_directory_path() / "aureole_never", false, ""}, context);
        FAIL("ran in less memory than planned");
    } catch (const Error& error) {
        CHECK(error.kind() == ErrorKind::runtime);
        CHECK_THAT(error.what(), Catch::Matchers::Contains("--memory"));
    }
    CHECK_FALSE(std::filesystem::exists(std::filesystem::temp_directory_path() / "aureole_never"));
}

TEST_CASE("channels in several passes give the maps of one within the tolerance", "[app][plan]") {
    const auto scenario = scenario_of(rings, {"map.separate=true"});
    RunContext context;
    context.threads = 2;
    const auto whole = app::plan(scenario, context);
    const Run one(scenario);
    context.memory_limit = whole.total_bytes - whole.emissivity_bytes / 2;
    REQUIRE(app::plan(scenario, context).passes > 1);
    const Run several(scenario, context);
    CHECK(several.result.files == one.result.files);
    for (const auto& name : all_maps) {
        INFO(name);
        CHECK(difference(one, several, name) < 2e-3);
    }
}

TEST_CASE("a run warns of what emits nothing", "[app][predict]") {
    const Run dark(scenario_of(rings, {"electrons.source=none", "protons.source=none"}));
    std::string all;
    for (const auto& warning : dark.result.warnings) {
        all += warning + "\n";
    }
    CHECK_THAT(all, Catch::Matchers::Contains("1.4 GHz: nothing is emitted") &&
                        Catch::Matchers::Contains("1 GeV: nothing is emitted"));
}
