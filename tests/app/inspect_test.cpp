#include "grid/sample_file.hpp"

#include "aureole/app/inspect.hpp"
#include "aureole/base/constants.hpp"
#include "aureole/base/error.hpp"

#include <catch2/catch.hpp>

#include <array>
#include <cmath>
#include <cstdio>
#include <fstream>
#include <functional>
#include <iterator>
#include <string>
#include <unistd.h>
#include <vector>

using namespace aureole;
using Catch::Matchers::Contains;
using std::string;

namespace {

struct Inspected {
    int code = 0;
    string text;
};

/// Standard output of `aureole inspect`, caught on its way.
Inspected inspect_file(const TestFolder& folder, const SampleFile& sample) {
    const string path = folder.file("halo.fits");
    const string caught = folder.file("stdout");
    sample.write(path);
    std::fflush(stdout);
    const int terminal = dup(STDOUT_FILENO);
    std::FILE* file = std::fopen(caught.c_str(), "w");
    REQUIRE(file != nullptr);
    dup2(fileno(file), STDOUT_FILENO);
    Inspected result;
    try {
        result.code = app::inspect(path, false, RunContext{});
    } catch (...) {
        result.code = -1;
    }
    std::fflush(stdout);
    dup2(terminal, STDOUT_FILENO);
    close(terminal);
    std::fclose(file);
    std::ifstream stream(caught);
    result.text.assign(std::istreambuf_iterator<char>(stream), {});
    return result;
}

/// The first number behind a piece of text.
double number_behind(const string& text, const string& before) {
    const std::size_t place = text.find(before);
    INFO(text);
    REQUIRE(place != string::npos);
    return std::stod(text.substr(place + before.size()));
}

string warnings_of(const string& text) {
    string all;
    for (std::size_t at = text.find("warning: "); at != string::npos; at = text.find("warning: ", at + 1)) {
        all += text.substr(at, text.find('\n', at) - at + 1);
    }
    return all;
}

std::vector<double> edges(double from, double step, std::size_t cells) {
    std::vector<double> made;
    for (std::size_t i = 0; i <= cells; ++i) {
        made.push_back(from + step * static_cast<double>(i));
    }
    return made;
}

double middle(const std::vector<double>& edge, std::size_t i) {
    return 0.5 * (edge[i] + edge[i + 1]);
}

using Vector = std::array<double, 3>;

SampleHdu primary_of(const string& geometry, bool mirrored, const string& parity) {
    SampleHdu primary;
    primary.set("FMTNAME", string("HALO-GRID"));
    primary.set("FMTVERS", string("1.0"));
    primary.set("GEOMETRY", geometry);
    primary.set("ZMIRROR", mirrored);
    primary.set("BPARITY", parity);
    return primary;
}

/// Rings of 0.5 kpc, `nr` x 8, z from `bottom`; field(R, z) in uG at the middle of a cell.
SampleFile rings(const std::function<Vector(double, double)>& field,
                 std::size_t nr = 6,
                 bool mirrored = false,
                 const string& parity = "EVEN") {
    constexpr std::size_t nz = 8;
    const auto r = edges(0, 0.5, nr);
    const auto z = edges(mirrored ? 0 : -2, 0.5, nz);
    SampleFile file;
    file.add(primary_of("RZ", mirrored, parity));
    file.add(sample_axis("R_EDGES", r, "kpc"));
    file.add(sample_axis("Z_EDGES", z, "kpc"));
    auto& hdu = file.add(sample_data("B_VECTOR", {3, nr, nz}, "uG", "COMP,R,Z", [&](std::size_t v) {
        const std::size_t cell = v / 3;
        return field(middle(r, cell % nr), middle(z, cell / nr))[v % 3];
    }));
    hdu.set("COMPS", string("R,PHI,Z"));
    return file;
}

/// Boxes of 1 x 1 x 0.5 kpc, 6 x 5 x 8 of them about the origin.
SampleFile boxes(const std::function<Vector(double, double, double)>& field) {
    const auto x = edges(-3, 1, 6);
    const auto y = edges(-2.5, 1, 5);
    const auto z = edges(-2, 0.5, 8);
    SampleFile file;
    file.add(primary_of("XYZ", false, "EVEN"));
    file.add(sample_axis("X_EDGES", x, "kpc"));
    file.add(sample_axis("Y_EDGES", y, "kpc"));
    file.add(sample_axis("Z_EDGES", z, "kpc"));
    auto& hdu = file.add(sample_data("B_VECTOR", {3, 6, 5, 8}, "uG", "COMP,X,Y,Z", [&](std::size_t v) {
        const std::size_t cell = v / 3;
        return field(middle(x, cell % 6), middle(y, cell / 6 % 5), middle(z, cell / 30))[v % 3];
    }));
    hdu.set("COMPS", string("X,Y,Z"));
    return file;
}

const string mean_text = "div B              ";

} // namespace

TEST_CASE("a field without divergence has none, whatever its azimuthal component", "[app][inspect]") {
    const TestFolder folder;
    // -R/10 and 3 + z/5: -1/5 + 1/5 = 0, and straight lines, which the faces meet exactly.
    const auto result = inspect_file(folder, rings([](double r, double z) {
                                         return Vector{-0.1 * r, 5 * std::sin(3 * r + z), 3 + 0.2 * z};
                                     }));
    CHECK(result.code == 0);
    CHECK(number_behind(result.text, mean_text) < 1e-5); // float32
    CHECK(number_behind(result.text, "on average, at most ") < 1e-5);
    CHECK_THAT(warnings_of(result.text), !Contains("div"));
    const auto box = inspect_file(folder, boxes([](double x, double y, double z) {
                                      return Vector{y + 2 * x, 3 * z - y, x - z};
                                  }));
    CHECK(number_behind(box.text, mean_text) < 1e-5);
}

TEST_CASE("the divergence of a broken field is the one of its formula, and a warning", "[app][inspect]") {
    const TestFolder folder;
    SECTION("rings") {
        // R/2 alone: div = 1 uG/kpc everywhere. With B_phi = 4 uG the strength is 4 to 4.2 uG: 0.5/4.
        const auto result = inspect_file(folder, rings([](double r, double) {
                                             return Vector{0.5 * r, 4, 0};
                                         }));
        CHECK(result.code == 0);
        CHECK(number_behind(result.text, mean_text) == Approx(0.122).epsilon(0).margin(0.006));
        CHECK(number_behind(result.text, "on average, at most ") == Approx(0.125).epsilon(0).margin(0.006));
        // |B| is least in the cell at the axis.
        CHECK_THAT(warnings_of(result.text),
                   Contains("B_VECTOR") && Contains("divergence") && Contains("(R 1, Z "));
    }
    SECTION("boxes") {
        // div = 1 uG/kpc, size (1 x 1 x 0.5)^(1/3) kpc = 0.794 kpc, |B| 5 to 5.4 uG.
        const auto result = inspect_file(folder, boxes([](double x, double, double) {
                                             return Vector{x, 5, 0};
                                         }));
        CHECK(number_behind(result.text, mean_text) == Approx(0.155).epsilon(0).margin(0.006));
        CHECK_THAT(warnings_of(result.text), Contains("divergence"));
    }
    SECTION("one spoilt cell") {
        auto sample = rings([](double, double) { return Vector{0, 1, 3}; });
        sample.at("B_VECTOR").values[3 * (2 + 6 * 3) + 2] = -60; // R 3, Z 4
        const auto result = inspect_file(folder, sample);
        const double worst = number_behind(result.text, "on average, at most ");
        CHECK(worst > 0.5);
        // The flux through the spoilt cell's own faces cancels: its neighbours above and below show it.
        CHECK_THAT(result.text, Contains("in cell (R 3, Z 3)") || Contains("in cell (R 3, Z 5)"));
    }
}

TEST_CASE("on a mirrored grid the parity tells the flux through the plane", "[app][inspect]") {
    const TestFolder folder;
    const auto even = [](double r, double z) { return Vector{-0.1 * r, 1, 0.2 * z}; };
    const auto odd = [](double, double) { return Vector{0, 1, 3}; };
    const auto worst = [&](const SampleFile& sample) {
        return number_behind(inspect_file(folder, sample).text, "on average, at most ");
    };
    CHECK(worst(rings(even, 6, true, "EVEN")) < 1e-5);
    CHECK(worst(rings(odd, 6, true, "ODD")) < 1e-5);
    // A vertical field that does not turn at the plane jumps there from -3 to 3: 3 uG in 0.5 kpc.
    CHECK(worst(rings(odd, 6, true, "EVEN")) == Approx(3 / std::hypot(1, 3)).epsilon(0.01));
}

TEST_CASE("the divergence of a smooth field falls with the square of its cells", "[app][inspect]") {
    // Dipole-like: A_phi = R exp(-(R^2 + z^2)/8), B = curl A; sampled at the middles.
    const TestFolder folder;
    double before = 0;
    for (const std::size_t factor : {std::size_t{1}, std::size_t{2}, std::size_t{4}}) {
        const std::size_t nr = 8 * factor;
        const std::size_t nz = 16 * factor;
        const double step = 0.5 / static_cast<double>(factor);
        const auto r = edges(0, step, nr);
        const auto z = edges(-4, step, nz);
        SampleFile file;
        file.add(primary_of("RZ", false, "EVEN"));
        file.add(sample_axis("R_EDGES", r, "kpc"));
        file.add(sample_axis("Z_EDGES", z, "kpc"));
        auto& hdu = file.add(sample_data("B_VECTOR", {3, nr, nz}, "uG", "COMP,R,Z", [&](std::size_t v) {
            const double radius = middle(r, v / 3 % nr);
            const double height = middle(z, v / 3 / nr);
            const double bell = std::exp(-(radius * radius + height * height) / 8);
            const Vector field{0.25 * radius * height * bell, 0, (2 - 0.25 * radius * radius) * bell};
            return field[v % 3];
        }));
        hdu.set("COMPS", string("R,PHI,Z"));
        // The size of a cell halves too, hence a factor 8 in all.
        const double mean = number_behind(inspect_file(folder, file).text, mean_text);
        if (before > 0) {
            CHECK(std::log2(before / mean) == Approx(3).epsilon(0).margin(0.25));
        }
        before = mean;
    }
}

TEST_CASE("pressures of cosmic rays are compared with field and gas", "[app][inspect]") {
    const TestFolder folder;
    auto sample = rings([](double, double) { return Vector{0, 5, 0}; });
    const std::vector<std::size_t> shape{6, 8};
    const std::size_t spoilt = 2 + 6 * 3; // R 3, Z 4
    std::vector<double> energy;
    for (int i = 0; i <= 60; ++i) {
        energy.push_back(std::pow(10, 0.1 * i)); // GeV, 1 to 1e6
    }
    sample.add(sample_axis("E_PROTON", energy, "GeV"));
    sample.add(sample_data("CR_PROTON", {61, 6, 8}, "cm-3 GeV-1", "E_PROTON,R,Z", [&](std::size_t v) {
        return (v / 61 == spoilt ? 2e-7 : 1e-10) * std::pow(energy[v % 61], -2.5);
    }));
    sample.add(sample_data("B_TURB", shape, "uG", "R,Z", [](std::size_t) { return 12; }));
    sample.add(sample_data("N_E", shape, "cm-3", "R,Z", [](std::size_t) { return 0.01; }));
    sample.add(sample_data("T_E", shape, "K", "R,Z", [](std::size_t) { return 1e6; }));
    const auto result = inspect_file(folder, sample);
    CHECK(result.code == 0);
    // 1/3 int T^-2.5 T (T + 2m)/(T + m) dT by Simpson's rule in ln T.
    const double m = constants::proton_rest_energy / constants::gigaelectronvolt;
    constexpr int steps = 20000;
    const double h = std::log(1e6) / steps;
    double integral = 0;
    for (int s = 0; s <= steps; ++s) {
        const double t = std::exp(h * s);
        const double weight = s == 0 || s == steps ? 1 : s % 2 == 1 ? 4 : 2;
        integral += weight * h / 3 * std::pow(t, -0.5) * (t + 2 * m) / (t + m);
    }
    const double pressure = 2e-7 * integral / 3 * constants::gigaelectronvolt;
    const double magnetic = (25 + 144) * 1e-12 / (8 * constants::pi);
    const double gas = 2 * 0.01 * constants::boltzmann * 1e6;
    const string most = "at most ";
    const std::size_t first = result.text.find("CR pressure");
    REQUIRE(first != string::npos);
    const string lines = result.text.substr(first);
    CHECK(number_behind(lines, most) == Approx(pressure / magnetic).epsilon(0.01));
    const string second = lines.substr(lines.find("CR pressure", 5));
    CHECK(number_behind(second, most) == Approx(pressure / gas).epsilon(0.01));
    CHECK_THAT(lines, Contains("that of the magnetic field, in cell (R 3, Z 4)") &&
                          Contains("that of the ionised gas, in cell (R 3, Z 4)"));
    CHECK(pressure / magnetic > 30);
    CHECK_THAT(warnings_of(result.text), Contains("(R 3, Z 4)") && Contains("magnetic field"));
    for (std::size_t e = 0; e < 61; ++e) {
        sample.at("CR_PROTON").values[spoilt * 61 + e] *= 1e-3;
    }
    CHECK_THAT(warnings_of(inspect_file(folder, sample).text), !Contains("pressure"));
}

TEST_CASE("helium per nucleon presses as helium per nucleus", "[app][inspect]") {
    const TestFolder folder;
    const auto ratio = [&](double nucleons, const string& kind) {
        auto sample = rings([](double, double) { return Vector{0, 1, 0}; });
        std::vector<double> energy;
        for (int i = 0; i <= 30; ++i) {
            energy.push_back(4 * std::pow(10, 0.1 * i) / nucleons);
        }
        sample.add(sample_axis("E_HELIUM", energy, "GeV")).set("EKIND", kind);
        sample.add(sample_data("CR_HELIUM", {31, 6, 8}, "cm-3 GeV-1", "E_HELIUM,R,Z", [&](std::size_t v) {
            return 1e-10 * nucleons * std::pow(energy[v % 31] * nucleons, -2.6); // per energy: dT = A dT/A
        }));
        return number_behind(inspect_file(folder, sample).text, "CR pressure        at most ");
    };
    CHECK(ratio(4, "PER_NUCLEON") == Approx(ratio(1, "KINETIC")).epsilon(1e-6));
}

TEST_CASE("files without field or spectra are not judged by them", "[app][inspect]") {
    const TestFolder folder;
    auto sample = sample_file(true);
    sample.remove("B_VECTOR");
    CHECK_THAT(inspect_file(folder, sample).text, !Contains("div B") && !Contains("CR pressure"));
    auto thin = rings([](double, double) { return Vector{1, 0, 0}; }, 1);
    CHECK_THAT(inspect_file(folder, thin).text, !Contains("div B"));
}

namespace {

/// A sample with emissivities at three frequencies and at two photon energies.
SampleFile with_emissivities() {
    auto sample = sample_file(true);
    sample.add(sample_axis("FREQUENCY", {1e8, 1e9, 1e10}, "Hz"));
    sample.add(sample_axis("E_GAMMA", {1, 10}, "GeV"));
    sample.add(sample_data("EMISSIVITY_DARK", {3, 3, 5}, "erg s-1 cm-3 Hz-1 sr-1", "FREQUENCY,R,Z",
                           [](std::size_t v) { return 1e-30 * static_cast<double>(v); }));
    sample.add(sample_data("EMISSIVITY_PIONS", {2, 3, 5}, "GeV-1 cm-3 s-1 sr-1", "E_GAMMA,R,Z",
                           [](std::size_t v) { return 1e-28 * static_cast<double>(1 + v); }));
    return sample;
}

} // namespace

TEST_CASE("ready-made emissivities are listed and not called unknown", "[app][inspect]") {
    const TestFolder folder;
    const auto result = inspect_file(folder, with_emissivities());
    CHECK(result.code == 0);
    CHECK_THAT(result.text,
               Contains("EMISSIVITY_DARK    float32  0 to 4.4e-29 erg s-1 cm-3 Hz-1 sr-1, along FREQUENCY") &&
                   Contains("EMISSIVITY_PIONS   float32  1e-28 to 3e-27") &&
                   Contains("E_GAMMA           2 nodes   1 to 10 GeV, "));
    CHECK_THAT(warnings_of(result.text), !Contains("EMISSIVITY") && !Contains("FREQUENCY"));
    auto unused = with_emissivities();
    unused.remove("EMISSIVITY_DARK");
    CHECK_THAT(warnings_of(inspect_file(folder, unused).text), Contains("HDU FREQUENCY: no data use it"));
}

TEST_CASE("emissivities that do not fit are refused by name", "[app][inspect][bad-input]") {
    const TestFolder folder;
    struct Spoilt {
        string name;
        std::function<void(SampleFile&)> change;
        std::vector<string> parts;
    };
    const auto dark = [](const char* keyword, const char* value) {
        return [keyword, value](SampleFile& f) { f.at("EMISSIVITY_DARK").set(keyword, string(value)); };
    };
    const std::vector<Spoilt> cases{
        {"transposed", dark("AXES", "R,Z,FREQUENCY"), {"AXES: found 'R,Z,FREQUENCY'", "'FREQUENCY,R,Z'"}},
        {"no axes", [](SampleFile& f) { f.at("EMISSIVITY_DARK").remove("AXES"); }, {"AXES: found none"}},
        {"photons",
         dark("BUNIT", "GeV-1 cm-3 s-1 sr-1"),
         {"BUNIT: found 'GeV-1 cm-3 s-1 sr-1'", "erg s-1 cm-3"}},
        {"not per sr", dark("BUNIT", "erg s-1 cm-3 Hz-1"), {"BUNIT", "beside FREQUENCY"}},
        {"no unit", [](SampleFile& f) { f.at("EMISSIVITY_DARK").remove("BUNIT"); }, {"BUNIT: missing"}},
        {"no axis", [](SampleFile& f) { f.remove("FREQUENCY"); }, {"no usable HDU FREQUENCY"}},
        {"length",
         [](SampleFile& f) {
             f.at("FREQUENCY") = sample_axis("FREQUENCY", {1e8, 1e9}, "Hz");
         },
         {"NAXISn: found 3 x 3 x 5, expected 2 x 3 x 5"}},
        {"negative",
         [](SampleFile& f) { f.at("EMISSIVITY_DARK").values[3 * 4 + 1] = -1e-30; },
         {"cell (R 2, Z 2), frequency 2: found -1e-30", "0 values not finite, 1 negative"}},
        {"NaN",
         [](SampleFile& f) { f.at("EMISSIVITY_DARK").values[0] = std::nan(""); },
         {"cell (R 1, Z 1), frequency 1: found nan"}},
        {"label",
         [](SampleFile& f) { f.at("EMISSIVITY_DARK").name = "EMISSIVITY_"; },
         {"EXTNAME", "label ''"}},
    };
    for (const Spoilt& one : cases) {
        auto sample = with_emissivities();
        one.change(sample);
        const auto result = inspect_file(folder, sample);
        INFO(one.name << "\n" << result.text);
        CHECK(result.code == static_cast<int>(ErrorKind::input));
        for (const string& part : one.parts) {
            CHECK_THAT(result.text, Contains("problem: ") && Contains("HDU EMISSIVITY_") && Contains(part));
        }
        CHECK_THAT(result.text, Contains("1 problem found"));
    }
}
