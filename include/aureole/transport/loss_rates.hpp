#pragma once

#include "aureole/transport/axisymmetric_media.hpp"
#include "aureole/transport/particle.hpp"
#include "aureole/transport/spec.hpp"

#include <functional>
#include <span>
#include <string>
#include <vector>

namespace aureole::transport {

/// Writes something of a particle in every cell.
using CellFunction = std::function<void(const Particle&, std::span<double>)>;

/// Continuous losses of one species by process, each a sum of densities of cells times rates of momentum, and
/// its catastrophic losses. May be evaluated from several threads.
struct LossRates {
    std::vector<std::string> names;
    std::vector<CellFunction> process; ///< [names] writes -dE/dt, erg s-1
    CellFunction catastrophic;         ///< writes s-1; empty: none
};

/// Electrons and positrons, from the media that emit: "synchrotron" in the rms of the whole field, "inverse
/// compton: <name>" on every radiation field (black bodies with the full Klein-Nishina factor, tabulated ones
/// node by node as triangles in energy), "bremsstrahlung: hi", ": h2", ": hii", "ionisation" (hi, h2),
/// "coulomb" (free electrons, or H+ where they are not given). Processes without a medium are left out.
LossRates electron_losses(const AxisymmetricMedia& media, const TransportSpec& spec);

/// Protons: "ionisation", "coulomb" (10^4 K where no temperature is given) and, unless the spec wants them
/// catastrophic, "pions" on all hydrogen, helium included.
LossRates proton_losses(const AxisymmetricMedia& media, const TransportSpec& spec);

/// -dp/dt [processes][cells] g cm s-2.
void momentum_losses(const LossRates& losses,
                     const Particle& particle,
                     std::size_t cells,
                     std::vector<std::vector<double>>& out);

} // namespace aureole::transport
