#include "aureole/base/constants.hpp"
#include "aureole/base/error.hpp"
#include "aureole/transport/law.hpp"

#include <catch2/catch.hpp>

#include <cmath>
#include <random>
#include <thread>

// Values not derived in a comment: the formulas of the catalogue in mpmath with 30 digits, CODATA 2018.

using namespace aureole;
using namespace aureole::transport;
using Catch::Matchers::Contains;

namespace {

constexpr double gigavolt = 1e9 / 299.792458; // statvolt
constexpr double kpc = constants::kiloparsec;
constexpr double pc = constants::parsec;
constexpr double rounding = 1e-13;

/// 3 uG, of which 2 ordered; warm ionised gas of 0.03 cm-3 without helium.
Place warm_place() {
    Place place;
    place.radius = 8 * kpc;
    place.field = 3e-6;
    place.ordered_field = 2e-6;
    place.ion_density = 0.03;
    place.neutral_density = 0.1;
    place.temperature = 8000;
    place.alfven_speed = alfven_speed(3e-6, 0.03, 0);
    place.turbulent_speed = 1e6;
    place.turbulent_scale = 50 * pc;
    return place;
}

Particle light(double rigidity_gv) {
    return reference_particle(rigidity_gv * gigavolt);
}

Particle proton(double rigidity_gv) {
    return particle_of_momentum(rigidity_gv * gigavolt * constants::elementary_charge /
                                    constants::speed_of_light,
                                constants::proton_rest_energy);
}

LawSpec spec(std::string name, std::map<std::string, double, std::less<>> numbers = {}) {
    return {.name = std::move(name), .numbers = std::move(numbers), .lists = {}, .texts = {}, .children = {}};
}

LawSpec formula(std::string expression, std::string gives = "rate") {
    LawSpec law = spec("formula");
    law.texts = {{"expression", std::move(expression)}, {"gives", std::move(gives)}};
    return law;
}

LawSpec combined(std::string name, std::vector<LawSpec> children) {
    LawSpec law = spec(std::move(name));
    law.children = std::move(children);
    return law;
}

double rate(const LawSpec& law, const Particle& particle, const Place& place = warm_place()) {
    return rate_at(checked_law(law), place, particle);
}

/// -d ln nu/d ln R between two rigidities a part in 1000 away.
double slope_of(const LawSpec& law, double rigidity_gv) {
    return -std::log(rate(law, light(rigidity_gv * 1.001)) / rate(law, light(rigidity_gv / 1.001))) /
           (2 * std::log(1.001));
}

std::string message(const std::function<void()>& action) {
    try {
        action();
    } catch (const Error& error) {
        return error.what();
    }
    return "";
}

std::vector<Place> many_places(std::size_t count) {
    std::mt19937 random(11);
    std::uniform_real_distribution<double> uniform(0, 1);
    std::vector<Place> places;
    for (std::size_t i = 0; i < count; ++i) {
        Place place = warm_place();
        place.radius = 30 * kpc * uniform(random);
        place.height = 20 * kpc * (uniform(random) - 0.5);
        place.field = 1e-7 * std::pow(100, uniform(random));
        place.ordered_field = *place.field * uniform(random);
        place.ion_density = 1e-4 * std::pow(1000, uniform(random));
        place.alfven_speed = alfven_speed(*place.field, *place.ion_density, 0.1);
        places.push_back(place);
    }
    return places;
}

} // namespace

TEST_CASE("a rate of 1e-9 per second is a mean free path of 9.716 pc", "[transport][law]") {
    const double nu = rate(spec("constant"), light(1));
    CHECK(nu == Approx(1e-9).epsilon(rounding));
    const double c = light(1).speed;
    CHECK(c * c / (3 * nu) == Approx(2.99585059579e29).epsilon(1e-11));
    CHECK(c / nu / pc == Approx(9.71561189018).epsilon(1e-11));
}

TEST_CASE("slab turbulence of 3 uG and 50 pc scatters 50 to 900 times as fast as home", "[transport][law]") {
    const LawSpec kolmogorov = spec("slab_turbulence", {{"relative_field", 1}, {"outer_scale", 50 * pc}});
    CHECK(rate(kolmogorov, light(1)) == Approx(5.26727845637e-8).epsilon(1e-11));
    const LawSpec kraichnan =
        spec("slab_turbulence", {{"slope", 1.5}, {"relative_field", 1}, {"outer_scale", 50 * pc}});
    CHECK(rate(kraichnan, light(1)) == Approx(8.98858423457e-7).epsilon(1e-11));
    // (dB/B)^2 = 1 - (2/3)^2 and the outer scale from the media.
    CHECK(rate(spec("slab_turbulence", {{"slope", 1.7}}), light(1)) ==
          Approx(1.64472889321e-8).epsilon(1e-11));
}

TEST_CASE("slab turbulence has delta = 2 - q and goes with the speed of the particle", "[transport][law]") {
    for (const double q : {1.2, 5.0 / 3, 2.4}) {
        CHECK(slope_of(spec("slab_turbulence", {{"slope", q}}), 10) == Approx(2 - q).margin(1e-10));
    }
    const LawSpec law = spec("slab_turbulence");
    // beta of a proton of 1 GV: 0.729256202844
    CHECK(rate(law, proton(1)) / rate(law, light(1)) == Approx(0.729256202844).epsilon(1e-11));
}

TEST_CASE("anisotropic Alfvenic turbulence hardly scatters and hardly knows the rigidity",
          "[transport][law]") {
    const LawSpec law = spec("anisotropic_alfvenic");
    CHECK(rate(law, light(1)) == Approx(1.95070103181e-10).epsilon(1e-11));
    CHECK(std::abs(slope_of(law, 1)) < 0.06);
    CHECK(std::abs(slope_of(law, 1)) > 0.01);
    // Where r_g exceeds l_A / e the logarithm is 1: nu = v^2/(3 0.14 c l_A).
    const LawSpec small = spec("anisotropic_alfvenic", {{"alfven_scale", 1e-8 * pc}});
    CHECK(rate(small, light(1)) ==
          Approx(constants::speed_of_light / (3 * 0.14 * 1e-8 * pc)).epsilon(rounding));
}

TEST_CASE("damped fast modes scatter as slab turbulence above the cut and not below", "[transport][law]") {
    const LawSpec law = spec("fast_modes", {{"relative_field", 1}, {"damping_scale", 1e-7 * pc}});
    CHECK(rate(law, light(1)) == Approx(6.81030219122e-7).epsilon(1e-11));
    const LawSpec undamped = spec("fast_modes", {{"relative_field", 1}, {"damping_scale", 0}});
    const LawSpec slab = spec("slab_turbulence", {{"relative_field", 1}, {"slope", 1.5}});
    CHECK(rate(undamped, light(1)) == Approx(rate(slab, light(1))).epsilon(rounding));
    CHECK(rate(law, light(1e6)) == Approx(rate(slab, light(1e6))).epsilon(1e-6));
    const LawSpec sharp =
        spec("fast_modes", {{"relative_field", 1}, {"damping_scale", 1e-6 * pc}, {"sharpness", 100}});
    CHECK(rate(sharp, light(1)) == 0);
    CHECK(rate(sharp, light(4)) == Approx(rate(slab, light(4))).epsilon(rounding));
}

TEST_CASE("rare scatterers act down to the gyroradius, as their integral over sizes says",
          "[transport][law]") {
    LawSpec law = spec("patchy", {{"slope", 0.5}, {"filling", 0.01}, {"size", pc}});
    CHECK(rate(law, light(1)) == Approx(3.23702761821e-7).epsilon(1e-11));
    CHECK(slope_of(law, 1) == Approx(0.5).margin(1e-10));
    law.numbers["greatest_size"] = 1e-3 * pc;
    CHECK(rate(law, light(1)) == Approx(3.17558069334e-7).epsilon(1e-11));
    CHECK(rate(law, light(3000)) == 0); // r_g = 1.08e-3 pc
    law.numbers["least_size"] = 1e-4 * pc;
    CHECK(rate(law, light(1)) == Approx(rate(law, light(100))).epsilon(rounding));
    CHECK(rate(law, light(600)) < rate(law, light(200)));
}

TEST_CASE("smooth breaks divide out at the reference rigidity", "[transport][law]") {
    LawSpec law = spec("rigidity_power", {{"slope", -0.2}});
    law.lists = {{"break_rigidity", {4 * gigavolt, 300 * gigavolt}},
                 {"break_slope", {0.6, 0.4}},
                 {"break_width", {0.1, 0.2}}};
    CHECK(rate(law, light(1)) == Approx(1e-9).epsilon(rounding));
    CHECK(rate(law, light(4)) == Approx(1.24833064416e-9).epsilon(1e-11));
    CHECK(rate(law, light(30)) == Approx(0.393890446093e-9).epsilon(1e-11));
    CHECK(rate(law, light(300)) == Approx(0.101722370719e-9).epsilon(1e-11));
    CHECK(rate(law, light(1000)) == Approx(0.0611316245941e-9).epsilon(1e-11));
    CHECK(slope_of(law, 0.1) == Approx(-0.2).margin(1e-10));
    CHECK(slope_of(law, 35) == Approx(0.6).margin(1e-4));
    CHECK(slope_of(law, 1e5) == Approx(0.4).margin(1e-10));
    law.numbers["reference_rigidity"] = 30 * gigavolt;
    CHECK(rate(law, light(30)) == Approx(1e-9).epsilon(rounding));
    law.numbers["beta_power"] = 2;
    CHECK(rate(law, proton(1)) / rate(law, light(1)) ==
          Approx(0.729256202844 * 0.729256202844).epsilon(1e-11));
    law.lists["break_width"] = {1e-3, 1e-3};
    CHECK(std::isfinite(rate(law, light(1e8))));
}

TEST_CASE("a falling law knows heights, radii, spheres and ellipsoids", "[transport][law]") {
    Place place = warm_place();
    place.radius = 3 * kpc;
    place.height = -4 * kpc;
    LawSpec law = spec("falling", {{"rate", 1}, {"length", 3 * kpc}});
    const auto value = [&](const char* along, const char* form) {
        law.texts = {{"along", along}, {"form", form}};
        return rate(law, light(1), place);
    };
    CHECK(value("height", "exponential") == Approx(std::exp(-4.0 / 3)).epsilon(rounding));
    CHECK(value("radius", "exponential") == Approx(std::exp(-1.0)).epsilon(rounding));
    CHECK(value("spherical", "exponential") == Approx(std::exp(-5.0 / 3)).epsilon(rounding));
    CHECK(value("spherical", "stretched") == Approx(0.274997176474).epsilon(1e-11));
    law.numbers["axis_ratio"] = 2;
    CHECK(value("ellipsoidal", "power") == Approx(0.206264445309).epsilon(1e-11));
    CHECK(value("spherical", "power") == Approx(std::pow(1 + 5.0 / 3, -2)).epsilon(rounding));
}

TEST_CASE("plasma powers and dust follow the media", "[transport][law]") {
    Place place = warm_place();
    place.ion_density = 0.01;
    place.turbulent_speed = 2e6;
    place.turbulent_scale = 100 * pc;
    place.temperature = 1e6;
    const LawSpec law = spec("plasma_power", {{"rate", 1},
                                              {"field_power", 2},
                                              {"density_power", -0.5},
                                              {"speed_power", 3},
                                              {"scale_power", -1},
                                              {"temperature_power", 0.25}});
    CHECK(rate(law, light(7), place) == Approx(7.88720482807).epsilon(1e-11));
    const LawSpec dust = spec("dust", {{"rate", 1}, {"field_power", 0.5}, {"slope", 0.3}});
    CHECK(rate(dust, light(10)) == Approx(0.0504683350384).epsilon(1e-11));
    place.temperature.reset();
    CHECK_THAT(message([&] { (void)rate(law, light(1), place); }),
               Contains("plasma_power") && Contains("temperature") && Contains("gas.temperature"));
    CHECK(rate(spec("plasma_power", {{"field_power", 2}}), light(1), place) > 0);
}

TEST_CASE("a power of rigidity times a fall with height is one law", "[transport][law]") {
    LawSpec law = spec("rigidity_power", {{"slope", 0.6}});
    law.children = {spec("falling", {{"length", 5 * kpc}}), formula("1 + R/8", "factor")};
    Place place = warm_place();
    place.height = 2 * kpc;
    CHECK(rate(law, light(10), place) ==
          Approx(1e-9 * std::pow(10, -0.6) * std::exp(-0.4) * 2).epsilon(rounding));
    LawSpec slab = spec("slab_turbulence");
    const double before = rate(slab, light(1), place);
    slab.children = {spec("falling", {{"length", 5 * kpc}})};
    CHECK(rate(slab, light(1), place) == Approx(before * std::exp(-0.4)).epsilon(rounding));
}

TEST_CASE("laws add, or the greatest of them counts", "[transport][law]") {
    const std::vector<LawSpec> laws{spec("constant", {{"rate", 3e-9}}),
                                    spec("rigidity_power", {{"rate", 5e-9}}),
                                    combined("sum", {spec("constant"), spec("slab_turbulence")})};
    for (const double rigidity : {0.1, 1.0, 1e4}) {
        double sum = 0;
        double greatest = 0;
        for (const LawSpec& law : laws) {
            sum += rate(law, proton(rigidity));
            greatest = std::max(greatest, rate(law, proton(rigidity)));
        }
        CHECK(rate(combined("sum", laws), proton(rigidity)) == Approx(sum).epsilon(rounding));
        CHECK(rate(combined("maximum", laws), proton(rigidity)) == Approx(greatest).epsilon(rounding));
    }
}

TEST_CASE("a formula of a closed law gives that law in every place", "[transport][law]") {
    const auto places = many_places(700);
    const Particle particle = proton(2);
    const std::vector<std::pair<LawSpec, LawSpec>> pairs{
        {spec("rigidity_power", {{"slope", 0.6}}), formula("1e-9*beta*rigidity^-0.6")},
        {spec("slab_turbulence"), formula("_pi/4*Omega*2/3*(1-(B_ordered/B)^2)*(r_g/L_t)^(2/3)")},
        {spec("anisotropic_alfvenic", {{"alfven_scale", 0.1 * kpc}}),
         formula("0.14*2.99792458e10*0.1*3.0856775814913673e21/log(0.1/r_g)/beta^0", "parallel_diffusion")},
        {spec("falling", {{"length", 2 * kpc}}), formula("1e-9*exp(-abs(z)/2)")},
        {spec("plasma_power", {{"field_power", 1}, {"density_power", -0.5}}),
         formula("1e-9*(B/5)*(n_i/0.03)^-0.5")},
    };
    for (const auto& [closed, text] : pairs) {
        INFO(closed.name);
        std::vector<double> a(places.size());
        std::vector<double> b(places.size());
        rates(prepare(checked_law(closed), places), particle, {}, a);
        rates(prepare(checked_law(text), places), particle, {}, b);
        double worst = 0;
        for (std::size_t i = 0; i < places.size(); ++i) {
            worst = std::max(worst, std::abs(b[i] / a[i] - 1));
        }
        CHECK(worst < 1e-12);
    }
}

TEST_CASE("a formula gives a rate, a diffusion read one way or the other, or a mean free path",
          "[transport][law]") {
    const Particle particle = proton(1);
    const double v = particle.speed;
    CHECK(rate(formula("1e29", "parallel_diffusion"), particle) == Approx(v * v / 3e29).epsilon(rounding));
    CHECK(rate(formula("1e29", "isotropic_diffusion"), particle) == Approx(v * v / 3e29).epsilon(rounding));
    CHECK(rate(formula("1e29", "isotropic_third"), particle) == Approx(v * v / 9e29).epsilon(rounding));
    CHECK(rate(formula("0.01", "mean_free_path"), particle) == Approx(v / (10 * pc)).epsilon(rounding));
    CHECK(rate(formula("Omega*r_g"), particle) == Approx(v / kpc).epsilon(rounding));
    CHECK(rate(formula("1e-9*v_A/u_t*T/8000*n_n/0.1*L_t/0.05"), particle) ==
          Approx(1e-9 * 3.77795519337).epsilon(1e-11));
    // Proton of 1 GV in 3 uG: 0.0269626553621 x 0.729256202844 rad/s, 3.60335870473e-7 pc.
    CHECK(rate(formula("Omega"), particle) == Approx(0.0269626553621 * 0.729256202844).epsilon(1e-11));
    CHECK(rate(formula("r_g"), particle) == Approx(3.60335870473e-10).epsilon(1e-11));
}

TEST_CASE("a table gives its nodes back and is exact for powers between them", "[transport][law]") {
    std::vector<double> radius;
    std::vector<double> height;
    std::vector<double> rigidity;
    std::vector<double> values;
    const auto exact = [](double r, double z, double p) {
        return 1e-9 * std::exp(-r / (10 * kpc) - std::abs(z) / (3 * kpc)) * std::pow(p / gigavolt, -0.5);
    };
    for (const double p : {100.0, 0.1, 1.0}) {
        for (const double z : {0.0, 1.0, 4.0}) {
            for (const double r : {0.0, 20.0}) {
                radius.push_back(r * kpc);
                height.push_back(z * kpc);
                rigidity.push_back(p * gigavolt);
                values.push_back(exact(r * kpc, z * kpc, p * gigavolt));
            }
        }
    }
    const Law law = checked_law(table_law(radius, height, rigidity, values));
    const auto at = [&](double r, double z, double p) {
        Place place;
        place.radius = r * kpc;
        place.height = z * kpc;
        return rate_at(law, place, light(p));
    };
    for (std::size_t i = 0; i < values.size(); ++i) {
        CHECK(at(radius[i] / kpc, height[i] / kpc, rigidity[i] / gigavolt) ==
              Approx(values[i]).epsilon(1e-12));
    }
    CHECK(at(7, -2.5, 5) == Approx(exact(7 * kpc, 2.5 * kpc, 5 * gigavolt)).epsilon(1e-12));
    CHECK(at(50, 9, 1e4) == Approx(exact(20 * kpc, 4 * kpc, 100 * gigavolt)).epsilon(1e-12));
    values.pop_back();
    CHECK_THAT(message([&] { (void)table_law(radius, height, rigidity, values); }), Contains("17"));
    radius.pop_back();
    height.pop_back();
    rigidity.pop_back();
    CHECK_THAT(message([&] { (void)table_law(radius, height, rigidity, values); }), Contains("18 = 2 radii"));
}

TEST_CASE("no law scatters faster than the Bohm limit, and it is counted", "[transport][law]") {
    const auto places = many_places(600);
    const auto law = prepare(checked_law(spec("constant", {{"rate", 3e-3}})), places);
    std::vector<double> out(places.size());
    const Particle particle = proton(1);
    const RateCounts counts = rates(law, particle, {}, out);
    std::size_t expected = 0;
    for (std::size_t i = 0; i < places.size(); ++i) {
        const double omega = particle.speed * *places[i].field / particle.rigidity;
        expected += omega < 3e-3 ? 1U : 0U;
        CHECK(out[i] == Approx(std::min(omega, 3e-3)).epsilon(rounding));
    }
    CHECK(counts.at_bohm == expected);
    CHECK(expected > 100);
    CHECK(expected < 500);
    CHECK(counts.rates == 600);
    CHECK(rates(law, particle, {}, out, {.least = 0, .bohm = false}).at_bohm == 0);
    CHECK(out[0] == Approx(3e-3).epsilon(rounding));
}

TEST_CASE("a rate of zero is raised to the least, and refused without one", "[transport][law]") {
    Place far = warm_place();
    far.height = 3000 * kpc;
    const auto law = prepare(checked_law(spec("falling", {{"length", kpc}})), std::span(&far, 1));
    double out = 0;
    CHECK(rates(law, light(1), {}, std::span(&out, 1)).at_least == 1);
    CHECK(out == 1e-25);
    CHECK_THAT(message([&] { rates(law, light(1), {}, std::span(&out, 1), {.least = 0}); }),
               Contains("falling") && Contains("z = 3000 kpc") && Contains("above 0"));
    const auto negative = prepare(checked_law(formula("1e-9*(5 - abs(z))")), std::span(&far, 1));
    CHECK_THAT(message([&] { rates(negative, light(1), {}, std::span(&out, 1)); }),
               Contains("formula") && Contains("-2.995e-06") && Contains("R = 8 kpc") &&
                   Contains("rigidity 1 GV"));
    const auto infinite = prepare(checked_law(formula("1/(R - 8)")), std::span(&far, 1));
    CHECK_THAT(message([&] { rates(infinite, light(1), {}, std::span(&out, 1)); }), Contains("inf"));
    const auto no_diffusion = prepare(checked_law(formula("0", "parallel_diffusion")), std::span(&far, 1));
    CHECK_THAT(message([&] { rates(no_diffusion, light(1), {}, std::span(&out, 1)); }), Contains("above 0"));
}

TEST_CASE("places without a field are neither scattered by waves nor held to the Bohm limit",
          "[transport][law]") {
    Place empty = warm_place();
    empty.field = 0;
    empty.ordered_field = 0;
    empty.alfven_speed = 0;
    for (const char* name : {"slab_turbulence", "anisotropic_alfvenic", "patchy"}) {
        INFO(name);
        CHECK(rate(spec(name), light(1), empty) == 0);
    }
    CHECK(rate(spec("slab_turbulence", {{"slope", 2.5}}), light(1), empty) == 0);
    CHECK(rate(spec("fast_modes", {{"damping_scale", 1e-7 * pc}}), light(1), empty) == 0);
    const auto law = prepare(checked_law(spec("constant")), std::span(&empty, 1));
    double out = 0;
    CHECK(rates(law, light(1), {}, std::span(&out, 1)).at_bohm == 0);
    CHECK(out == Approx(1e-9).epsilon(rounding));
}

TEST_CASE("an anchored law has the rate asked for and says how far it was from it", "[transport][law]") {
    const Law law = checked_law(spec("slab_turbulence", {{"relative_field", 1}}));
    const Anchored result = anchored(law, warm_place(), light(1), 1e-9);
    CHECK(result.rate == Approx(5.26727845637e-8).epsilon(1e-11));
    CHECK(result.over_empirical == Approx(52.6727845637).epsilon(1e-11));
    CHECK(result.factor == Approx(1 / 52.6727845637).epsilon(1e-11));
    CHECK(rate_at(result.law, warm_place(), light(1)) == Approx(1e-9).epsilon(rounding));
    CHECK(rate_at(result.law, warm_place(), light(8)) == Approx(1e-9 * std::pow(8, -1.0 / 3)).epsilon(1e-12));
    const Anchored again = anchored(result.law, warm_place(), light(1), 2e-9);
    CHECK(again.factor == Approx(2).epsilon(rounding));
    CHECK(rate_at(again.law, warm_place(), light(1)) == Approx(2e-9).epsilon(rounding));
    const Law sum = checked_law(combined("sum", {spec("constant"), spec("slab_turbulence")}));
    CHECK(rate_at(anchored(sum, warm_place(), light(1), 1e-9).law, warm_place(), light(1)) ==
          Approx(1e-9).epsilon(rounding));
    const Law cut = checked_law(spec("fast_modes", {{"damping_scale", pc}, {"sharpness", 10}}));
    CHECK_THAT(message([&] { (void)anchored(cut, warm_place(), light(1), 1e-9); }),
               Contains("anchored is 0"));
    CHECK_THAT(message([&] { (void)anchored(law, warm_place(), light(1), -1e-9); }), Contains("-1e-09"));
}

TEST_CASE("threads that share a prepared formula get the same rates", "[transport][law]") {
    const auto places = many_places(3000);
    const auto law =
        prepare(checked_law(formula("1e-9*beta*rigidity^-0.5*exp(-abs(z)/3)*(B/3)^0.3")), places);
    std::vector<std::vector<double>> expected(8, std::vector<double>(places.size()));
    auto found = expected;
    for (std::size_t k = 0; k < expected.size(); ++k) {
        rates(law, proton(static_cast<double>(k + 1)), {}, expected[k]);
    }
    std::vector<std::thread> threads;
    for (std::size_t t = 0; t < 4; ++t) {
        threads.emplace_back([&, t] {
            for (std::size_t k = t; k < found.size(); k += 4) {
                rates(law, proton(static_cast<double>(k + 1)), {}, found[k]);
            }
        });
    }
    for (std::thread& thread : threads) {
        thread.join();
    }
    CHECK(found == expected);
}

TEST_CASE("a law says which medium it lacks and which key gives it", "[transport][law]") {
    const auto complaint = [](const LawSpec& law, std::optional<double> Place::*medium) {
        Place place = warm_place();
        (place.*medium).reset();
        return message([&] { (void)prepare(checked_law(law), std::span(&place, 1)); });
    };
    CHECK_THAT(complaint(spec("slab_turbulence"), &Place::turbulent_scale),
               Contains("slab_turbulence") && Contains("turbulent scale") && Contains("turbulence.scale") &&
                   Contains("outer_scale"));
    CHECK_THAT(complaint(spec("slab_turbulence"), &Place::ordered_field),
               Contains("field.ordered") && Contains("relative_field"));
    CHECK_THAT(complaint(spec("patchy"), &Place::field), Contains("field.ordered or field.random"));
    CHECK_THAT(complaint(spec("anisotropic_alfvenic"), &Place::alfven_speed),
               Contains("gas.hii and a field"));
    CHECK_THAT(complaint(spec("anisotropic_alfvenic"), &Place::turbulent_speed),
               Contains("turbulence.speed"));
    CHECK_THAT(complaint(spec("self_confinement"), &Place::neutral_density), Contains("gas.hi or gas.h2"));
    CHECK_THAT(complaint(formula("Omega*1e-9"), &Place::field), Contains("field.ordered or field.random"));
    CHECK_THAT(complaint(formula("1e-9*n_i"), &Place::ion_density), Contains("gas.hii"));
    CHECK(complaint(formula("1e-9*R"), &Place::ion_density).empty());
    Place negative = warm_place();
    negative.turbulent_scale = -1;
    CHECK_THAT(message([&] { (void)rate(spec("slab_turbulence"), light(1), negative); }),
               Contains("found -1"));
}
