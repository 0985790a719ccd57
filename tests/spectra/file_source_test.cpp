#include "../grid/sample_file.hpp"

#include "aureole/base/constants.hpp"
#include "aureole/base/error.hpp"
#include "aureole/spectra/closed_form.hpp"
#include "aureole/spectra/file_source.hpp"

#include <catch2/catch.hpp>

#include <cmath>
#include <cstdlib>
#include <fstream>
#include <limits>
#include <thread>

using namespace aureole;
using namespace aureole::spectra;
using Catch::Matchers::Contains;
using std::string;

namespace {

constexpr double gev = constants::gigaelectronvolt;

const TestFolder& folder() {
    static const TestFolder one;
    return one;
}

Source written(const SampleFile& sample, Species species = Species::electrons) {
    const string path = folder().file("halo.fits");
    sample.write(path);
    return file_source(grid::open_grid_file(path), species);
}

/// All spectra, read `block` cells at a time into rows of nodes + 3.
std::vector<float> read_all(const Source& source, std::size_t block = 4) {
    const std::size_t nodes = source.basis->nodes();
    const std::size_t stride = nodes + 3;
    const auto reader = source.open();
    std::vector<float> rows(block * stride);
    std::vector<float> all;
    for (std::size_t first = 0; first < source.cells; first += block) {
        const std::size_t count = std::min(block, source.cells - first);
        std::fill(rows.begin(), rows.end(), -7.0F);
        reader(first, count, rows.data(), stride);
        for (std::size_t c = 0; c < count; ++c) {
            const float* row = rows.data() + c * stride;
            all.insert(all.end(), row, row + nodes);
            CHECK(row[nodes] == -7); // the padding is left alone
        }
    }
    return all;
}

/// M = N T^2.5 of the sample: 1e-11 (1 + cell/10) (E/GeV)^-2.7 cm-3 GeV-1 at node i, E kinetic.
double sample_value(std::size_t cell, std::size_t node) {
    const double energy = sample_energies()[node];
    return 1e-11 * (1 + 0.1 * static_cast<double>(cell)) * std::pow(energy, -2.7) / gev *
           std::pow(energy * gev, weighting);
}

void check_sample(const std::vector<float>& values, double factor, double tolerance) {
    REQUIRE(values.size() % 9 == 0);
    for (std::size_t v = 0; v < values.size(); ++v) {
        REQUIRE(values[v] == Approx(factor * sample_value(v / 9, v % 9)).epsilon(tolerance));
    }
}

string message_of(const std::function<void()>& call) {
    try {
        call();
    } catch (const Error& error) {
        CHECK(error.kind() == ErrorKind::input);
        return error.what();
    }
    return "accepted";
}

constexpr double float_twice = 2.5e-7; // two roundings to 24 bits and one of the scale

} // namespace

TEST_CASE("spectra of a file are those that were written", "[spectra][file]") {
    for (const bool rings : {false, true}) {
        const auto source = written(sample_file(rings));
        CHECK(source.cells == (rings ? 15U : 60U));
        CHECK(source.name == "CR_ELECTRON");
        for (const std::size_t block : {1U, 4U, 60U}) {
            check_sample(read_all(source, block), 1, float_twice);
        }
    }
}

TEST_CASE("spectra larger than a block of the file are whole", "[spectra][file]") {
    auto sample = sample_file(false);
    const auto energy = sample_energies(33); // 60 cells x 33 x 4 bytes: two blocks of 2880 and a part
    sample.at("E_LEPTON") = sample_axis("E_LEPTON", energy, "GeV");
    sample.at("CR_ELECTRON") =
        sample_data("CR_ELECTRON", sample_shape(false, 33), "cm-3 GeV-1", "E_LEPTON,X,Y,Z",
                    [&](std::size_t v) { return 1e-9 * static_cast<double>(v + 1); });
    const auto source = written(sample);
    const auto values = read_all(source, 7);
    for (std::size_t v = 0; v < values.size(); ++v) {
        const double expected =
            1e-9 * static_cast<double>(v + 1) / gev * std::pow(energy[v % 33] * gev, weighting);
        REQUIRE(values[v] == Approx(expected).epsilon(float_twice));
    }
    CHECK_NOTHROW(source.finish());
}

TEST_CASE("64-bit data and other units give the same spectra", "[spectra][file]") {
    auto sample = sample_file(true);
    auto& data = sample.at("CR_ELECTRON");
    data.as_double = true;
    check_sample(read_all(written(sample)), 1, float_twice);
    data.set("BUNIT", string("m-3 GeV-1"));
    check_sample(read_all(written(sample)), 1e-6, float_twice);
    data.as_double = false;
    check_sample(read_all(written(sample)), 1e-6, float_twice);
    data.set("BUNIT", string("cm-3 MeV-1"));
    check_sample(read_all(written(sample)), 1e3, float_twice);
}

TEST_CASE("64-bit data below the range of floats are kept", "[spectra][file]") {
    auto sample = sample_file(true);
    auto& data = sample.at("CR_ELECTRON");
    data.as_double = true;
    data.set("BUNIT", string("cm-3 EeV-1"));
    for (double& value : data.values) {
        value *= 1e-30;
    }
    // 1e-41 of 1/EeV is above 1e-38 only after the energies are multiplied in.
    sample.at("E_LEPTON").set("BUNIT", string("PeV"));
    const auto values = read_all(written(sample));
    const double expected = 1e-41 * std::pow(0.1, -2.7) / (1e9 * gev) * std::pow(0.1e6 * gev, weighting);
    CHECK(values.front() == Approx(expected).epsilon(float_twice));
}

TEST_CASE("electrons and positrons count together", "[spectra][file]") {
    auto sample = sample_file(true);
    auto positrons = sample.at("CR_ELECTRON");
    positrons.name = "CR_POSITRON";
    for (double& value : positrons.values) {
        value *= 0.25;
    }
    sample.add(positrons);
    const auto source = written(sample);
    check_sample(read_all(source), 1.25, float_twice);
    CHECK_NOTHROW(source.finish());
    auto together = sample_file(true);
    together.at("CR_ELECTRON").name = "CR_LEPTON";
    check_sample(read_all(written(together)), 1, float_twice);
}

TEST_CASE("a spectrum against total energy is one against kinetic energy", "[spectra][file]") {
    auto sample = sample_file(true);
    sample.at("E_LEPTON").set("EKIND", string("TOTAL"));
    const auto source = written(sample);
    const double kinetic = 0.1 * gev - constants::electron_rest_energy;
    CHECK(source.basis->energy().front() == Approx(kinetic).epsilon(1e-14));
    const double expected = 1e-11 * std::pow(0.1, -2.7) / gev * std::pow(kinetic, weighting);
    CHECK(read_all(source).front() == Approx(expected).epsilon(float_twice));
}

TEST_CASE("losslessly compressed and packed files give the same spectra", "[spectra][file]") {
    sample_file(true).write(folder().file("plain.fits"));
    const auto make = [&](const string& command) { return std::system(command.c_str()) == 0; };
    const string plain = folder().file("plain.fits");
    const string packed = folder().file("packed.fits.gz");
    REQUIRE(make("gzip -c '" + plain + "' > '" + packed + "'"));
    check_sample(read_all(file_source(grid::open_grid_file(packed), Species::electrons)), 1, float_twice);
    const string tiled = folder().file("tiled.fits");
    const string script = "from astropy.io import fits; import sys; h = fits.open(sys.argv[1]); "
                          "i = h.index_of('CR_ELECTRON'); d = h[i]; "
                          "h[i] = fits.CompImageHDU(d.data, d.header, name='CR_ELECTRON', "
                          "compression_type='GZIP_2', quantize_level=0); "
                          "h.writeto(sys.argv[2], checksum=True, overwrite=True)";
    if (!make("/usr/bin/python3 -c 'import astropy' 2>/dev/null")) {
        WARN("skipped: no astropy to compress with");
        return;
    }
    REQUIRE(make("/usr/bin/python3 -W ignore -c \"" + script + "\" '" + plain + "' '" + tiled + "'"));
    const auto source = file_source(grid::open_grid_file(tiled), Species::electrons);
    check_sample(read_all(source), 1, float_twice);
    CHECK_NOTHROW(source.finish());
}

TEST_CASE("a changed bit is found when all cells have been read", "[spectra][file][bad-input]") {
    for (const bool as_double : {false, true}) {
        auto sample = sample_file(true);
        sample.remove("GAS_HI");
        sample.remove("B_VECTOR");
        sample.at("CR_ELECTRON").as_double = as_double;
        const string path = folder().file("halo.fits");
        sample.write(path);
        {
            const auto size = static_cast<long>(std::filesystem::file_size(path));
            std::fstream file(path, std::ios::in | std::ios::out | std::ios::binary);
            file.seekg(size - 2880 + 402);
            const auto byte = static_cast<char>(file.get() ^ 2);
            file.seekp(size - 2880 + 402);
            file.put(byte);
        }
        const auto file = grid::open_grid_file(path);
        const auto source = file_source(file, Species::electrons);
        read_all(source);
        CHECK_THAT(message_of(source.finish),
                   Contains("halo.fits") && Contains("CR_ELECTRON") && Contains("checksum"));
        // Read twice, as for an estimate on a coarser grid: the sum of words is of no use then.
        const auto twice = file_source(file, Species::electrons);
        read_all(twice);
        read_all(twice);
        CHECK_THAT(message_of(twice.finish), Contains("checksum"));
    }
    const auto intact = written(sample_file(true));
    read_all(intact);
    CHECK_NOTHROW(intact.finish());
    const auto unread = written(sample_file(true));
    CHECK_NOTHROW(unread.finish());
}

TEST_CASE("a bad density is refused with its cell and energy", "[spectra][file][bad-input]") {
    for (const bool as_double : {false, true}) {
        const auto reading = [&](double value) {
            auto sample = sample_file(true);
            sample.at("CR_ELECTRON").as_double = as_double;
            sample.at("CR_ELECTRON").values[7 * 9 + 4] = value;
            const auto source = written(sample);
            return message_of([&] { read_all(source); });
        };
        INFO((as_double ? "float64" : "float32"));
        CHECK_THAT(reading(-1e-11), Contains("halo.fits") && Contains("HDU CR_ELECTRON") &&
                                        Contains("cell (R 2, Z 3), energy node 5") &&
                                        Contains("found -1e-11"));
        CHECK_THAT(reading(-1e-44), Contains("energy node 5") && Contains("found -")); // 0 once scaled
        CHECK_THAT(reading(std::numeric_limits<double>::quiet_NaN()), Contains("found nan"));
        CHECK_THAT(reading(std::numeric_limits<double>::infinity()), Contains("found inf"));
        CHECK(reading(-0.0) == "accepted");
        CHECK(reading(0.0) == "accepted");
    }
}

TEST_CASE("a file without the species is refused", "[spectra][file][bad-input]") {
    CHECK_THAT(message_of([] { written(sample_file(true), Species::protons); }),
               Contains("halo.fits") && Contains("CR_PROTON") && Contains("protons.source"));
}

TEST_CASE("a file cut short while it is read is refused", "[spectra][file][bad-input]") {
    const string path = folder().file("halo.fits");
    auto sample = sample_file(false);
    sample.remove("GAS_HI");
    sample.remove("B_VECTOR");
    sample.write(path);
    const auto source = file_source(grid::open_grid_file(path), Species::electrons);
    std::filesystem::resize_file(path, std::filesystem::file_size(path) - 2880);
    CHECK_THAT(message_of([&] { read_all(source); }), Contains("CR_ELECTRON") && Contains("cut short"));
}

TEST_CASE("several threads read one source alike", "[spectra][file]") {
    const auto source = written(sample_file(false));
    std::vector<std::vector<float>> parts(4, std::vector<float>(15 * 9));
    std::vector<std::thread> threads;
    for (std::size_t t = 0; t < 4; ++t) {
        threads.emplace_back([&, t] { source.open()(15 * t, 15, parts[t].data(), 9); });
    }
    for (auto& thread : threads) {
        thread.join();
    }
    std::vector<float> all;
    for (const auto& part : parts) {
        all.insert(all.end(), part.begin(), part.end());
    }
    check_sample(all, 1, float_twice);
    CHECK_NOTHROW(source.finish());
}

TEST_CASE("the scenario says where spectra come from", "[spectra][scenario]") {
    const string path = folder().file("sources.fits");
    auto sample = sample_file(true);
    sample.add(sample_data("CR_ENERGY_PROTON", {3, 5}, "eV cm-3", "R,Z", [](std::size_t) { return 1; }));
    sample.write(path);
    const auto file = grid::open_grid_file(path);
    const auto names = [&](const string& toml, const grid::GridFile* from) {
        std::vector<string> found;
        const auto scenario = scenario::parse("input.grid = '" + path + "'\n" + toml, "test.toml", {});
        for (const auto& source : open_sources(scenario, file.grid, from, RunContext{})) {
            found.push_back(source.name);
        }
        return found;
    };
    using Names = std::vector<string>;
    CHECK(names("", &file) == Names{"CR_ELECTRON"}); // and no protons, since the file has none
    CHECK(names("", nullptr) == Names{"electrons", "protons"});
    CHECK(names("electrons.source = 'none'", nullptr) == Names{"protons"});
    CHECK(names("electrons.source = 'none'\nprotons.source = 'energy_density'", &file) == Names{"protons"});
    sample.add(sample_data("CR_ENERGY_LEPTON", {3, 5}, "eV cm-3", "R,Z", [](std::size_t) { return 1; }));
    sample.write(folder().file("leptons.fits"));
    const auto leptons = grid::open_grid_file(folder().file("leptons.fits"));
    CHECK(names("electrons.source = 'energy_density'", &leptons) == Names{"electrons"});
    CHECK_THROWS_WITH(names("electrons.source = 'energy_density'", &file), Contains("CR_ENERGY_ELECTRON"));
    CHECK_THROWS_WITH(names("electrons.source = 'file'", nullptr), Contains("electrons.source"));
    CHECK_THROWS_WITH(names("protons.source = 'file'", &file), Contains("CR_PROTON"));
}
