#pragma once

#include "aureole/base/constants.hpp"
#include "aureole/files/fits_writer.hpp"
#include "aureole/grid/grid.hpp"

#include <catch2/catch.hpp>

#include <algorithm>
#include <cmath>
#include <filesystem>
#include <functional>
#include <string>
#include <unistd.h>
#include <vector>

/// A folder of one test, removed with everything in it.
class TestFolder {
  public:
    TestFolder() {
        std::string pattern = (std::filesystem::temp_directory_path() / "aureole_test_XXXXXX").string();
        REQUIRE(mkdtemp(pattern.data()) != nullptr);
        path_ = pattern;
    }
    ~TestFolder() {
        std::error_code ignored;
        std::filesystem::remove_all(path_, ignored);
    }
    TestFolder(const TestFolder&) = delete;
    TestFolder& operator=(const TestFolder&) = delete;
    std::string file(const std::string& name) const { return (path_ / name).string(); }

  private:
    std::filesystem::path path_;
};

/// An HDU of a sample file, to be spoilt at will.
struct SampleHdu {
    std::string name;
    std::vector<std::size_t> shape;
    std::vector<double> values;
    std::vector<aureole::files::Card> cards;
    bool as_double = false;

    void set(const std::string& keyword, std::variant<std::string, double, long, bool> value) {
        remove(keyword);
        cards.push_back({keyword, std::move(value), ""});
    }
    void remove(const std::string& keyword) {
        std::erase_if(cards, [&](const aureole::files::Card& card) { return card.keyword == keyword; });
    }
};

/// A small HALO-GRID file in the making. The first HDU is the primary one.
struct SampleFile {
    std::vector<SampleHdu> hdus;

    SampleHdu& at(const std::string& name) {
        const auto found =
            std::find_if(hdus.begin(), hdus.end(), [&](const SampleHdu& hdu) { return hdu.name == name; });
        REQUIRE(found != hdus.end());
        return *found;
    }
    SampleHdu& primary() { return hdus.front(); }
    void remove(const std::string& name) {
        REQUIRE(std::erase_if(hdus, [&](const SampleHdu& hdu) { return hdu.name == name; }) == 1);
    }
    SampleHdu& add(SampleHdu hdu) {
        hdus.push_back(std::move(hdu));
        return hdus.back();
    }
    void write(const std::string& path) const {
        aureole::files::FitsWriter writer(path, true);
        for (const SampleHdu& hdu : hdus) {
            if (hdu.as_double) {
                writer.image(hdu.name, hdu.shape, hdu.values, {hdu.cards, {}});
            } else {
                const std::vector<float> narrow(hdu.values.begin(), hdu.values.end());
                writer.image(hdu.name, hdu.shape, narrow, {hdu.cards, {}});
            }
        }
        writer.commit();
    }
};

inline SampleHdu sample_axis(const std::string& name, std::vector<double> values, const std::string& unit) {
    SampleHdu hdu{name, {values.size()}, std::move(values), {}, true};
    hdu.set("BUNIT", unit);
    return hdu;
}

/// Shape of the cells of a sample: {nx, ny, nz} = {3, 4, 5}, or {nR, nZ} = {3, 5}.
inline std::vector<std::size_t> sample_shape(bool rings, std::size_t per_cell = 0) {
    std::vector<std::size_t> shape =
        rings ? std::vector<std::size_t>{3, 5} : std::vector<std::size_t>{3, 4, 5};
    if (per_cell > 0) {
        shape.insert(shape.begin(), per_cell);
    }
    return shape;
}

inline std::size_t count_of(const std::vector<std::size_t>& shape) {
    std::size_t count = 1;
    for (const std::size_t n : shape) {
        count *= n;
    }
    return count;
}

/// A data HDU whose v-th value is value(v).
inline SampleHdu sample_data(const std::string& name,
                             const std::vector<std::size_t>& shape,
                             const std::string& unit,
                             const std::string& axes,
                             const std::function<double(std::size_t)>& value) {
    SampleHdu hdu{name, shape, {}, {}, false};
    for (std::size_t v = 0; v < count_of(shape); ++v) {
        hdu.values.push_back(value(v));
    }
    hdu.set("BUNIT", unit);
    hdu.set("AXES", axes);
    return hdu;
}

inline std::vector<double> sample_energies(std::size_t nodes = 9) {
    std::vector<double> energy; // GeV, 4 a decade
    for (std::size_t i = 0; i < nodes; ++i) {
        energy.push_back(0.1 * std::pow(10.0, 0.25 * static_cast<double>(i)));
    }
    return energy;
}

/// A complete file: spectra of electrons, field and gas. Electron density 1e-11 (1 + cell/10) (E/GeV)^-2.7
/// cm-3 GeV-1, gas 0.1 (1 + cell) cm-3, field (1, 2, 3) uG.
inline SampleFile sample_file(bool rings) {
    SampleFile file;
    SampleHdu primary;
    primary.set("FMTNAME", std::string("HALO-GRID"));
    primary.set("FMTVERS", std::string("1.0"));
    primary.set("GEOMETRY", std::string(rings ? "RZ" : "XYZ"));
    primary.set("ZMIRROR", rings);
    primary.set("BPARITY", std::string("EVEN"));
    primary.set("OBJECT", std::string("SAMPLE"));
    file.add(primary);
    if (rings) {
        file.add(sample_axis("R_EDGES", {0, 1, 2.5, 4}, "kpc"));
        file.add(sample_axis("Z_EDGES", {0, 0.5, 1, 2, 3.5, 5}, "kpc"));
    } else {
        file.add(sample_axis("X_EDGES", {-2, 0, 1, 3}, "kpc"));
        file.add(sample_axis("Y_EDGES", {-2, -1, 0, 1, 2}, "kpc"));
        file.add(sample_axis("Z_EDGES", {-3, -1, 0, 1, 2, 4}, "kpc"));
    }
    const std::string space = rings ? "R,Z" : "X,Y,Z";
    const auto energy = sample_energies();
    file.add(sample_axis("E_LEPTON", energy, "GeV"));
    file.add(sample_data("CR_ELECTRON", sample_shape(rings, energy.size()), "cm-3 GeV-1", "E_LEPTON," + space,
                         [&](std::size_t v) {
                             return 1e-11 * (1 + 0.1 * static_cast<double>(v / energy.size())) *
                                    std::pow(energy[v % energy.size()], -2.7);
                         }));
    auto& field = file.add(sample_data("B_VECTOR", sample_shape(rings, 3), "uG", "COMP," + space,
                                       [](std::size_t v) { return static_cast<double>(1 + v % 3); }));
    field.set("COMPS", std::string(rings ? "R,PHI,Z" : "X,Y,Z"));
    file.add(sample_data("GAS_HI", sample_shape(rings), "cm-3", space,
                         [](std::size_t v) { return 0.1 * static_cast<double>(1 + v); }));
    return file;
}
