#include "aureole/transport/problem.hpp"

#include "aureole/base/constants.hpp"
#include "aureole/base/error.hpp"
#include "aureole/physics/kinematics.hpp"
#include "aureole/transport/march.hpp"

#include <fmt/format.h>

#include <algorithm>
#include <cmath>

namespace aureole::transport {
namespace {

double middle(const std::vector<double>& edges, std::size_t i) {
    return 0.5 * (edges[i] + edges[i + 1]);
}

struct Point {
    double radius = 0, height = 0;
};

Point face_point(const grid::Grid& grid, const Face& face) {
    const std::size_t i = face.first % grid.nx();
    const std::size_t k = face.first / grid.nx();
    return face.axis == 0 ? Point{grid.x[i + 1], middle(grid.z, k)} : Point{middle(grid.x, i), grid.z[k + 1]};
}

Point face_point(const grid::Grid& grid, const BoundaryFace& face) {
    const std::size_t i = face.cell % grid.nx();
    const std::size_t k = face.cell / grid.nx();
    if (face.axis == 0) {
        return {grid.x[i + 1], middle(grid.z, k)};
    }
    return {middle(grid.x, i), face.orientation > 0 ? grid.z[k + 1] : grid.z[k]};
}

/// Upward velocity of a wind of closed form.
double closed_wind(const WindSpec& wind, double z) {
    const double sign = z > 0 ? 1.0 : (z < 0 ? -1.0 : 0.0);
    const double onset = wind.base > 0 ? std::tanh(z / wind.base) : sign;
    if (wind.kind == "linear") {
        return wind.speed * z / wind.height;
    }
    return wind.speed * onset * (wind.kind == "accelerated" ? 1 + std::abs(z) / wind.height : 1.0);
}

void check_wind(const WindSpec& wind, const AxisymmetricMedia& media) {
    const auto refuse = [&](const std::string& what) {
        throw Error(ErrorKind::scenario, fmt::format("wind '{}': {}", wind.kind, what));
    };
    if (wind.kind == "file") {
        if (media.velocity_z.empty()) {
            refuse("found no gas velocity in the media, expected a file that has it");
        }
        return;
    }
    if (wind.kind != "constant" && wind.kind != "linear" && wind.kind != "accelerated") {
        refuse("found an unknown kind, expected none, constant, linear, accelerated or file");
    }
    if (!(wind.speed >= 0) || !(wind.speed < constants::speed_of_light) || !(wind.base >= 0)) {
        refuse(fmt::format("found the speed {:g} cm/s and the base {:g} cm, expected a speed from 0 to c and "
                           "a length of at least 0",
                           wind.speed, wind.base));
    }
    if (wind.kind != "constant" && !(wind.height > 0)) {
        refuse(fmt::format("found the height {:g} cm, expected a length > 0", wind.height));
    }
}

BoundaryKind kind_of(Edge edge) {
    switch (edge) {
    case Edge::free_escape:
        return BoundaryKind::free_escape;
    case Edge::marshak:
        return BoundaryKind::marshak;
    case Edge::one_over_r:
        return BoundaryKind::inverse_radius;
    case Edge::outflow:
        return BoundaryKind::outflow;
    case Edge::closed:
        break;
    }
    return BoundaryKind::reflecting;
}

Limiter limiter_of(const std::string& name) {
    if (name == "none") {
        return Limiter::none;
    }
    if (name == "square_root") {
        return Limiter::square_root;
    }
    if (name == "levermore_pomraning") {
        return Limiter::levermore_pomraning;
    }
    if (name == "sum") {
        return Limiter::sum;
    }
    throw Error(
        ErrorKind::scenario,
        fmt::format("limiter: found '{}', expected none, square_root, levermore_pomraning or sum", name));
}

void check(const TransportSpec& spec) {
    const auto expect = [](bool good, const std::string& what) {
        if (!good) {
            throw Error(ErrorKind::scenario, "transport: " + what);
        }
    };
    expect(spec.electrons || spec.protons, "found no species, expected electrons, protons or both");
    expect(spec.energy_from > 0 && spec.energy_to > spec.energy_from && std::isfinite(spec.energy_to),
           fmt::format("found energies from {:g} to {:g} erg, expected 0 < from < to", spec.energy_from,
                       spec.energy_to));
    expect(spec.bins_per_decade >= 2 && spec.bins_per_decade <= 200,
           fmt::format("bins_per_decade: found {:g}, expected 2 to 200", spec.bins_per_decade));
    expect(spec.headroom >= 1 && std::isfinite(spec.headroom),
           fmt::format("headroom: found {:g}, expected at least 1", spec.headroom));
    expect(spec.perpendicular > 0 && spec.perpendicular <= 1,
           fmt::format("perpendicular: found {:g}, expected above 0 and at most 1", spec.perpendicular));
    expect(spec.helium_fraction >= 0 && spec.helium_fraction < 1,
           fmt::format("helium_fraction: found {:g}, expected 0 to 1", spec.helium_fraction));
    expect(spec.nuclear_enhancement > 0,
           fmt::format("nuclear_enhancement: found {:g}, expected above 0", spec.nuclear_enhancement));
    expect(!spec.protons || !spec.proton_sources.empty(), "found no proton sources, expected at least one");
    expect(!spec.electrons || !spec.electron_sources.empty() || (spec.protons && spec.secondaries),
           "found neither electron sources nor secondaries of protons, expected electrons from somewhere");
}

SpeciesProblem make_species(const TransportSpec& spec,
                            const std::vector<SourceSpec>& sources,
                            const grid::Grid& grid,
                            double rest_energy,
                            double highest) {
    SpeciesProblem species;
    species.rest_energy = rest_energy;
    const double low = physics::momentum_times_c(spec.energy_from, rest_energy) / constants::speed_of_light;
    const double high = physics::momentum_times_c(highest, rest_energy) / constants::speed_of_light;
    const auto steps =
        static_cast<std::size_t>(std::ceil(std::log10(high / low) * spec.bins_per_decade * (1 - 1e-12)));
    species.step_ln = std::log(high / low) / static_cast<double>(steps);
    std::vector<double> energy;
    for (std::size_t n = 0; n <= steps; ++n) {
        const double p = low * std::exp(species.step_ln * static_cast<double>(n));
        species.momentum.push_back(p);
        energy.push_back(n == 0 ? spec.energy_from : particle_of_momentum(p, rest_energy).kinetic_energy);
    }
    std::reverse(species.momentum.begin(), species.momentum.end());
    species.basis = std::make_shared<const spectra::Basis>(std::move(energy));
    for (const SourceSpec& source : sources) {
        species.sources.push_back(source_term(source, grid, rest_energy, species.step_ln));
    }
    return species;
}

} // namespace

Flow wind_flow(const WindSpec& wind, const AxisymmetricMedia& media, const Mesh& mesh) {
    if (wind.kind == "none") {
        return {};
    }
    check_wind(wind, media);
    Flow flow;
    for (const Face& face : mesh.faces) {
        if (wind.kind == "file") {
            const auto& speed = face.axis == 0 ? media.velocity_r : media.velocity_z;
            flow.face.push_back(
                std::lerp(speed[face.first], speed[face.second],
                          face.first_distance / (face.first_distance + face.second_distance)));
        } else {
            flow.face.push_back(face.axis == 0 ? 0 : closed_wind(wind, face_point(media.grid, face).height));
        }
    }
    for (const BoundaryFace& face : mesh.boundary) {
        double speed = 0;
        if (wind.kind == "file") {
            speed = (face.axis == 0 ? media.velocity_r : media.velocity_z)[face.cell];
        } else if (face.axis != 0) {
            speed = closed_wind(wind, face_point(media.grid, face).height);
        }
        flow.boundary.push_back(face.orientation * speed);
    }
    return flow;
}

Problem prepare_problem(const TransportSpec& spec,
                        const grid::Grid& grid,
                        const media::Media& media,
                        const RunContext& context) {
    check(spec);
    Problem problem;
    problem.spec = spec;
    problem.limiter = limiter_of(spec.limiter);
    problem.media = axisymmetric_media(media, grid);
    const grid::Grid& rings = problem.media.grid;
    problem.halves = rings.mirrored ? 2 : 1;
    problem.hydrogen = hydrogen(problem.media);
    problem.mesh = make_mesh(rings);
    for (const std::string& side : problem.mesh.sides) {
        problem.sides.push_back({kind_of(side == "outer radius" ? spec.edge_r : spec.edge_z), 0});
    }
    problem.wind = wind_flow(spec.wind, problem.media, problem.mesh);
    const auto place = [&](const Point& at) {
        return place_at(problem.media, at.radius, at.height, spec.helium_fraction);
    };
    for (const Face& face : problem.mesh.faces) {
        problem.march_places.push_back(place(face_point(rings, face)));
    }
    for (const BoundaryFace& face : problem.mesh.boundary) {
        problem.march_places.push_back(place(face_point(rings, face)));
    }
    if (spec.perpendicular < 1) {
        if (problem.media.alignment.empty()) {
            throw Error(ErrorKind::scenario,
                        fmt::format("transport: perpendicular: found {:g} without an ordered field, expected "
                                    "one or the value 1",
                                    spec.perpendicular));
        }
        problem.corners = make_corners(rings);
        for (const Corner& corner : problem.corners) {
            problem.march_places.push_back(place({corner.radius, corner.height}));
        }
    }
    for (std::size_t cell = 0; cell < problem.mesh.cells(); ++cell) {
        problem.cell_places.push_back(
            place({middle(rings.x, cell % rings.nx()), middle(rings.z, cell / rings.nx())}));
    }
    const double highest = spec.headroom * spec.energy_to;
    const bool secondaries = spec.electrons && spec.protons && spec.secondaries;
    if (spec.protons) {
        problem.protons = make_species(spec, spec.proton_sources, rings, constants::proton_rest_energy,
                                       secondaries ? 10 * highest : highest);
        problem.protons.losses = proton_losses(problem.media, spec);
        problem.gamma = gamma_weights(spec, *problem.protons.basis, context);
    }
    if (spec.electrons) {
        problem.electrons =
            make_species(spec, spec.electron_sources, rings, constants::electron_rest_energy, highest);
        problem.electrons.losses = electron_losses(problem.media, spec);
    }
    if (secondaries) {
        problem.secondaries = secondary_matrix(spec, *problem.protons.basis,
                                               march_momenta(problem.electrons.momentum), context);
    }
    return problem;
}

} // namespace aureole::transport
