#include "aureole/transport/loss_rates.hpp"

#include "aureole/physics/kinematics.hpp"
#include "aureole/physics/losses.hpp"

#include <algorithm>
#include <array>
#include <cmath>
#include <memory>

namespace aureole::transport {
namespace {

using constants::electronvolt;

/// Mean excitation energy of H2 per nucleus of hydrogen (ICRU Report 37, from memory).
constexpr physics::ExcitationEnergies molecular{.hydrogen = 19.2 * electronvolt,
                                                .helium = 41.8 * electronvolt};

bool any(const std::vector<double>& density) {
    return std::any_of(density.begin(), density.end(), [](double n) { return n > 0; });
}

/// density[cell] x rate(T).
CellFunction product(std::vector<double> density, std::function<double(double)> rate) {
    return [density = std::move(density), rate = std::move(rate)](const Particle& particle,
                                                                  std::span<double> out) {
        const double factor = rate(particle.kinetic_energy);
        for (std::size_t cell = 0; cell < out.size(); ++cell) {
            out[cell] = density[cell] * factor;
        }
    };
}

void add(LossRates& losses, std::string name, CellFunction process) {
    losses.names.push_back(std::move(name));
    losses.process.push_back(std::move(process));
}

CellFunction blackbody(const RingRadiation& field,
                       std::size_t cells,
                       std::shared_ptr<const physics::BlackbodyLoss> table) {
    std::vector<double> density =
        field.energy_density.empty() ? std::vector<double>(cells, 0.0) : field.energy_density;
    for (double& value : density) {
        value += field.uniform_density;
    }
    return product(std::move(density), [table, temperature = field.temperature](double t) {
        return table->loss(t, temperature, 1);
    });
}

/// Loss on one node of a tabulated spectrum: photons of density 1 there, falling straight to 0 at both
/// neighbours.
double node_loss(double kinetic_energy, std::span<const double> energy, std::size_t node) {
    const std::size_t first = node == 0 ? 0 : node - 1;
    const std::size_t last = std::min(node + 1, energy.size() - 1);
    std::array<double, 3> density{};
    density[node - first] = 1;
    const std::size_t count = last - first + 1;
    return physics::inverse_compton_tabulated_loss(kinetic_energy, energy.subspan(first, count),
                                                   std::span(density).first(count));
}

CellFunction tabulated(const RingRadiation& field) {
    return [energy = field.photon_energy, density = field.photon_density](const Particle& particle,
                                                                          std::span<double> out) {
        std::vector<double> loss;
        for (std::size_t node = 0; node < energy.size(); ++node) {
            loss.push_back(node_loss(particle.kinetic_energy, energy, node));
        }
        for (std::size_t cell = 0; cell < out.size(); ++cell) {
            double sum = 0;
            for (std::size_t node = 0; node < loss.size(); ++node) {
                sum += loss[node] * density[cell * loss.size() + node];
            }
            out[cell] = sum;
        }
    };
}

using GasLoss = double (*)(double, double, double, const physics::ExcitationEnergies&);

CellFunction ionisation(const AxisymmetricMedia& media, GasLoss loss, double helium) {
    const std::size_t cells = media.grid.stored_cells();
    auto atomic = media.hi.empty() ? std::vector<double>(cells, 0.0) : media.hi;
    auto molecules = media.h2.empty() ? std::vector<double>(cells, 0.0) : media.h2;
    return [atomic = std::move(atomic), molecules = std::move(molecules), loss,
            helium](const Particle& particle, std::span<double> out) {
        const double in_atoms = loss(particle.kinetic_energy, 1, helium, {});
        const double in_molecules = loss(particle.kinetic_energy, 1, helium, molecular);
        for (std::size_t cell = 0; cell < out.size(); ++cell) {
            out[cell] = atomic[cell] * in_atoms + molecules[cell] * in_molecules;
        }
    };
}

const std::vector<double>& free_electrons(const AxisymmetricMedia& media) {
    return any(media.electrons) ? media.electrons : media.hii;
}

/// n (L - ln n) c with c and L of momentum alone.
CellFunction electron_coulomb(const std::vector<double>& density) {
    std::vector<double> with_logarithm;
    for (const double n : density) {
        with_logarithm.push_back(n > 0 ? n * std::log(n) : 0.0);
    }
    return [density, with_logarithm = std::move(with_logarithm)](const Particle& particle,
                                                                 std::span<double> out) {
        const double at_one = physics::electron_coulomb_loss(particle.kinetic_energy, 1);
        const double per_logarithm =
            at_one - physics::electron_coulomb_loss(particle.kinetic_energy, std::exp(1.0)) / std::exp(1.0);
        for (std::size_t cell = 0; cell < out.size(); ++cell) {
            out[cell] = density[cell] * at_one - with_logarithm[cell] * per_logarithm;
        }
    };
}

/// proton_coulomb_loss(), whose logarithm falls with density as -(ln n)/2.
CellFunction proton_coulomb(const std::vector<double>& density, const std::vector<double>& temperature) {
    struct Cell {
        double density, half_logarithm, cube;
    };
    std::vector<Cell> cells;
    for (std::size_t cell = 0; cell < density.size(); ++cell) {
        const double n = density[cell];
        const double kelvin = temperature.empty() ? 1e4 : temperature[cell];
        cells.push_back({n, n > 0 ? 0.5 * std::log(n) : 0.0, physics::electron_thermal_cube(kelvin)});
    }
    return [cells = std::move(cells)](const Particle& particle, std::span<double> out) {
        const double t = particle.kinetic_energy;
        const double beta = particle.speed / constants::speed_of_light;
        const double cube = beta * beta * beta;
        const double logarithm = physics::proton_coulomb_logarithm(t, 1);
        const double factor = physics::proton_coulomb_loss(t, 1, 0) / logarithm * cube; // of cold electrons
        for (std::size_t cell = 0; cell < out.size(); ++cell) {
            const Cell& here = cells[cell];
            out[cell] =
                here.density * std::max(1.0, logarithm - here.half_logarithm) * factor / (here.cube + cube);
        }
    };
}

} // namespace

LossRates electron_losses(const AxisymmetricMedia& media, const TransportSpec& spec) {
    const std::size_t cells = media.grid.stored_cells();
    LossRates losses;
    if (any(media.field)) {
        auto square = media.field;
        for (double& value : square) {
            value *= value;
        }
        add(losses, "synchrotron",
            product(std::move(square), [](double t) { return physics::synchrotron_loss(t, 1); }));
    }
    const auto black = std::make_shared<const physics::BlackbodyLoss>();
    for (const RingRadiation& field : media.radiation) {
        add(losses, "inverse compton: " + field.name,
            field.temperature > 0 ? blackbody(field, cells, black) : tabulated(field));
    }
    const auto bremsstrahlung = std::make_shared<const physics::BremsstrahlungLoss>(spec.helium_fraction);
    const auto neutral = [bremsstrahlung](double t) { return bremsstrahlung->neutral(t, 1); };
    if (any(media.hi)) {
        add(losses, "bremsstrahlung: hi", product(media.hi, neutral));
    }
    if (any(media.h2)) {
        add(losses, "bremsstrahlung: h2", product(media.h2, neutral));
    }
    if (any(media.hii)) {
        add(losses, "bremsstrahlung: hii",
            product(media.hii, [bremsstrahlung](double t) { return bremsstrahlung->ionised(t, 1); }));
    }
    if (any(media.hi) || any(media.h2)) {
        add(losses, "ionisation", ionisation(media, physics::electron_ionisation_loss, spec.helium_fraction));
    }
    if (any(free_electrons(media))) {
        add(losses, "coulomb", electron_coulomb(free_electrons(media)));
    }
    return losses;
}

LossRates proton_losses(const AxisymmetricMedia& media, const TransportSpec& spec) {
    LossRates losses;
    if (any(media.hi) || any(media.h2)) {
        add(losses, "ionisation", ionisation(media, physics::proton_ionisation_loss, spec.helium_fraction));
    }
    if (any(free_electrons(media))) {
        add(losses, "coulomb", proton_coulomb(free_electrons(media), media.temperature));
    }
    auto nuclei = hydrogen(media);
    if (!any(nuclei)) {
        return losses;
    }
    if (spec.pion_loss_is_catastrophic) {
        losses.catastrophic =
            product(std::move(nuclei), [model = spec.pion_model, helium = spec.helium_fraction](double t) {
                return physics::inelastic_collision_rate(model, t, 1, helium);
            });
    } else {
        add(losses, "pions",
            product(std::move(nuclei), [model = spec.pion_model, helium = spec.helium_fraction](double t) {
                return physics::pion_loss(model, t, 1, helium);
            }));
    }
    return losses;
}

void momentum_losses(const LossRates& losses,
                     const Particle& particle,
                     std::size_t cells,
                     std::vector<std::vector<double>>& out) {
    out.resize(losses.process.size());
    for (std::size_t process = 0; process < out.size(); ++process) {
        out[process].resize(cells);
        losses.process[process](particle, out[process]);
        for (double& value : out[process]) {
            value /= particle.speed;
        }
    }
}

} // namespace aureole::transport
