#include "transport/solver_case.hpp"

#include <catch2/catch.hpp>

using namespace solver_case;

namespace {

constexpr double myr = 1e6 * constants::year;

/// Largest relative error of one column of slab_noloss.csv on even cells whose middles are rows of the table.
double noloss_error(const std::string& name, std::size_t cells) {
    const auto slab = make_column(sinh_edges(5 * kpc, cells, 0));
    auto setup = setup_of(slab.mesh, {BoundaryKind::free_escape}, {1.0, 0.5});
    setup.evaluate = [&](double momentum, MomentumData& data) {
        set_plain(slab.mesh, momentum, 1e28, data);
        auto& source = data.sources[0];
        source[0] = 0.5 / slab.mesh.volume[0];
        if (name == "n_thick") {
            for (std::size_t i = 0; i < cells; ++i) {
                const double inside = std::clamp(0.1 * kpc - slab.edges[i], 0.0, slab.mesh.volume[i]);
                source[i] = inside / slab.mesh.volume[i] / (0.2 * kpc);
            }
        } else if (name == "n_Dexp") {
            for (std::size_t f = 0; f < cells - 1; ++f) {
                data.space.diffusion[f] = 1e28 * std::exp(slab.edges[f + 1] / (2 * kpc));
            }
            data.space.boundary_diffusion[0] = 1e28 * std::exp(2.5);
        } else if (name == "n_adv") {
            data.space.flow.assign(slab.mesh.faces.size(), 5e6);
            data.space.boundary_flow.assign(1, 5e6);
        } else if (name == "n_cat") {
            data.space.rate.assign(cells, 1 / (50 * myr));
        }
    };
    const auto result = march(setup, {});
    CHECK(result.worst_residual <= 1e-12);
    CHECK(result.pivoted == 0);
    double worst = 0;
    for (const auto& row : read_table("slab_noloss.csv")) {
        const double z = number(row, "z_kpc") * kpc;
        for (std::size_t i = 0; i < cells; ++i) {
            if (std::abs(slab.middle[i] - z) < 1e-6 * kpc && z < 4.95 * kpc) {
                worst = std::max(worst, std::abs(result.density[0][i] / number(row, name) - 1));
            }
        }
    }
    CHECK(worst > 0);
    return worst;
}

struct Electrons {
    Column slab;
    MarchSetup setup;
    MarchResult result;
};

/// Physics of electron_slab_losses.csv.
void set_electrons(const Column& slab, double delta, double momentum, MomentumData& data) {
    set_plain(slab.mesh, momentum, 3e28 * std::pow(momentum, delta), data);
    data.losses[0].assign(slab.mesh.cells(), 1e-16 * momentum * momentum);
    data.sources[0][0] = 0.5 * std::pow(momentum, -2.3) / slab.mesh.volume[0];
}

MarchResult march_electrons(const Column& slab, MarchSetup& setup, double delta) {
    setup.evaluate = [&slab, delta](double momentum, MomentumData& data) {
        set_electrons(slab, delta, momentum, data);
    };
    return march(setup, {});
}

double electron_error(const std::string& name, double delta, std::size_t cells, int per_decade) {
    const auto slab = make_column(sinh_edges(5 * kpc, cells, 3));
    auto setup = setup_of(slab.mesh, {BoundaryKind::free_escape}, descending(1e5, 0.2, per_decade));
    const auto result = march_electrons(slab, setup, delta);
    double worst = 0;
    for (const auto& row : read_table("electron_slab_losses.csv")) {
        const double energy = number(row, "E_GeV");
        const double z = number(row, "z_kpc");
        if (energy > 3.5 || z < 0.2 || z > 3.5) {
            continue;
        }
        const auto density = profile(slab.mesh, setup, result, energy);
        const double found = cubic_of_log(slab.middle, density, z * kpc);
        worst = std::max(worst, std::abs(found / number(row, name) - 1));
    }
    return worst;
}

} // namespace

TEST_CASE("slab without losses: one-dimensional fluxes are exact", "[transport][solver]") {
    for (const std::string name : {"n_thin", "n_thick", "n_adv"}) {
        for (const std::size_t cells : {25, 75}) {
            INFO(name << ", " << cells << " cells");
            CHECK(noloss_error(name, cells) < 5e-10); // ten digits in the table
        }
    }
}

TEST_CASE("slab without losses: varying diffusion and catastrophic losses converge at second order",
          "[transport][solver][order]") {
    for (const std::string name : {"n_Dexp", "n_cat"}) {
        const double coarse = noloss_error(name, 25);
        const double fine = noloss_error(name, 75);
        const double finest = noloss_error(name, 225);
        INFO(name << ": errors " << coarse << ", " << fine << ", " << finest);
        CHECK(order(coarse, fine, 3) == Approx(2).epsilon(0).margin(0.15));
        CHECK(order(fine, finest, 3) == Approx(2).epsilon(0).margin(0.15));
        CHECK(finest < 4e-4);
    }
}

TEST_CASE("diffusion, wind and catastrophic losses together converge at second order",
          "[transport][solver][order]") {
    // N = Q exp(V z/2D) sinh(S (H - z))/(V sinh(S H) + 2 D S cosh(S H)), S^2 = V^2/4D^2 + 1/(D tau): flux
    // V N - D N' = Q/2 above the disc, N(H) = 0.
    const auto error = [](std::size_t cells) {
        const double height = 5 * kpc;
        const double diffusion = 3e28;
        const double speed = 5e6;
        const double tau = 50 * myr;
        const double s = std::sqrt(speed * speed / (4 * diffusion * diffusion) + 1 / (diffusion * tau));
        const auto slab = make_column(sinh_edges(height, cells, 2));
        auto setup = setup_of(slab.mesh, {BoundaryKind::free_escape}, {1.0, 0.5});
        setup.evaluate = [&](double momentum, MomentumData& data) {
            set_plain(slab.mesh, momentum, diffusion, data);
            data.space.flow.assign(slab.mesh.faces.size(), speed);
            data.space.boundary_flow.assign(1, speed);
            data.space.rate.assign(cells, 1 / tau);
            data.sources[0][0] = 0.5 / slab.mesh.volume[0];
        };
        const auto result = march(setup, {});
        double worst = 0;
        for (std::size_t i = 0; i < cells; ++i) {
            const double z = slab.middle[i];
            const double expected =
                std::exp(speed * z / (2 * diffusion)) * std::sinh(s * (height - z)) /
                (speed * std::sinh(s * height) + 2 * diffusion * s * std::cosh(s * height));
            worst = std::max(worst, std::abs(result.density[0][i] / expected - 1));
        }
        return worst;
    };
    const double coarse = error(40);
    const double fine = error(80);
    CHECK(order(coarse, fine) == Approx(2).epsilon(0).margin(0.15));
    CHECK(fine < 2e-3);
}

TEST_CASE("electrons with losses in a slab converge at second order in energy and space",
          "[transport][solver][order]") {
    const double coarse = electron_error("H5_d050", 0.5, 16, 5);
    const double fine = electron_error("H5_d050", 0.5, 32, 10);
    const double finest = electron_error("H5_d050", 0.5, 64, 20);
    WARN("electrons in a slab: errors " << coarse << ", " << fine << ", " << finest << "; orders "
                                        << order(coarse, fine) << ", " << order(fine, finest));
    CHECK(order(coarse, fine) == Approx(2).epsilon(0).margin(0.3));
    CHECK(order(fine, finest) == Approx(2).epsilon(0).margin(0.2));
    CHECK(finest < 1e-3);
    CHECK(electron_error("H5_d033", 1.0 / 3, 64, 20) < 1e-3);
    CHECK(electron_error("H5_d000", 0, 64, 20) < 1e-3);
}

TEST_CASE("local slopes of electrons between escape and calorimeter are right to 0.0025",
          "[transport][solver]") {
    constexpr std::size_t cells = 48;
    const auto slab = make_column(sinh_edges(5 * kpc, cells, 3));
    double worst = 0;
    double worst_survival = 0;
    for (const double delta : {0.5, 0.0, 1.0 / 3}) {
        auto setup = setup_of(slab.mesh, {BoundaryKind::free_escape}, descending(3e6, 0.005, 16));
        const auto result = march_electrons(slab, setup, delta);
        std::vector<double> x;
        std::vector<double> total;
        std::vector<double> middle;
        for (std::size_t node = setup.momentum.size(); node-- > 1;) {
            const auto density = at_node(slab.mesh, result, node);
            double sum = 0;
            for (std::size_t i = 0; i < cells; ++i) {
                sum += 2 * slab.mesh.volume[i] * density[i];
            }
            x.push_back(std::log(setup.momentum[node]));
            total.push_back(sum);
            middle.push_back(cubic_of_log(slab.middle, density, 0));
        }
        const auto slope = [&](const std::vector<double>& values, double at) {
            return -(std::log(cubic_of_log(x, values, at + 0.05)) -
                     std::log(cubic_of_log(x, values, at - 0.05))) /
                   0.1;
        };
        for (const auto& row : read_table("calorimeter_slopes.csv")) {
            if (std::abs(number(row, "delta") - delta) > 1e-3) {
                continue;
            }
            const double energy = number(row, "E_GeV");
            const double at = std::log(energy);
            worst = std::max(worst, std::abs(slope(middle, at) - number(row, "slope_mid")));
            worst = std::max(worst, std::abs(slope(total, at) - number(row, "slope_total")));
            const double survive =
                1e-16 * energy * energy * cubic_of_log(x, total, at) / (std::pow(energy, -1.3) / 1.3);
            worst_survival = std::max(worst_survival, std::abs(survive / number(row, "survive") - 1));
        }
    }
    WARN("calorimeter: slopes to " << worst << ", surviving fraction to " << worst_survival);
    CHECK(worst < 0.0025);
    CHECK(worst_survival < 0.003);
}

TEST_CASE("a wind with radiative and adiabatic losses follows its characteristics",
          "[transport][solver][order]") {
    const auto error = [](const std::string& name, std::size_t cells, int per_decade) {
        const bool constant = name == "n_const";
        const bool radiative = name != "n_wind_adiab";
        const auto slab = make_column(sinh_edges(10 * kpc, cells, 0));
        auto setup = setup_of(slab.mesh, {BoundaryKind::outflow}, descending(1e4, 0.2, per_decade));
        setup.evaluate = [&](double momentum, MomentumData& data) {
            set_plain(slab.mesh, momentum, 0, data);
            for (std::size_t f = 0; f < cells; ++f) {
                const double speed = 2e7 * (constant ? 1 : 1 + slab.edges[f + 1] / (3 * kpc));
                (f + 1 < cells ? data.space.flow : data.space.boundary_flow).push_back(speed);
            }
            // The flow that begins at the disc itself costs no adiabatic loss in these solutions.
            data.divergence.assign(cells, constant ? 0.0 : 2e7 / (3 * kpc));
            data.losses[0].assign(cells, radiative ? 5e-17 * momentum * momentum : 0.0);
            data.sources[0][0] = 0.5 * std::pow(momentum, -2.3) / slab.mesh.volume[0];
        };
        const auto result = march(setup, {});
        CHECK(result.pivoted == 0);
        double worst = 0;
        for (const auto& row : read_table("advection_losses.csv")) {
            const double energy = number(row, "E_GeV");
            const double z = number(row, "z_kpc");
            const double expected = number(row, name);
            if (energy > 3.5 || z < 0.2 || expected <= 0) {
                continue;
            }
            const auto density = profile(slab.mesh, setup, result, energy);
            worst = std::max(worst, std::abs(cubic_of_log(slab.middle, density, z * kpc) / expected - 1));
        }
        return worst;
    };
    for (const std::string name : {"n_const", "n_wind", "n_wind_adiab"}) {
        const double coarse = error(name, 200, 16);
        const double fine = error(name, 400, 32);
        WARN(name << ": errors " << coarse << ", " << fine << "; order " << order(coarse, fine));
        CHECK(order(coarse, fine) == Approx(1).epsilon(0).margin(0.25)); // upwind without diffusion
        CHECK(fine < 0.01);
    }
}
