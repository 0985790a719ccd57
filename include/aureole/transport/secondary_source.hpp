#pragma once

#include "aureole/base/run_context.hpp"
#include "aureole/spectra/basis.hpp"
#include "aureole/transport/spec.hpp"

#include <functional>
#include <span>
#include <vector>

namespace aureole::transport {

/// Weights w with  int g(T) N(T) dT = sum_j w_j M_j,  M = N T^2.5 [cm-3 erg^1.5] at the nodes of a basis,
/// cubic in ln T between them; `points` Gauss-Legendre points an interval, from `from` [erg] on.
std::vector<double> integral_weights(const spectra::Basis& basis,
                                     const std::function<double(double)>& g,
                                     int points = 4,
                                     double from = 0);

/// Secondary electrons and positrons per hydrogen nucleus and second, as sums over proton spectra.
struct SecondaryMatrix {
    std::vector<double> momentum; ///< [leptons] g cm s-1
    std::size_t protons = 0;      ///< nodes of the proton basis
    /// [leptons][protons] Q/n_H [cm3 s-1 (g cm s-1)-1 per unit M of the node]
    std::vector<double> electrons, positrons;
};

/// Q(p) = n_H f (dE/dp) int N_p(T) v (d sigma/dE)(E, T) dT, f = nuclear_enhancement, on
/// `lepton_momentum` in any order.
/// Method     3 Gauss-Legendre points in ln T an interval, a physics::SecondarySpectrum each: 4e-5 of Q
/// Cost       0.1 ms for each point, 0.3 us for each point and momentum; points in parallel
SecondaryMatrix secondary_matrix(const TransportSpec& spec,
                                 const spectra::Basis& protons,
                                 std::span<const double> lepton_momentum,
                                 const RunContext& context);

/// Power in photons of 0.1 to 100 GeV per hydrogen nucleus, as weights of M of protons [erg s-1 cm3 ...],
/// nuclear_enhancement included. To 4e-6 of the largest weight.
std::vector<double>
gamma_weights(const TransportSpec& spec, const spectra::Basis& protons, const RunContext& context);

} // namespace aureole::transport
