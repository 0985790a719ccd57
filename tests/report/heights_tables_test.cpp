#include "aureole/base/constants.hpp"
#include "aureole/base/error.hpp"
#include "aureole/report/heights_tables.hpp"

#include <catch2/catch.hpp>

#include <cmath>

using namespace aureole;
using namespace aureole::report;
using Catch::Matchers::Contains;
using files::EcsvColumn;
using profiles::HeightsReport;

namespace {

constexpr double kpc = constants::kiloparsec;

profiles::HeightRow row(std::size_t image, std::size_t profile, int strip, bool chosen, double h) {
    profiles::HeightRow made;
    made.image = image;
    made.profile = profile;
    made.strip = strip;
    made.chosen = chosen;
    made.fit.model = chosen ? profiles::Model::exponential : profiles::Model::gaussian;
    made.fit.status = profiles::Status::ok;
    made.fit.component.resize(1);
    made.fit.component[0].h = h * kpc;
    made.fit.component[0].h_err_noise = 0.02 * kpc;
    made.fit.component[0].h_err_scatter = 0.05 * kpc;
    made.fit.component[0].amplitude = 3e-3;
    made.fit.chi2 = 12.5;
    made.fit.dof = 10;
    made.fit.aicc = 17;
    made.fit.curve = {1e-3, 2e-3, 4e-3};
    return made;
}

/// Two maps, each with a profile of three bins; the exponential was chosen.
HeightsReport sample() {
    HeightsReport report;
    for (std::size_t image = 0; image < 2; ++image) {
        profiles::Profile profile;
        profile.image = image;
        profile.height = {-2 * kpc, 0.5 * kpc, 2 * kpc};
        profile.width = {kpc, kpc, kpc};
        profile.mean = {1.1e-3, 2.1e-3, 3.9e-3};
        profile.covariance = Eigen::MatrixXd::Identity(3, 3) * 1e-8;
        profile.frequency = image == 0 ? 1.5e8 : 1.4e9;
        profile.unit = "Jy/beam";
        report.profiles.push_back(profile);
        const double h = image == 0 ? 1.8 : 1.2;
        report.rows.push_back(row(image, image, -1, true, h));
        report.rows.push_back(row(image, image, -1, false, 1.6 * h));
    }
    report.scores.resize(1);
    report.chosen = 0;
    profiles::HeightExponent exponent;
    exponent.maps = 2;
    exponent.frequency = 5e8;
    exponent.h0 = 1.45 * kpc;
    exponent.h0_error = 0.015 * kpc;
    exponent.eta = -0.1815;
    exponent.eta_error = 0.009;
    report.exponents.push_back(exponent);
    report.notes.push_back("A note.");
    return report;
}

const std::vector<std::string> labels{"150 MHz", "1.4 GHz"};

template <class Value>
const std::vector<Value>& values(const std::vector<EcsvColumn>& table, const std::string& name) {
    for (const EcsvColumn& column : table) {
        if (column.name == name) {
            return std::get<std::vector<Value>>(column.values);
        }
    }
    throw std::runtime_error("no column " + name);
}

} // namespace

TEST_CASE("the table of heights is in kpc and has one row per component", "[report]") {
    const auto table = heights_table(sample(), labels);
    CHECK(values<std::string>(table, "map") ==
          std::vector<std::string>{"150 MHz", "150 MHz", "1.4 GHz", "1.4 GHz"});
    CHECK(values<double>(table, "h")[0] == Approx(1.8).epsilon(1e-14));
    CHECK(values<double>(table, "h")[3] == Approx(1.92).epsilon(1e-14));
    CHECK(values<double>(table, "error_noise")[2] == Approx(0.02).epsilon(1e-14));
    CHECK(values<bool>(table, "chosen") == std::vector<bool>{true, false, true, false});
    CHECK(std::isnan(values<double>(table, "error_numerical")[0]));
    CHECK(values<double>(table, "frequency")[2] == 1.4e9);
}

TEST_CASE("a height that cannot be used has no number in the table", "[report]") {
    HeightsReport report = sample();
    report.rows[0].fit.status = profiles::Status::no_signal;
    const auto table = heights_table(report, labels);
    CHECK(std::isnan(values<double>(table, "h")[0]));
    CHECK(values<std::string>(table, "status")[0] == "no signal");
}

TEST_CASE("the table of profiles carries the curve of the chosen model and the range fitted", "[report]") {
    profiles::HeightsSpec spec;
    spec.least_height = kpc;
    const auto table = profiles_table(sample(), labels, spec);
    CHECK(values<double>(table, "height") == std::vector<double>{-2, 0.5, 2, -2, 0.5, 2});
    CHECK(values<double>(table, "model")[2] == 4e-3);
    CHECK(values<double>(table, "error")[1] == Approx(1e-4).epsilon(1e-12));
    CHECK(values<bool>(table, "fitted") == std::vector<bool>{true, false, true, true, false, true});
}

TEST_CASE("with each side fitted by itself a bin has the curve of its own side", "[report]") {
    HeightsReport report = sample();
    report.rows[0].fit.side = profiles::Side::above;
    report.rows.push_back(report.rows[0]);
    report.rows.back().fit.side = profiles::Side::below;
    report.rows.back().fit.curve = {7, 7, 7};
    const auto table = profiles_table(report, labels, {});
    const auto& model = values<double>(table, "model");
    CHECK((model[0] == 7 && model[1] == 2e-3 && model[2] == 4e-3));
}

TEST_CASE("JSON and terminal show the chosen model only", "[report]") {
    const std::string json = heights_json(sample(), labels).text();
    CHECK_THAT(json, Contains("exponential") && !Contains("gaussian") && Contains("\"h_kpc\": 1.8"));
    CHECK_THAT(exponent_json(sample()).text(), Contains("\"eta\": -0.1815") && Contains("\"h0_kpc\": 1.45"));
    HeightsReport alone = sample();
    alone.exponents.clear();
    CHECK(exponent_json(alone).text().substr(0, 4) == "null");
    const auto lines = terminal_lines(sample(), labels);
    REQUIRE(lines.size() == 5);
    CHECK_THAT(lines[1], Contains("150 MHz") && Contains("1.800 +- 0.020") && Contains("12.5/10"));
    CHECK_THAT(lines[3], Contains("eta = -0.1815 +- 0.0090") && Contains("1.450 +- 0.015 kpc at 0.5 GHz"));
    CHECK(lines[4] == "A note.");
}

TEST_CASE("components are numbered only where the lines shown have more than one", "[report]") {
    HeightsReport report = sample();
    report.rows[1].fit.model = profiles::Model::two_exponential;
    report.rows[1].fit.component.resize(2);
    for (const auto& line : terminal_lines(report, labels)) {
        CHECK_THAT(line, !Contains("#1"));
    }
    report.chosen.reset(); // all models are shown
    CHECK_THAT(terminal_lines(report, labels)[2], Contains("#1"));
}

TEST_CASE("tables without a label for every map are refused", "[report]") {
    CHECK_THROWS_AS(heights_table(sample(), std::vector<std::string>{"150 MHz"}), Error);
}
