#include "aureole/base/constants.hpp"
#include "aureole/base/error.hpp"
#include "aureole/transport/law.hpp"
#include "aureole/transport/self_confinement.hpp"

#include <catch2/catch.hpp>

#include <algorithm>
#include <cmath>
#include <random>

// Values: the formulas of the header in mpmath with 30 digits, CODATA 2018; 3 uG, 1 GV, dP/dlnp = 0.1 eV cm-3
// falling over 1 kpc, u = 10 km/s, L = 50 pc, ions without helium.

using namespace aureole;
using namespace aureole::transport;
using Catch::Matchers::Contains;

namespace {

constexpr double gigavolt = 1e9 / 299.792458; // statvolt
constexpr double kpc = constants::kiloparsec;
constexpr double gradient = 0.1 * constants::electronvolt / kpc;

Place place_of(double ions, double neutral, double temperature) {
    Place place;
    place.field = 3e-6;
    place.neutral_density = neutral;
    place.temperature = temperature;
    place.alfven_speed = alfven_speed(3e-6, ions, 0);
    place.turbulent_speed = 1e6;
    place.turbulent_scale = 0.05 * kpc;
    return place;
}

const Place warm = place_of(0.03, 0.1, 8000);
const Place hot = place_of(1e-3, 0, 1e6);

Law confined_by(const std::string& damping, double linear = 0) {
    return checked_law({.name = "self_confinement",
                        .numbers = {{"linear_damping", linear}},
                        .lists = {},
                        .texts = {{"damping", damping}},
                        .children = {}});
}

double rate(const Law& law, const Place& place, double gradient_here = gradient, double rigidity_gv = 1) {
    return rate_at(law, place, reference_particle(rigidity_gv * gigavolt), {}, gradient_here);
}

double growth_of(double energy, const WaveDamping& damping) {
    return energy * (damping.linear + damping.nonlinear_cascade * std::sqrt(energy) +
                     damping.nonlinear_landau * energy);
}

} // namespace

TEST_CASE("the Alfven speed counts the ions alone, and helium where asked", "[transport][confinement]") {
    CHECK(alfven_speed(3e-6, 0.03, 0) == Approx(37.7795519337e5).epsilon(1e-11));
    CHECK(alfven_speed(3e-6, 1e-3, 0) == Approx(206.927128065e5).epsilon(1e-11));
    CHECK(alfven_speed(3e-6, 1e-3, 0.1) == Approx(174.885342703e5).epsilon(1e-11));
}

TEST_CASE("waves of cosmic rays scatter in warm gas as each damping allows", "[transport][confinement]") {
    CHECK(rate(confined_by("ion_neutral"), warm) == Approx(7.54955349924e-9).epsilon(1e-11));
    CHECK(rate(confined_by("turbulent"), warm) == Approx(1.43500247818e-7).epsilon(1e-11));
    CHECK(rate(confined_by("nonlinear_cascade"), warm) == Approx(2.84517206083e-8).epsilon(1e-11));
    CHECK(rate(confined_by("nonlinear_landau"), warm) == Approx(5.17862809942e-7).epsilon(1e-11));
    CHECK(rate(confined_by("ion_neutral, nonlinear_cascade"), warm) ==
          Approx(6.68896282179e-9).epsilon(1e-11));
    CHECK(rate(confined_by("ion_neutral turbulent nonlinear_cascade nonlinear_landau"), warm) ==
          Approx(6.40504520692e-9).epsilon(1e-11));
}

TEST_CASE("waves of cosmic rays scatter in a hot halo as each damping allows", "[transport][confinement]") {
    CHECK(rate(confined_by("turbulent"), hot) == Approx(4.30500743455e-6).epsilon(1e-11));
    CHECK(rate(confined_by("nonlinear_cascade"), hot) == Approx(2.84517206083e-8).epsilon(1e-11));
    CHECK(rate(confined_by("nonlinear_landau"), hot) == Approx(3.6246621596e-7).epsilon(1e-11));
    CHECK(rate(confined_by("turbulent, nonlinear_cascade, nonlinear_landau"), hot) ==
          Approx(2.82120052409e-8).epsilon(1e-11));
}

TEST_CASE("a damping rate of the user acts as any linear one", "[transport][confinement]") {
    const double ion_neutral = ion_neutral_damping(0.1, 8000);
    CHECK(ion_neutral == Approx(7.68272487238e-10).epsilon(1e-11));
    CHECK(rate(confined_by("none", ion_neutral), warm) == Approx(7.54955349924e-9).epsilon(1e-11));
    CHECK(rate(confined_by("ion_neutral", ion_neutral), warm) == Approx(7.54955349924e-9 / 2).epsilon(1e-11));
}

TEST_CASE("turbulent damping knows strong and weak cascades", "[transport][confinement]") {
    const double scale = 0.05 * kpc;
    const double gyroradius = 1e12;
    const double alfven = 4e6;
    const auto energy_rate = [&](double speed) {
        return turbulent_damping(speed, scale, gyroradius, alfven);
    };
    // Lazarian 2016: amplitude rate v_A M_A^2/sqrt(r_g L) for M_A < 1.
    CHECK(energy_rate(0.1 * alfven) ==
          Approx(2 * alfven * 0.01 / std::sqrt(gyroradius * scale)).epsilon(1e-13));
    // Farmer & Goldreich 2004: amplitude rate sqrt(eps/(r_g v_A)), eps = u^3/L.
    CHECK(energy_rate(3 * alfven) ==
          Approx(2 * std::sqrt(27 * std::pow(alfven, 3) / scale / (gyroradius * alfven))).epsilon(1e-13));
    CHECK(energy_rate(alfven * (1 - 1e-9)) == Approx(energy_rate(alfven * (1 + 1e-9))).epsilon(1e-8));
    // A full cascade u^3/L in spite of u < v_A: 7.85619578977e-11 s-1 in the warm gas.
    CHECK(rate(confined_by("none", 7.85619578977e-11), warm) == Approx(7.38285348228e-8).epsilon(1e-11));
}

TEST_CASE("the waves grow as the work of the cosmic rays and the energy of the waves say",
          "[transport][confinement]") {
    // dU_w/dt = v_A |dP/ds|, U_w = 2 F U_B: growth rate of the energy times F.
    const double magnetic_energy = 9e-12 / (8 * constants::pi);
    CHECK(wave_growth(4e6, -gradient, 3e-6) == Approx(4e6 * gradient / (2 * magnetic_energy)).epsilon(1e-14));
    CHECK(wave_growth(37.7795519337e5, gradient, 3e-6) == Approx(2.73894938046e-16).epsilon(1e-11));
}

TEST_CASE("growth and damping of waves balance to 1e-12 whatever they are", "[transport][confinement]") {
    std::mt19937 random(7);
    std::uniform_real_distribution<double> exponent(-30, 10);
    std::uniform_int_distribution<int> present(1, 7);
    double worst = 0;
    for (int trial = 0; trial < 100000; ++trial) {
        const int which = present(random);
        const auto draw = [&](int bit) { return (which & bit) != 0 ? std::pow(10, exponent(random)) : 0.0; };
        const WaveDamping damping{draw(1), draw(2), draw(4)};
        const double growth = std::pow(10, exponent(random));
        const double energy = wave_energy(growth, damping);
        worst = std::max(worst, std::abs(growth_of(energy, damping) / growth - 1));
    }
    CHECK(worst < 1e-12);
    // Comparable terms, where Newton has the farthest to go.
    std::uniform_real_distribution<double> near(-1, 1);
    for (int trial = 0; trial < 100000; ++trial) {
        const WaveDamping damping{std::pow(10, near(random)), std::pow(10, near(random)),
                                  std::pow(10, near(random))};
        const double growth = std::pow(10, near(random));
        worst = std::max(worst, std::abs(growth_of(wave_energy(growth, damping), damping) / growth - 1));
    }
    CHECK(worst < 3e-15);
    CHECK(growth_of(wave_energy(1, {1, 1, 1}), {1, 1, 1}) == Approx(1).epsilon(3e-15)); // the slowest
    CHECK(wave_energy(0, {1, 1, 1}) == 0);
    CHECK(wave_energy(0, {0, 0, 0}) == 0);
    CHECK(wave_energy(1, {1, 1, 0}) == Approx(0.569840290998053).epsilon(1e-14)); // F + F^1.5 = 1
}

TEST_CASE("a law for many places agrees with the balance in each", "[transport][confinement]") {
    std::vector<Place> places;
    std::vector<double> gradients;
    std::mt19937 random(3);
    std::uniform_real_distribution<double> uniform(0, 1);
    for (int i = 0; i < 600; ++i) {
        places.push_back(
            place_of(std::pow(10, -4 * uniform(random)), uniform(random), 1e6 * uniform(random)));
        gradients.push_back(gradient * (2 * uniform(random) - 1));
    }
    const Law law = confined_by("ion_neutral turbulent nonlinear_cascade nonlinear_landau", 1e-11);
    const Particle particle = particle_of_momentum(3e-19, constants::proton_rest_energy);
    std::vector<double> out(places.size());
    const RateCounts counts =
        rates(prepare(law, places), particle, {.pressure = {}, .gradient = gradients}, out);
    CHECK(counts.at_bohm == 0);
    const double gyroradius = particle.rigidity / 3e-6;
    for (std::size_t i = 0; i < places.size(); ++i) {
        const double alfven = *places[i].alfven_speed;
        const double temperature = *places[i].temperature;
        const double linear = 1e-11 + ion_neutral_damping(*places[i].neutral_density, temperature) +
                              turbulent_damping(1e6, 0.05 * kpc, gyroradius, alfven);
        const double energy =
            wave_energy(wave_growth(alfven, gradients[i], 3e-6), {linear, cascade_damping(gyroradius, alfven),
                                                                  landau_damping(gyroradius, temperature)});
        CHECK(out[i] == Approx(constants::pi / 4 * particle.speed / gyroradius * energy).epsilon(1e-12));
    }
}

TEST_CASE("linear damping makes the diffusive flux independent of the gradient", "[transport][confinement]") {
    const Law law = confined_by("ion_neutral, turbulent");
    CHECK(rate(law, warm, 100 * gradient) == Approx(100 * rate(law, warm)).epsilon(1e-12));
    const Law cascade = confined_by("nonlinear_cascade");
    CHECK(rate(cascade, warm, 1000 * gradient) == Approx(100 * rate(cascade, warm)).epsilon(1e-12));
    const Law landau = confined_by("nonlinear_landau");
    CHECK(rate(landau, warm, 100 * gradient) == Approx(10 * rate(landau, warm)).epsilon(1e-12));
}

TEST_CASE("slopes of self-confined scattering are those of the damping", "[transport][confinement]") {
    // dP/dlnp ~ rigidity^-0.7, f ~ p^-4.7
    const auto slope = [](const std::string& damping) {
        const Law law = confined_by(damping);
        return -std::log10(rate(law, warm, gradient * std::pow(10, -0.7), 10) / rate(law, warm));
    };
    CHECK(slope("ion_neutral") == Approx(1.7).margin(1e-10));
    CHECK(slope("turbulent") == Approx(1.2).margin(1e-10));
    CHECK(slope("nonlinear_cascade") == Approx(0.8).margin(1e-10));
    CHECK(slope("nonlinear_landau") == Approx(0.85).margin(1e-10));
}

TEST_CASE("more damping never scatters more, a steeper gradient never less", "[transport][confinement]") {
    double before = 1;
    for (const double linear : {1e-12, 1e-11, 1e-10, 1e-9}) {
        const double now = rate(confined_by("turbulent nonlinear_landau", linear), hot);
        CHECK(now < before);
        before = now;
    }
    before = 0;
    for (const double factor : {1e-6, 1e-3, 1.0, 1e3}) {
        const double now =
            rate(confined_by("ion_neutral turbulent nonlinear_cascade"), warm, factor * gradient);
        CHECK(now > before);
        before = now;
    }
}

TEST_CASE("without gradient no waves, without damping the Bohm limit", "[transport][confinement]") {
    CHECK(rate(confined_by("ion_neutral, nonlinear_cascade"), warm, 0) == 0);
    CHECK(rate(confined_by("ion_neutral"), warm, 0) == 0);
    const auto law = prepare(confined_by("ion_neutral"), std::span(&hot, 1));
    const Particle particle = reference_particle(gigavolt);
    double out = 0;
    const RateCounts counts =
        rates(law, particle, {.pressure = {}, .gradient = std::span(&gradient, 1)}, std::span(&out, 1));
    CHECK(counts.at_bohm == 1);
    CHECK(out == Approx(particle.speed * 3e-6 / gigavolt).epsilon(1e-13));
    Place no_field = warm;
    no_field.field = 0;
    no_field.alfven_speed = 0;
    CHECK(rate(confined_by("ion_neutral turbulent nonlinear_cascade nonlinear_landau"), no_field) == 0);
}

TEST_CASE("laws that need the cosmic rays say so", "[transport][confinement]") {
    CHECK(depends_on_cosmic_rays(confined_by("turbulent")));
    const auto of_formula = [](const char* text) {
        return checked_law(
            {.name = "formula", .numbers = {}, .lists = {}, .texts = {{"expression", text}}, .children = {}});
    };
    CHECK(depends_on_cosmic_rays(of_formula("1e-9*P_res")));
    CHECK(depends_on_cosmic_rays(of_formula("1e-9*(1 + dP_res)")));
    CHECK_FALSE(depends_on_cosmic_rays(of_formula("1e-9*R")));
    const LawSpec confined{
        .name = "self_confinement", .numbers = {}, .lists = {}, .texts = {}, .children = {}};
    const LawSpec constant{.name = "constant", .numbers = {}, .lists = {}, .texts = {}, .children = {}};
    CHECK(depends_on_cosmic_rays(checked_law(
        {.name = "sum", .numbers = {}, .lists = {}, .texts = {}, .children = {constant, confined}})));
    CHECK_FALSE(depends_on_cosmic_rays(checked_law(constant)));
    CHECK(rate_at(of_formula("1e-9*P_res + 1e-10*dP_res"), warm, reference_particle(gigavolt),
                  0.3 * constants::electronvolt, -gradient) == Approx(3.1e-10).epsilon(1e-12));
    try {
        (void)rate_at(confined_by("turbulent"), warm, reference_particle(gigavolt));
        FAIL("accepted");
    } catch (const Error& error) {
        CHECK(error.kind() == ErrorKind::runtime);
        CHECK_THAT(error.what(), Contains("self_confinement") && Contains("expected 1"));
    }
}
