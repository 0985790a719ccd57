#include "transport/galaxy.hpp"

#include "aureole/base/error.hpp"
#include "aureole/physics/kinematics.hpp"
#include "aureole/physics/losses.hpp"
#include "aureole/transport/axisymmetric_media.hpp"
#include "aureole/transport/loss_rates.hpp"
#include "aureole/transport/secondary_source.hpp"

#include <catch2/catch.hpp>

#include <algorithm>

using namespace aureole;
using namespace aureole::transport;
using Catch::Matchers::Contains;
using galaxy::gev;
using galaxy::kpc;

namespace {

const Particle electron(double kinetic_energy) {
    return particle_of_momentum(physics::momentum_times_c(kinetic_energy, constants::electron_rest_energy) /
                                    constants::speed_of_light,
                                constants::electron_rest_energy);
}

std::size_t index_of(const LossRates& losses, const std::string& name) {
    const auto at = std::find(losses.names.begin(), losses.names.end(), name);
    REQUIRE(at != losses.names.end());
    return static_cast<std::size_t>(at - losses.names.begin());
}

/// Largest relative difference of ring averages of a box from the medium at the rings' centres, 2 to 8 kpc.
double largest_difference(std::size_t n) {
    const auto box = galaxy::box(n, 4, 12 * kpc, 4 * kpc);
    const auto from_box = axisymmetric_media(galaxy::media_on(box), box);
    const auto direct = axisymmetric_media(galaxy::media_on(from_box.grid), from_box.grid);
    double worst = 0;
    for (std::size_t cell = 0; cell < direct.field.size(); ++cell) {
        const double r = from_box.grid.x[cell % from_box.grid.nx()];
        if (r < 2 * kpc || r > 8 * kpc) {
            continue;
        }
        for (const auto part : {&AxisymmetricMedia::field, &AxisymmetricMedia::hi, &AxisymmetricMedia::h2}) {
            worst = std::max(worst, std::abs((from_box.*part)[cell] / (direct.*part)[cell] - 1));
        }
        for (std::size_t part = 0; part < 3; ++part) {
            CHECK(from_box.alignment[cell][part] == Approx(direct.alignment[cell][part]).margin(0.02));
        }
        CHECK(from_box.radiation[1].energy_density[cell] ==
              Approx(direct.radiation[1].energy_density[cell]).epsilon(0.1));
    }
    return worst;
}

} // namespace

TEST_CASE("an axisymmetric medium on a box is the medium on rings", "[transport][media]") {
    const double coarse = largest_difference(12);
    const double fine = largest_difference(24);
    CHECK(fine < 0.03);
    CHECK(fine < 0.5 * coarse);
}

TEST_CASE("media on rings are taken as they are", "[transport][media]") {
    const auto grid = galaxy::rings(8, 6);
    const auto media = galaxy::media_on(grid);
    const auto out = axisymmetric_media(media, grid);
    CHECK(out.grid == grid);
    CHECK(out.of_gas.by_volume == 0);
    for (const std::size_t cell : {0U, 17U, 47U}) {
        CHECK(out.hi[cell] == Approx(static_cast<double>(media.gas.hi[cell])).epsilon(1e-12));
        // ordered: sqrt(0.3^2 + 0.8^2 + 0.2^2) of the random field
        const auto random = static_cast<double>(media.field.random_rms[cell]);
        CHECK(out.field[cell] == Approx(std::sqrt(1.77) * random).epsilon(1e-6));
        CHECK(out.alignment[cell][0] == Approx(0.09 / 0.77).epsilon(1e-6));
        CHECK(out.alignment[cell][1] == Approx(0.06 / 0.77).epsilon(1e-6));
        CHECK(out.alignment[cell][2] == Approx(0.04 / 0.77).epsilon(1e-6));
    }
}

TEST_CASE("a one-armed galaxy is seen to be uneven", "[transport][media]") {
    const auto box = galaxy::box(20, 3, 10 * kpc, 3 * kpc);
    auto media = galaxy::media_on(box);
    const auto even = axisymmetric_media(media, box).of_gas;
    for (std::size_t cell = 0; cell < box.stored_cells(); ++cell) {
        const double x = box.x[cell % 20] + 0.5 * kpc;
        const double y = box.y[cell / 20 % 20] + 0.5 * kpc;
        for (auto* gas : {&media.gas.hi, &media.gas.h2, &media.gas.hii}) {
            (*gas)[cell] *= static_cast<float>(1 + 0.8 * x / std::hypot(x, y));
        }
    }
    const auto uneven = axisymmetric_media(media, box).of_gas;
    // 0.8 cos(phi) has the rms 0.566
    CHECK(std::sqrt(std::pow(uneven.by_volume, 2) - std::pow(even.by_volume, 2)) ==
          Approx(0.566).epsilon(0.05));
    CHECK(uneven.by_amount > 0.5);
    CHECK(even.by_amount < 0.25);
}

TEST_CASE("places of laws lie between the cells", "[transport][media]") {
    const auto grid = galaxy::rings(30, 30);
    const auto media = axisymmetric_media(galaxy::media_on(grid), grid);
    const Place place = place_at(media, 8 * kpc, 1 * kpc, 0);
    const double field = 8e-6 * std::sqrt(1.77) * std::exp(-0.8 - 0.25);
    CHECK(*place.field == Approx(field).epsilon(1e-4)); // exponentials are straight in the logarithm
    CHECK(*place.ion_density == Approx(0.03 * std::exp(-0.8 - 1) + 1e-4).epsilon(2e-3));
    CHECK(*place.alfven_speed ==
          Approx(*place.field / std::sqrt(4 * constants::pi * *place.ion_density * constants::proton_mass))
              .epsilon(1e-12));
    CHECK(*place_at(media, 8 * kpc, -1 * kpc, 0).field == *place.field);
    CHECK_THROWS_WITH(axisymmetric_grid([] {
                          auto box = galaxy::box(4, 4, 10 * kpc, 5 * kpc);
                          for (double& x : box.x) {
                              x += 11 * kpc;
                          }
                          return box;
                      }()),
                      Contains("around the z axis"));
}

TEST_CASE("losses of electrons are the formulas in the media that emit", "[transport][losses]") {
    const auto grid = galaxy::rings(6, 6);
    const auto media = axisymmetric_media(galaxy::media_on(grid), grid);
    const auto spec = galaxy::spec();
    const auto losses = electron_losses(media, spec);
    std::vector<std::vector<double>> rate;
    const physics::BlackbodyLoss blackbody;
    for (const double t : {0.01 * gev, 1 * gev, 300 * gev}) {
        const Particle particle = electron(t);
        momentum_losses(losses, particle, 36, rate);
        for (const std::size_t cell : {0U, 14U, 35U}) {
            const auto of = [&](const char* name) {
                return rate[index_of(losses, name)][cell] * particle.speed;
            };
            // (4/3) sigma_T c (B^2/8 pi) gamma^2 beta^2
            const double gamma = 1 + t / constants::electron_rest_energy;
            const double closed = 4.0 / 3 * constants::thomson_cross_section * constants::speed_of_light *
                                  media.field[cell] * media.field[cell] / (8 * constants::pi) *
                                  (gamma * gamma - 1);
            CHECK(of("synchrotron") == Approx(closed).epsilon(1e-12));
            CHECK(of("inverse compton: stars") ==
                  Approx(blackbody.loss(t, 4000, media.radiation[1].energy_density[cell])).epsilon(1e-12));
            CHECK(of("inverse compton: cmb") ==
                  Approx(blackbody.loss(t, 2.7255, media.radiation[0].uniform_density)).epsilon(1e-12));
            CHECK(of("coulomb") == Approx(physics::electron_coulomb_loss(t, media.hii[cell])).epsilon(1e-10));
            CHECK(of("bremsstrahlung: h2") / of("bremsstrahlung: hi") ==
                  Approx(media.h2[cell] / media.hi[cell]).epsilon(1e-9));
        }
    }
}

TEST_CASE("a tabulated black body takes as much as a black body", "[transport][losses]") {
    const auto grid = galaxy::rings(2, 2);
    auto media = axisymmetric_media(galaxy::media_on(grid), grid);
    RingRadiation table{.name = "table",
                        .temperature = 0,
                        .uniform_density = 0,
                        .energy_density = {},
                        .photon_energy = {},
                        .photon_density = {}};
    const double kt = constants::boltzmann * 4000;
    for (int i = 0; i <= 1200; ++i) {
        table.photon_energy.push_back(kt * 1e-3 * std::pow(3e4, i / 1200.0));
    }
    const double hc = constants::planck * constants::speed_of_light;
    for (int cell = 0; cell < 4; ++cell) {
        for (const double e : table.photon_energy) {
            table.photon_density.push_back(8 * constants::pi * e * e / (hc * hc * hc) / std::expm1(e / kt));
        }
    }
    media.radiation = {{.name = "black",
                        .temperature = 4000,
                        .uniform_density = 0,
                        .energy_density = {},
                        .photon_energy = {},
                        .photon_density = {}},
                       table};
    media.radiation[0].uniform_density = physics::blackbody_energy_density(4000);
    const auto losses = electron_losses(media, galaxy::spec());
    std::vector<std::vector<double>> rate;
    for (const double t : {0.1 * gev, 100 * gev}) {
        momentum_losses(losses, electron(t), 4, rate);
        const double ratio = rate[index_of(losses, "inverse compton: table")][2] /
                             rate[index_of(losses, "inverse compton: black")][2];
        CHECK(ratio == Approx(1).epsilon(5e-5));
    }
}

TEST_CASE("protons lose energy to pions once", "[transport][losses]") {
    const auto grid = galaxy::rings(3, 3);
    const auto media = axisymmetric_media(galaxy::media_on(grid), grid);
    auto spec = galaxy::spec();
    const auto continuous = proton_losses(media, spec);
    CHECK(continuous.names == std::vector<std::string>{"ionisation", "coulomb", "pions"});
    CHECK_FALSE(continuous.catastrophic);
    spec.pion_loss_is_catastrophic = true;
    const auto catastrophic = proton_losses(media, spec);
    CHECK(catastrophic.names == std::vector<std::string>{"ionisation", "coulomb"});
    const Particle particle =
        particle_of_momentum(10 * gev / constants::speed_of_light, constants::proton_rest_energy);
    std::vector<double> rate(9);
    catastrophic.catastrophic(particle, rate);
    std::vector<double> loss(9);
    continuous.process[2](particle, loss);
    CHECK(loss[4] == Approx(0.5 * particle.kinetic_energy * rate[4]).epsilon(1e-12));
    for (const double p : {1e-4 * gev, 0.03 * gev, 3 * gev}) { // the first is slower than thermal electrons
        const Particle proton =
            particle_of_momentum(p / constants::speed_of_light, constants::proton_rest_energy);
        continuous.process[1](proton, loss);
        for (std::size_t cell = 0; cell < 9; ++cell) {
            const double temperature = media.temperature.empty() ? 1e4 : media.temperature[cell];
            CHECK(loss[cell] ==
                  Approx(physics::proton_coulomb_loss(proton.kinetic_energy, media.hii[cell], temperature))
                      .epsilon(1e-12));
        }
    }
}

TEST_CASE("secondaries are the integral over the protons", "[transport][secondaries]") {
    std::vector<double> energy;
    for (int i = 0; i <= 96; ++i) {
        energy.push_back(0.1 * gev * std::pow(10.0, i / 16.0));
    }
    const spectra::Basis basis(energy);
    auto spec = galaxy::spec();
    std::vector<double> momentum;
    for (int i = 0; i < 12; ++i) {
        momentum.push_back(30 * gev / constants::speed_of_light * std::pow(10.0, -i / 32.0));
    }
    const RunContext context;
    const auto matrix = secondary_matrix(spec, basis, momentum, context);
    const auto density = [](double t) { return std::pow(t / gev, -2.7) / (1 + std::pow(t / gev, -1.5)); };
    for (const std::size_t row : {0U, 5U, 7U, 10U}) {
        const Particle lepton =
            electron(particle_of_momentum(momentum[row], constants::electron_rest_energy).kinetic_energy);
        double sum = 0;
        double positive = 0;
        for (std::size_t j = 0; j < energy.size(); ++j) {
            const double m = density(energy[j]) * std::pow(energy[j], 2.5);
            sum +=
                (matrix.electrons[row * matrix.protons + j] + matrix.positrons[row * matrix.protons + j]) * m;
            positive += matrix.positrons[row * matrix.protons + j] * m;
        }
        double expected = 0;
        double expected_positive = 0;
        constexpr int steps = 1500; // midpoints in ln T
        const double from = std::max(lepton.total_energy, physics::pion_threshold());
        const double h = std::log(energy.back() / from) / steps;
        for (int i = 0; i < steps; ++i) {
            const double t = from * std::exp(h * (i + 0.5));
            const double part =
                h * t * density(t) * constants::speed_of_light *
                physics::speed_over_c(t, constants::proton_rest_energy) *
                physics::secondary_cross_section(spec.secondary_model, spec.pion_model,
                                                 physics::Secondary::electrons, lepton.total_energy, t);
            expected += part;
            expected_positive += part * physics::positron_fraction(spec.pion_model, t);
        }
        const double factor = spec.nuclear_enhancement * lepton.speed;
        INFO("row " << row << ": " << sum / (factor * expected) - 1);
        CHECK(sum == Approx(factor * expected).epsilon(3e-4));
        CHECK(positive == Approx(factor * expected_positive).epsilon(3e-4));
    }
}

TEST_CASE("moments of spectra are exact for their powers", "[transport][secondaries]") {
    std::vector<double> energy;
    for (int i = 0; i <= 16; ++i) {
        energy.push_back(std::pow(10.0, i / 8.0));
    }
    const spectra::Basis basis(energy);
    const auto weights = integral_weights(basis, [](double t) { return t; });
    double sum = 0;
    for (std::size_t j = 0; j < energy.size(); ++j) {
        sum += weights[j] * std::log(energy[j]); // N = T^-2.5 ln T
    }
    // int T^-1.5 ln T dT = -2 T^-0.5 (ln T + 2)
    CHECK(sum == Approx(4 - 0.2 * (std::log(100.0) + 2)).epsilon(1e-7));
}
