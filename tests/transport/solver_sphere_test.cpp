#include "transport/solver_case.hpp"

#include <catch2/catch.hpp>

using namespace solver_case;

namespace {

struct Shells {
    std::vector<double> edges;
    Mesh mesh;
    std::vector<double> middle;
};

Shells make_shells(double first, double last, std::size_t cells) {
    Shells shells{geometric_edges(first * kpc, last * kpc, cells), {}, {}};
    shells.mesh = make_sphere(shells.edges);
    for (std::size_t i = 0; i < cells; ++i) {
        shells.middle.push_back(std::sqrt(shells.edges[i] * shells.edges[i + 1]));
    }
    return shells;
}

/// kappa0 (r/10 kpc)^slope on the faces.
void set_power(const Shells& shells, double kappa0, double slope, double momentum, MomentumData& data) {
    set_plain(shells.mesh, momentum, 0, data);
    const auto kappa = [&](double r) { return kappa0 * std::pow(r / (10 * kpc), slope); };
    for (std::size_t f = 0; f < shells.mesh.faces.size(); ++f) {
        data.space.diffusion[f] = kappa(shells.edges[f + 1]);
    }
    data.space.boundary_diffusion[0] = kappa(shells.edges.back());
}

double power_law_error(const std::string& name, double slope, Boundary side, std::size_t cells) {
    const auto shells = make_shells(0.2, 300, cells);
    auto setup = setup_of(shells.mesh, side, {1.0, 0.5});
    setup.evaluate = [&](double momentum, MomentumData& data) {
        set_power(shells, 1e29, slope, momentum, data);
        data.sources[0][0] = 1 / shells.mesh.volume[0];
        if (name.starts_with("ext")) {
            const double ball = 4 * constants::pi / 3 * std::pow(5 * kpc, 3);
            for (std::size_t i = 0; i < cells; ++i) {
                const double outer = std::min(shells.edges[i + 1], 5 * kpc);
                const double inner = i == 0 ? 0 : std::min(shells.edges[i], 5 * kpc);
                data.sources[0][i] = 4 * constants::pi / 3 * (std::pow(outer, 3) - std::pow(inner, 3)) /
                                     ball / shells.mesh.volume[i];
            }
        }
    };
    const auto result = march(setup, {});
    double worst = 0;
    for (const auto& row : read_table("spherical_powerlaw_nu.csv")) {
        const double r = number(row, "r_kpc");
        if (r > 0.8 && r < 220) {
            const double found =
                cubic_of_log(shells.middle, at_node(shells.mesh, result, 0), r * kpc) / number(row, name);
            worst = std::max(worst, std::abs(found - 1));
        }
    }
    return worst;
}

/// A sphere with diffusion kappa0 (r/10 kpc)^slope and a point source of 1 particle per second.
struct LimitedSphere {
    Limiter limiter = Limiter::none;
    double kappa0 = 3e29;
    double slope = 0;
};

double flux(double r) {
    return 1 / (4 * constants::pi * r * r);
}

/// X at which X L(X) = y.
double inverse_of_flux(Limiter limiter, double y) {
    double low = 0;
    double high = 1;
    while (high * limited_fraction(limiter, high) < y) {
        high *= 2;
    }
    for (int i = 0; i < 80; ++i) {
        const double x = 0.5 * (low + high);
        (x * limited_fraction(limiter, x) < y ? low : high) = x;
    }
    return low;
}

/// Density by the limited flux S/(4 pi r^2) = kappa |N'| L(X), inward from a density at the outer radius, by
/// Runge-Kutta steps in ln r.
std::vector<double>
limited_profile(const LimitedSphere& sphere, double outer, double density, std::span<const double> radii) {
    const auto steepness = [&](double u, double at) { // dN/dln r
        const double r = std::exp(u);
        const double x = inverse_of_flux(sphere.limiter, flux(r) / (light * at));
        return -r * light * at * x / (sphere.kappa0 * std::pow(r / (10 * kpc), sphere.slope));
    };
    std::vector<double> profile(radii.size());
    double u = std::log(outer);
    for (std::size_t i = radii.size(); i-- > 0;) {
        const int steps = 400;
        const double h = (std::log(radii[i]) - u) / steps;
        for (int s = 0; s < steps; ++s) {
            const double k1 = steepness(u, density);
            const double k2 = steepness(u + h / 2, density + h / 2 * k1);
            const double k3 = steepness(u + h / 2, density + h / 2 * k2);
            const double k4 = steepness(u + h, density + h * k3);
            density += h / 6 * (k1 + 2 * k2 + 2 * k3 + k4);
            u += h;
        }
        profile[i] = density;
    }
    return profile;
}

MarchResult
limited_march(const Shells& shells, MarchSetup& setup, Limiter limiter, double kappa0, double slope) {
    setup.limiter = limiter;
    setup.evaluate = [&shells, kappa0, slope](double momentum, MomentumData& data) {
        set_power(shells, kappa0, slope, momentum, data);
        data.sources[0][0] = 1 / shells.mesh.volume[0];
    };
    return march(setup, {});
}

} // namespace

TEST_CASE("spheres with diffusion that is a power of the radius converge at second order",
          "[transport][solver][order]") {
    const Boundary wall{BoundaryKind::free_escape};
    const std::vector<std::pair<std::string, double>> cases = {
        {"pt_am1", -1}, {"pt_a05", 0.5}, {"pt_a1", 1}, {"pt_a2", 2}, {"ext_a1", 1}};
    for (const auto& [name, slope] : cases) {
        const double coarse = power_law_error(name, slope, wall, 80);
        const double fine = power_law_error(name, slope, wall, 160);
        INFO(name << ": errors " << coarse << ", " << fine);
        CHECK(fine < 3e-3);
        if (name != "ext_a1") { // the edge of the source lies anywhere in a cell
            CHECK(order(coarse, fine) == Approx(2).epsilon(0).margin(0.2));
        }
    }
    CHECK(power_law_error("pt_a0", 0, wall, 160) < 1e-4); // exact on these shells, but interpolated
    CHECK(power_law_error("ext_a0", 0, wall, 160) < 3e-3);
    CHECK(power_law_error("pt_a1_robin", 1, {BoundaryKind::marshak}, 160) < 3e-3);
}

TEST_CASE("a density 1/r - 1/R is exact on geometric shells", "[transport][solver]") {
    const auto shells = make_shells(0.2, 300, 30);
    auto setup = setup_of(shells.mesh, {BoundaryKind::free_escape}, {1.0, 0.5});
    setup.evaluate = [&](double momentum, MomentumData& data) {
        set_plain(shells.mesh, momentum, 1e29, data);
        data.sources[0][0] = 1 / shells.mesh.volume[0];
    };
    const auto result = march(setup, {});
    for (std::size_t i = 0; i < 30; ++i) {
        const double expected = (1 / shells.middle[i] - 1 / (300 * kpc)) / (4 * constants::pi * 1e29);
        CHECK(result.density[0][i] == Approx(expected).epsilon(1e-11));
    }
}

TEST_CASE("limiters go from diffusion to free streaming as published", "[transport][solver]") {
    CHECK(limited_fraction(Limiter::none, 5) == 1);
    for (const auto limiter : {Limiter::square_root, Limiter::levermore_pomraning, Limiter::sum}) {
        CHECK(limited_fraction(limiter, 0) == 1);
        CHECK(1e6 * limited_fraction(limiter, 1e6) == Approx(1).epsilon(1e-5));
    }
    CHECK(limited_fraction(Limiter::square_root, 0.1) == Approx(1 - 0.005).margin(4e-5).epsilon(0));
    CHECK(limited_fraction(Limiter::sum, 0.1) == Approx(1 / 1.1).epsilon(1e-15));
    CHECK(limited_fraction(Limiter::levermore_pomraning, 0.1) ==
          Approx(1 - 0.6 * 0.01).margin(6e-5).epsilon(0));
    // The series meets the closed form.
    CHECK(limited_fraction(Limiter::levermore_pomraning, 0.0033332) ==
          Approx(limited_fraction(Limiter::levermore_pomraning, 0.0033334)).epsilon(1e-8));
}

TEST_CASE("flux-limited spheres agree with the ordinary differential equation", "[transport][solver]") {
    for (const std::size_t cells : {100, 200}) {
        const auto shells = make_shells(0.5, 300, cells);
        auto setup = setup_of(shells.mesh, {BoundaryKind::marshak}, {1.0, 0.5});
        for (const int slope : {0, 2}) {
            const std::string column = "a" + std::to_string(slope);
            const std::vector<std::pair<Limiter, std::string>> cases = {{Limiter::none, "_none"},
                                                                        {Limiter::sum, "_sum"},
                                                                        {Limiter::square_root, "_sqrt"},
                                                                        {Limiter::levermore_pomraning, ""}};
            for (const auto& [limiter, name] : cases) {
                const auto result = limited_march(shells, setup, limiter, 3e29, slope);
                CHECK(result.not_converged.empty());
                const auto density = at_node(shells.mesh, result, 0);
                std::vector<double> radii;
                std::vector<double> expected;
                for (const auto& row : read_table("flux_limited_spherical.csv")) {
                    const double r = number(row, "r_kpc") * kpc;
                    if (r < 160 * kpc) {
                        radii.push_back(r);
                        expected.push_back(name.empty() ? 0.0 : number(row, column + name));
                    }
                }
                if (name.empty()) {
                    const double outer = 300 * kpc;
                    expected = limited_profile({limiter, 3e29, static_cast<double>(slope)}, outer,
                                               2 * flux(outer) / light, radii);
                }
                double worst = 0;
                for (std::size_t i = 0; i < radii.size(); ++i) {
                    worst = std::max(
                        worst, std::abs(cubic_of_log(shells.middle, density, radii[i]) / expected[i] - 1));
                }
                INFO(column << name << ", " << cells << " cells: error " << worst << ", iterations "
                            << result.most_limiter_iterations);
                CHECK(worst < (cells == 100 ? 3e-3 : 1e-3));
                if (limiter != Limiter::none) {
                    for (std::size_t i = 0; i < cells; ++i) {
                        const double ballistic =
                            1 / (4 * constants::pi * shells.middle[i] * shells.middle[i] * light);
                        CHECK(density[i] >= ballistic * (1 - 1e-3));
                    }
                }
            }
        }
    }
}

TEST_CASE("the limiter knows no direction: a point source on an R, z grid gives the limited sphere",
          "[transport][solver]") {
    grid::Grid grid;
    grid.geometry = grid::Geometry::rz;
    grid.mirrored = true;
    grid.x = sinh_edges(60 * kpc, 48, 5);
    grid.z = grid.x;
    const Mesh mesh = make_mesh(grid);
    const auto middle = middles(grid.x);
    const LimitedSphere sphere{Limiter::square_root, 5e31, 2};
    const auto kappa = [&](double r) { return sphere.kappa0 * std::pow(r / (10 * kpc), sphere.slope); };
    auto setup = setup_of(mesh, {BoundaryKind::inverse_radius, 2}, {1.0, 0.5});
    setup.limiter = sphere.limiter;
    setup.evaluate = [&](double momentum, MomentumData& data) {
        set_plain(mesh, momentum, 0, data);
        for (std::size_t f = 0; f < mesh.faces.size(); ++f) {
            const std::size_t i = mesh.faces[f].first % 48;
            const std::size_t k = mesh.faces[f].first / 48;
            const bool radial = mesh.faces[f].axis == 0;
            data.space.diffusion[f] =
                kappa(std::hypot(radial ? grid.x[i + 1] : middle[i], radial ? middle[k] : grid.z[k + 1]));
        }
        for (std::size_t f = 0; f < mesh.boundary.size(); ++f) {
            const std::size_t cell = mesh.boundary[f].cell;
            const double along = mesh.boundary[f].axis == 0 ? middle[cell / 48] : middle[cell % 48];
            data.space.boundary_diffusion[f] = kappa(std::hypot(60 * kpc, along));
        }
        data.sources[0][0] = 0.5 / mesh.volume[0];
    };
    const auto result = march(setup, {});
    CHECK(result.not_converged.empty());
    // On the outer side N'/N = -3/r.
    const double outer = 60 * kpc;
    const double x = 3 * kappa(outer) / (outer * light);
    CHECK(x > 0.9);
    const double start = flux(outer) / (light * x * limited_fraction(sphere.limiter, x));
    double worst = 0;
    for (std::size_t k = 0; k < 48; ++k) {
        for (std::size_t i = 0; i < 48; ++i) {
            const std::vector<double> radius{std::hypot(middle[i], middle[k])};
            if (radius[0] > 5 * kpc && radius[0] < 30 * kpc && (i + k) % 5 == 0) {
                const double expected = limited_profile(sphere, outer, start, radius)[0];
                worst = std::max(worst, std::abs(result.density[0][i + 48 * k] / expected - 1));
            }
        }
    }
    WARN("limited sphere on an R, z grid: to "
         << worst << ", " << result.most_limiter_iterations << " iterations, least L "
         << *std::min_element(result.limited.begin(), result.limited.end()));
    CHECK(worst < 0.01);
}

TEST_CASE("the limiter converges where diffusion would be faster than light everywhere",
          "[transport][solver]") {
    // kappa = 1e35 cm2/s at 300 kpc: mean free paths of 3 Gpc.
    const auto shells = make_shells(0.5, 300, 100);
    for (const auto limiter : {Limiter::square_root, Limiter::levermore_pomraning, Limiter::sum}) {
        auto setup = setup_of(shells.mesh, {BoundaryKind::marshak}, {1.0, 0.5});
        const auto result = limited_march(shells, setup, limiter, 1e35 / 900, 2);
        WARN("starved sphere: " << result.most_limiter_iterations << " iterations");
        CHECK(result.not_converged.empty());
        CHECK(result.limited.front() > 0);
        CHECK(*std::min_element(result.limited.begin(), result.limited.end()) < 0.3F);
        CHECK(std::abs(result.budget[0].defect.number) < 1e-10);
    }
}

TEST_CASE("an iteration of the limiter that ends too early is reported by place and momentum",
          "[transport][solver]") {
    const auto shells = make_shells(0.5, 300, 50);
    auto setup = setup_of(shells.mesh, {BoundaryKind::marshak}, {1.0, 0.5});
    setup.limiter_iterations = 2;
    const auto result = limited_march(shells, setup, Limiter::square_root, 3e31, 2);
    REQUIRE(!result.not_converged.empty());
    CHECK(result.not_converged[0].change > setup.limiter_tolerance);
    CHECK(result.not_converged[0].cell < 50);
    CHECK(result.not_converged[0].momentum > 0);
}
