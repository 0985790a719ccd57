#include "transport/solver_case.hpp"

#include "aureole/base/quadrature.hpp"

#include <catch2/catch.hpp>

using namespace solver_case;

namespace {

/// Leaky box: one cell, nothing passes its sides, losses b0 E^2, escape time tau/E^0.5.
struct Box {
    Column slab = make_column({0, kpc});
    double b0 = 1e-16;
    double tau = 1e15;
};

void set_box(const Box& box, double momentum, MomentumData& data) {
    set_plain(box.slab.mesh, momentum, 0, data);
    data.losses[0][0] = box.b0 * momentum * momentum;
    data.space.rate.assign(1, std::sqrt(momentum) / box.tau);
    data.sources[0][0] = std::pow(momentum, -2.3);
}

double box_error(const Box& box, int per_decade) {
    auto setup = setup_of(box.slab.mesh, {BoundaryKind::reflecting}, descending(1e5, 0.1, per_decade));
    setup.evaluate = [&](double momentum, MomentumData& data) { set_box(box, momentum, data); };
    const auto result = march(setup, {});
    // N = 1/b int_E^Emax Q exp(-int dE/(b tau(E))) dE, in ln E.
    const auto rule = gauss_legendre(20);
    double worst = 0;
    for (std::size_t node = 1; node < setup.momentum.size(); ++node) {
        const double energy = setup.momentum[node];
        if (energy > 1e4) {
            continue;
        }
        const auto integrand = [&](double u) {
            const double above = std::exp(u);
            // int E^0.5/(b0 E^2 tau) dE = 2 (E^-0.5 - E'^-0.5)/(b0 tau)
            const double depth = 2 * (1 / std::sqrt(energy) - 1 / std::sqrt(above)) / (box.b0 * box.tau);
            return std::pow(above, -1.3) * std::exp(-depth);
        };
        const double expected = integrate_panels(rule, integrand, std::log(energy), std::log(1e5), 200) /
                                (box.b0 * energy * energy);
        worst = std::max(worst, std::abs(result.density[0][node] / expected - 1));
    }
    return worst;
}

} // namespace

TEST_CASE("a leaky box converges at second order in energy", "[transport][solver][order]") {
    const Box box;
    const double coarse = box_error(box, 8);
    const double fine = box_error(box, 16);
    const double finest = box_error(box, 32);
    WARN("leaky box: errors " << coarse << ", " << fine << ", " << finest << "; orders "
                              << order(coarse, fine) << ", " << order(fine, finest));
    CHECK(order(coarse, fine) == Approx(2).epsilon(0).margin(0.2));
    CHECK(order(fine, finest) == Approx(2).epsilon(0).margin(0.2));
    CHECK(finest < 1e-3);
}

TEST_CASE("without losses every momentum is on its own, and tiny losses do not ring", "[transport][solver]") {
    const auto slab = make_column(sinh_edges(5 * kpc, 20, 2));
    for (const double loss : {0.0, 1e-26, 1e-22}) {
        auto setup = setup_of(slab.mesh, {BoundaryKind::free_escape}, descending(1e4, 1, 4));
        setup.evaluate = [&](double momentum, MomentumData& data) {
            set_plain(slab.mesh, momentum, 3e28 * std::sqrt(momentum), data);
            data.losses[0].assign(slab.mesh.cells(), loss * momentum);
            data.sources[0][0] = 0.5 * std::pow(momentum, -2.3) / slab.mesh.volume[0];
        };
        const auto result = march(setup, {});
        for (std::size_t node = loss == 0 ? 0 : 1; node < setup.momentum.size(); ++node) {
            const double momentum = setup.momentum[node];
            for (std::size_t i = 0; i < slab.mesh.cells(); ++i) {
                // Q (H - z)/(2 D), exact on any cells; losses shift it by loss * H^2/D at most.
                const double expected =
                    std::pow(momentum, -2.3) * (5 * kpc - slab.middle[i]) / (2 * 3e28 * std::sqrt(momentum));
                const double margin = 1e-11 + 20 * loss * 25 * kpc * kpc / 3e28;
                REQUIRE(at_node(slab.mesh, result, node)[i] == Approx(expected).epsilon(margin));
            }
        }
        CHECK(result.redone_steps == 0);
    }
}

TEST_CASE("particles injected in one cell at one momentum never make a density negative",
          "[transport][solver]") {
    const auto slab = make_column(sinh_edges(5 * kpc, 30, 0));
    // Two short steps, in which a spike is injected and hardly spreads, and then long ones.
    auto setup =
        setup_of(slab.mesh, {BoundaryKind::free_escape}, {100, 99.999, 99.998, 60, 40, 25, 15, 8, 4});
    setup.evaluate = [&](double momentum, MomentumData& data) {
        set_plain(slab.mesh, momentum, 3e28 * std::sqrt(momentum), data);
        data.losses[0].assign(slab.mesh.cells(), 1e-16 * momentum * momentum);
        if (std::abs(momentum / setup.momentum[1] - 1) < 1e-7) {
            data.sources[0][10] = 1;
        }
    };
    const auto result = march(setup, {});
    CHECK(result.redone_steps > 0);
    CHECK(result.redone_steps < 6);
    for (std::size_t node = 1; node < setup.momentum.size(); ++node) {
        const auto density = at_node(slab.mesh, result, node);
        const auto [least, most] = std::minmax_element(density.begin(), density.end());
        INFO("node " << node);
        CHECK(*least >= -1e-12 * *most);
        CHECK(*most > 0);
    }
    CHECK(std::abs(result.budget[0].defect.number) < 1e-10);
    CHECK(std::abs(result.budget[0].defect.energy) < 1e-10);
}

TEST_CASE("a momentum gain is refused by cell and momentum", "[transport][solver][bad-input]") {
    const auto slab = make_column(sinh_edges(5 * kpc, 10, 0));
    auto setup = setup_of(slab.mesh, {BoundaryKind::free_escape}, descending(100, 1, 4));
    setup.evaluate = [&](double momentum, MomentumData& data) {
        set_plain(slab.mesh, momentum, 3e28, data);
        data.losses[0].assign(10, 1e-16 * momentum * momentum);
        data.divergence.assign(10, 0.0);
        data.divergence[7] = -3.1e-15; // beats the losses below 10.33 GeV
    };
    try {
        march(setup, {});
        FAIL("accepted");
    } catch (const MomentumGain& gain) {
        CHECK(gain.cell == 7);
        CHECK(gain.momentum < 31.0 / 3);
        CHECK(gain.momentum > 31.0 / 3 / std::pow(10, 0.25));
        CHECK(gain.loss_rate < 0);
        CHECK(gain.kind() == ErrorKind::scenario);
    }
}

TEST_CASE("particles without loss or escape are refused", "[transport][solver][bad-input]") {
    const auto slab = make_column(sinh_edges(5 * kpc, 10, 0));
    auto setup = setup_of(slab.mesh, {BoundaryKind::reflecting}, descending(100, 1, 4));
    setup.evaluate = [&](double momentum, MomentumData& data) {
        set_plain(slab.mesh, momentum, 0, data);
        data.sources[0].assign(10, 1.0);
    };
    CHECK_THROWS_AS(march(setup, {}), Error);
}

TEST_CASE("a matrix that needs pivoting is solved all the same", "[transport][solver]") {
    const auto slab = make_column(sinh_edges(5 * kpc, 10, 0));
    auto setup = setup_of(slab.mesh, {BoundaryKind::reflecting}, {2.0, 1.0});
    setup.evaluate = [&](double momentum, MomentumData& data) {
        set_plain(slab.mesh, momentum, 3e28, data);
        data.space.rate.assign(10, -1e-16); // growth: not positive definite
        data.sources[0].assign(10, 1.0);
    };
    const auto result = march(setup, {});
    CHECK(result.pivoted > 0);
    for (std::size_t i = 0; i < 10; ++i) {
        CHECK(result.density[0][10 + i] == Approx(-1e16).epsilon(1e-9));
    }
}

TEST_CASE("the mean age of particles from a thin disc is (H^2/2 - (H - z)^2/6)/D",
          "[transport][solver][order]") {
    const auto error = [](std::size_t cells) {
        const auto slab = make_column(sinh_edges(5 * kpc, cells, 0));
        auto setup = setup_of(slab.mesh, {BoundaryKind::free_escape}, {10, 5, 2.5});
        setup.evaluate = [&](double momentum, MomentumData& data) {
            set_plain(slab.mesh, momentum, 1e28, data);
            data.sources[0][0] = 1;
        };
        const auto age = mean_age(setup, {});
        double worst = 0;
        for (std::size_t node = 0; node < 3; ++node) {
            for (std::size_t i = 0; i < cells; ++i) {
                const double below = 5 * kpc - slab.middle[i];
                const double expected = (25 * kpc * kpc / 2 - below * below / 6) / 1e28;
                worst = std::max(worst, std::abs(age[0][node * cells + i] / expected - 1));
            }
        }
        return worst;
    };
    const double coarse = error(20);
    const double fine = error(40);
    CHECK(order(coarse, fine) == Approx(2).epsilon(0).margin(0.1));
    CHECK(fine < 1e-3);
}

TEST_CASE("one and two threads give the same bits, other kernels the same twelve digits",
          "[transport][solver]") {
    const auto slab = make_column(sinh_edges(5 * kpc, 40, 2));
    auto setup = setup_of(slab.mesh, {BoundaryKind::free_escape}, descending(1e3, 1, 5));
    setup.evaluate = [&](double momentum, MomentumData& data) {
        set_plain(slab.mesh, momentum, 3e28 * std::sqrt(momentum), data);
        data.losses[0].assign(slab.mesh.cells(), 1e-16 * momentum * momentum);
        data.sources[0][0] = std::pow(momentum, -2.3);
    };
    RunContext two;
    two.threads = 2;
    RunContext pinned;
    pinned.reproducible = true;
    const auto one_thread = march(setup, {});
    const auto two_threads = march(setup, two);
    const auto baseline = march(setup, pinned);
    CHECK(one_thread.density == two_threads.density);
    for (std::size_t i = 0; i < baseline.density[0].size(); ++i) {
        REQUIRE(baseline.density[0][i] == Approx(one_thread.density[0][i]).epsilon(1e-11));
    }
}

TEST_CASE("below the last momentum of a sharp source the limiter finds nothing, and says so quietly",
          "[transport][solver]") {
    const auto slab = make_column(sinh_edges(5 * kpc, 20, 2));
    for (const double loss : {1e-30, 1e-22, 1e-16}) {
        auto setup = setup_of(slab.mesh, {BoundaryKind::free_escape}, descending(100, 0.1, 6));
        setup.limiter = Limiter::square_root;
        setup.evaluate = [&](double momentum, MomentumData& data) {
            set_plain(slab.mesh, momentum, 1e31, data);
            data.losses[0].assign(slab.mesh.cells(), loss * momentum);
            data.sources[0][0] = momentum > 5 ? std::pow(momentum, -2.3) : 0.0;
        };
        const auto result = march(setup, {});
        INFO("losses " << loss);
        CHECK(std::abs(result.budget[0].defect.number) < 1e-10);
        CHECK(result.not_converged.empty());
        for (const double density : result.density[0]) {
            REQUIRE(std::isfinite(density));
        }
        const auto last = at_node(slab.mesh, result, setup.momentum.size() - 1);
        CHECK(last[0] < 1e-3 * at_node(slab.mesh, result, 1)[0]);
    }
}

TEST_CASE("a diffusivity that depends on the gradient gives the profile of its flux", "[transport][solver]") {
    // D = D0 |N'/g0|^m, thin source q: the flux D0 g0 |N'/g0|^(1 + m) = q is the same at all heights.
    const auto slab = make_column(sinh_edges(5 * kpc, 30, 2));
    const double d0 = 3e28;
    for (const double power : {-0.9, -0.5, 1.0}) {
        auto setup = setup_of(slab.mesh, {BoundaryKind::free_escape}, {4.0, 2.0, 1.0});
        const double g0 = 1 / kpc;
        setup.evaluate = [&](double momentum, MomentumData& data) {
            set_plain(slab.mesh, momentum, d0, data);
            data.sources[0][0] = momentum * d0 * g0 / slab.mesh.volume[0];
        };
        setup.respond = [&](double, std::span<const double> density, MomentumData& data) {
            for (std::size_t f = 0; f < slab.mesh.faces.size(); ++f) {
                const Face& face = slab.mesh.faces[f];
                const double slope = std::abs(density[face.first] - density[face.second]) /
                                     (face.first_distance + face.second_distance);
                data.space.diffusion[f] = d0 * std::pow(slope / g0, power);
            }
            const std::size_t top = slab.mesh.boundary[0].cell;
            data.space.boundary_diffusion[0] =
                d0 * std::pow(density[top] / slab.mesh.boundary[0].distance / g0, power);
        };
        const auto result = march(setup, {});
        CHECK(result.not_converged.empty());
        CHECK(result.factorizations < 150);
        for (std::size_t node = 0; node < setup.momentum.size(); ++node) {
            const double slope = g0 * std::pow(setup.momentum[node], 1 / (1 + power));
            for (std::size_t i = 0; i < slab.mesh.cells(); ++i) {
                INFO("power " << power << ", node " << node << ", cell " << i);
                REQUIRE(at_node(slab.mesh, result, node)[i] ==
                        Approx(slope * (5 * kpc - slab.middle[i])).epsilon(1e-7));
            }
        }
    }
}
