#include "read_table.hpp"
#include "sample_galaxy.hpp"

#include "aureole/physics/inverse_compton.hpp"
#include "aureole/physics/radiation.hpp"
#include "aureole/physics/synchrotron.hpp"

#include <catch2/catch.hpp>

using namespace aureole;
using emission::Band;
using emission::Channel;

namespace {

constexpr double rest = constants::electron_rest_energy;

/// Electrons N = K gamma^-s over a wide range of energies.
spectra::Source power_law_electrons(double k, double s, std::size_t per_decade, std::size_t cells = 1) {
    return sample::source(spectra::Species::electrons, sample::log_nodes(9 * rest, 1e9 * rest, per_decade),
                          cells,
                          [k, s](double t, std::size_t) { return k * std::pow(1 + t / rest, -s) / rest; });
}

media::Media with_field(std::array<float, 3> ordered, float random_rms, std::size_t cells = 1) {
    media::Media media;
    media.field.ordered.assign(cells, ordered);
    media.field.random_rms.assign(cells, random_rms);
    return media;
}

emission::Processes only_synchrotron() {
    emission::Processes p;
    p.inverse_compton = p.bremsstrahlung = p.pion_decay = false;
    return p;
}

const RunContext one_thread;

} // namespace

TEST_CASE("synchrotron emission of a power law in a mixed field matches the closed form", "[emission]") {
    // Closed form: Gamma functions and confluent hypergeometric functions, averaged over the Rice
    // distribution of the projected field (physics::power_law_emissivity_mixed; Burn 1966 and Sokoloff et al.
    // 1998 for s = 3).
    const std::vector<Channel> channels{
        {Band::radio, 1.5e8, 1.5e8}, {Band::radio, 1.4e9, 1.4e9}, {Band::radio, 1e10, 1e10}};
    auto processes = only_synchrotron();
    processes.polarisation = true;
    for (const double s : {2.0, 2.5, 3.0, 3.5}) {
        for (const auto& [b0, rms] :
             {std::pair{5e-6F, 0.0F}, {0.0F, 6e-6F}, {3e-6F, 4e-6F}, {6e-6F, 1e-6F}, {1e-6F, 7e-6F}}) {
            // The default view looks along +y; a field along x lies in the sky plane.
            const auto media = with_field({b0, 2e-6F, 0}, rms);
            const auto emitted = emission::emit(sample::box(), media, {power_law_electrons(1e-5, s, 16)},
                                                channels, processes, {}, one_thread);
            for (std::size_t c = 0; c < channels.size(); ++c) {
                INFO("s = " << s << ", b0 = " << b0 << ", rms = " << rms << ", channel " << c);
                const auto exact = physics::power_law_emissivity_mixed(
                    1e-5, s, static_cast<double>(b0), static_cast<double>(rms) / std::sqrt(3.0),
                    channels[c].from);
                CHECK(sample::value(emitted, 0, c) == Approx(exact.total).epsilon(3e-4));
                const double q = sample::value(emitted, 0, 3 + c);
                const double u = sample::value(emitted, 0, 6 + c);
                CHECK(std::hypot(q, u) == Approx(exact.polarised).epsilon(5e-4).margin(1e-4 * exact.total));
                if (b0 > 0) {
                    // The field lies along the major axis, position angle 0: the E-vector points East, Q < 0.
                    CHECK(q < 0);
                    CHECK(std::abs(u) < 1e-6 * std::abs(q));
                }
            }
        }
    }
}

TEST_CASE("inverse Compton emission on a black body matches direct quadrature", "[emission]") {
    // tests/data/ic_blackbody.csv: composite Gauss-Legendre in ln gamma and ln eps, split at the threshold,
    // of the kernel of Jones 1968.
    auto processes = only_synchrotron();
    processes.synchrotron = false;
    processes.inverse_compton = true;
    for (const auto& row : read_table("ic_blackbody.csv")) {
        const double s = number(row, "s");
        const double temperature = number(row, "T_K");
        const double photon = number(row, "E_gamma_eV") * constants::electronvolt;
        const double from = (number(row, "gamma_min") - 1) * rest;
        const double to = (number(row, "gamma_max") - 1) * rest;
        const auto electrons =
            sample::source(spectra::Species::electrons, sample::log_nodes(from, to, 16), 1,
                           [s](double t, std::size_t) { return std::pow(1 + t / rest, -s) / rest; });
        media::Media media;
        media.radiation.push_back(
            {"field", temperature, physics::blackbody_energy_density(temperature), {}, {}, {}});
        const auto emitted = emission::emit(sample::box(), media, {electrons},
                                            {{Band::gamma, photon, photon}}, processes, {}, one_thread);
        INFO("s = " << s << ", T = " << temperature << ", E = " << number(row, "E_gamma_eV") << " eV");
        CHECK(sample::value(emitted, 0, 0) * constants::electronvolt ==
              Approx(number(row, "j")).epsilon(4e-4));
    }
}

TEST_CASE("emissivity is linear in the spectra and never negative", "[emission][property]") {
    const std::vector<Channel> channels{
        {Band::radio, 1e9, 1e9}, {Band::gamma, 1e9 * constants::electronvolt, 1e9 * constants::electronvolt}};
    media::Media media = with_field({3e-6F, 0, 1e-6F}, 4e-6F);
    media.radiation.push_back({"cmb", 2.7255, 4.1748e-13, {}, {}, {}});
    media.gas.hi.assign(1, 1.0F);
    media.gas.hii.assign(1, 0.1F);
    const auto with = [&](double a, double b) {
        const auto density = [a, b](double t, std::size_t) {
            return a * std::pow(t, -2.3) + b * std::pow(t, -2.9) * std::exp(-t / 1e-2);
        };
        const std::vector<spectra::Source> both{
            sample::source(spectra::Species::electrons, sample::log_nodes(1e-4, 1e2, 12), 1, density),
            sample::source(spectra::Species::protons, sample::log_nodes(1e-4, 1e2, 12), 1, density)};
        return emission::emit(sample::box(), media, both, channels, {}, {}, one_thread);
    };
    const auto first = with(1e-20, 0);
    const auto second = with(0, 1e-20);
    const auto sum = with(2e-20, 3e-20);
    for (std::size_t p = 0; p < channels.size(); ++p) {
        CHECK(sample::value(first, 0, p) > 0);
        CHECK(sample::value(sum, 0, p) ==
              Approx(2 * sample::value(first, 0, p) + 3 * sample::value(second, 0, p)).epsilon(3e-6));
    }
}

TEST_CASE("a sharp cut or single occupied node gives finite emissivity that is not negative",
          "[emission][property]") {
    const std::vector<Channel> channels{{Band::radio, 1e8, 1e8},
                                        {Band::radio, 1e10, 1e10},
                                        {Band::gamma, 1e-4, 1e-4},
                                        {Band::gamma, 1e-6, 1e-6}};
    media::Media media = with_field({3e-6F, 0, 1e-6F}, 4e-6F);
    media.radiation.push_back({"cmb", 2.7255, 4.1748e-13, {}, {}, {}});
    media.gas.hi.assign(1, 1.0F);
    const auto nodes = sample::log_nodes(1e-4, 1e2, 8);
    for (std::size_t only = 0; only < nodes.size(); only += 3) {
        const auto density = [&, only](double t, std::size_t) { return t == nodes[only] ? 1e-15 : 0.0; };
        const std::vector<spectra::Source> both{
            sample::source(spectra::Species::electrons, nodes, 1, density),
            sample::source(spectra::Species::protons, nodes, 1, density)};
        const auto emitted = emission::emit(sample::box(), media, both, channels, {}, {}, one_thread);
        CHECK(emitted.report.cells_with_fallback > 0);
        for (std::size_t p = 0; p < channels.size(); ++p) {
            CHECK(std::isfinite(sample::value(emitted, 0, p)));
            CHECK(sample::value(emitted, 0, p) >= 0);
        }
    }
}

TEST_CASE("nothing emits where there is no field, gas, radiation or spectrum", "[emission]") {
    const std::vector<Channel> channels{{Band::radio, 1e9, 1e9}, {Band::gamma, 1e-3, 1e-3}};
    media::Media media = with_field({0, 0, 0}, 0);
    media.gas.hi.assign(1, 0.0F);
    const auto emitted = emission::emit(sample::box(), media, {power_law_electrons(1e-5, 2.5, 8)}, channels,
                                        {}, {}, one_thread);
    for (std::size_t p = 0; p < channels.size(); ++p) {
        CHECK(sample::value(emitted, 0, p) == 0);
    }
    media = with_field({1e-6F, 0, 0}, 1e-6F);
    const auto empty =
        emission::emit(sample::box(), media, {power_law_electrons(0, 2.5, 8)}, channels, {}, {}, one_thread);
    CHECK(sample::value(empty, 0, 0) == 0);
}

TEST_CASE("two threads give the bits of one, and the processor's kernels agree with the portable ones",
          "[emission]") {
    const std::vector<Channel> channels{
        {Band::radio, 1e9, 1e9}, {Band::radio, 5e9, 5e9}, {Band::gamma, 1e-3, 1e-3}};
    const std::size_t cells = 1000;
    media::Media media = with_field({3e-6F, 0, 1e-6F}, 4e-6F, cells);
    media.radiation.push_back({"cmb", 2.7255, 4.1748e-13, {}, {}, {}});
    for (std::size_t c = 0; c < cells; ++c) {
        media.field.random_rms[c] *= 1 + 0.001F * static_cast<float>(c);
    }
    const auto run = [&](int threads, bool portable) {
        RunContext context;
        context.threads = threads;
        context.reproducible = portable;
        return emission::emit(sample::box(10, 10, 10), media, {power_law_electrons(1e-5, 2.6, 12, cells)},
                              channels, {}, {}, context)
            .emissivity.value;
    };
    const auto one = run(1, false);
    CHECK(one == run(2, false));
    const auto portable = run(2, true);
    for (std::size_t i = 0; i < one.size(); ++i) {
        REQUIRE(portable[i] == Approx(one[i]).epsilon(3e-6));
    }
}
