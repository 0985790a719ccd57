#include "aureole/app/predict.hpp"
#include "aureole/base/error.hpp"
#include "aureole/files/fits_reader.hpp"

#include <catch2/catch.hpp>

#include <algorithm>
#include <filesystem>
#include <fstream>
#include <sstream>
#include <string>
#include <unistd.h>
#include <vector>

using namespace aureole;
using Catch::Matchers::Contains;

namespace {

const std::string galaxy = R"(
[grid]
radius = "10 kpc"
height = "8 kpc"
cells_r = 12
cells_z = 14
smallest_z = "0.2 kpc"
[field.random]
profile = "double_exponential"
value = "6 uG"
radius = "10 kpc"
height = "4 kpc"
[gas.hi]
profile = "sech2"
value = "1 cm-3"
radius = "6 kpc"
height = "0.3 kpc"
[transport]
energy_from = "100 MeV"
energy_to = "2 TeV"
bins_per_decade = 5
[transport.protons.source.discs]
radius = "4 kpc"
height = "0.1 kpc"
power = "6e40 erg s-1"
[transport.electrons.source.discs]
radius = "4 kpc"
height = "0.1 kpc"
power = "1e39 erg s-1"
[law.even]
kind = "constant"
anchor = "rate"
anchor_radius = "5 kpc"
anchor_rate = "1e-9 s-1"
[law.steep]
kind = "rigidity_power"
slope = 0.5
anchor = "rate"
anchor_radius = "5 kpc"
anchor_rate = "1e-9 s-1"
[radio]
frequencies = ["150 MHz", "1.5 GHz"]
unit = "MJy/sr"
[gamma]
energies = ["1 GeV"]
[view]
inclination = "90 deg"
distance = "10 Mpc"
[map]
pixel = "15 arcsec"
[heights]
models = ["exponential"]
strips = 1
[accuracy]
estimate = false
)";

/// The results of a run.
class Run {
  public:
    explicit Run(const std::vector<std::string>& overrides, int threads = 2) {
        std::string pattern = (std::filesystem::temp_directory_path() / "aureole_test_XXXXXX").string();
        REQUIRE(mkdtemp(pattern.data()) != nullptr);
        folder_ = pattern;
        RunContext context;
        context.threads = threads;
        result = app::predict(scenario::parse(galaxy, "laws.toml", overrides),
                              {folder_ / "results", false, "test"}, context);
    }
    ~Run() { std::filesystem::remove_all(folder_); }
    Run(const Run&) = delete;
    Run& operator=(const Run&) = delete;

    std::string text(const std::string& name) const {
        std::ifstream stream(folder_ / "results" / name);
        REQUIRE(stream);
        std::ostringstream all;
        all << stream.rdbuf();
        return all.str();
    }
    files::FitsReader map(const std::string& name) const {
        return files::FitsReader((folder_ / "results" / name).string());
    }
    bool has(const std::string& name) const {
        return std::find(result.files.begin(), result.files.end(), name) != result.files.end();
    }
    app::PredictResult result;

  private:
    std::filesystem::path folder_;
};

std::vector<double> values(const Run& run, const std::string& name) {
    auto reader = run.map(name);
    return reader.read_all(reader.hdus().front());
}

std::string joined(const std::vector<std::string>& lines) {
    std::string all;
    for (const auto& line : lines) {
        all += line + "\n";
    }
    return all;
}

} // namespace

TEST_CASE("two laws of a run get the results that each gets alone", "[app][laws]") {
    const Run both({});
    for (const std::string law : {"even", "steep"}) {
        INFO(law);
        const Run alone({"transport.laws=" + law}, 1);
        CHECK(alone.has("maps/radio_1.5GHz.fits"));
        REQUIRE(both.has(law + "/maps/radio_1.5GHz.fits"));
        for (const std::string map :
             {"maps/radio_150MHz.fits", "maps/radio_1.5GHz.fits", "maps/gamma.fits"}) {
            CHECK(values(both, law + "/" + map) == values(alone, map));
        }
        CHECK_FALSE(alone.has("tables/law_heights.ecsv"));
    }
    for (const std::string table : {"laws", "budgets", "pressure", "local_spectra", "law_heights"}) {
        CHECK_THAT(both.text("tables/" + table + ".ecsv"), Contains("even") && Contains("steep"));
    }
    CHECK_THAT(both.text("summary.json"), Contains("\"law\": \"even\"") && Contains("\"law\": \"steep\""));
    CHECK_THAT(joined(both.result.summary), Contains("Where the energy went"));
}

TEST_CASE("maps tell what share comes from particles older than the sources", "[app][laws]") {
    const Run young({"transport.laws=even", "transport.source_age=0.001 Myr"});
    auto reader = young.map("maps/radio_1.5GHz.fits");
    const auto share = reader.number(reader.hdus().front(), "NOTSTEAD");
    REQUIRE(share);
    CHECK(*share == Approx(1).epsilon(1e-3));
    CHECK_THAT(joined(young.result.warnings), Contains("older than the sources"));
    const Run old({"transport.laws=even"});
    auto steady = old.map("maps/radio_1.5GHz.fits");
    CHECK(steady.number(steady.hdus().front(), "NOTSTEAD") == 0.0);
    CHECK_THAT(joined(old.result.warnings), !Contains("older than the sources"));
}

TEST_CASE("a top channel without particles to make it is refused with what it needs", "[app][laws]") {
    try {
        const Run run({"transport.energy_to=5 GeV"});
        FAIL("ran");
    } catch (const Error& error) {
        CHECK(error.kind() == ErrorKind::scenario);
        CHECK_THAT(error.what(), Contains("transport.energy_to: found 5 GeV") && Contains("1.5 GHz"));
    }
}
