#pragma once

#include "aureole/base/error.hpp"
#include "aureole/base/run_context.hpp"
#include "aureole/transport/budget.hpp"
#include "aureole/transport/limiter.hpp"
#include "aureole/transport/operator.hpp"

#include <cstddef>
#include <functional>
#include <span>
#include <string>
#include <vector>

namespace aureole::transport {

/// Everything that the march asks about one momentum.
struct MomentumData {
    double kinetic_energy = 0;               ///< erg
    SpatialCoefficients space;               ///< speed must be > 0 for marshak sides and for limiters
    std::vector<std::vector<double>> losses; ///< [processes][cells] -dp/dt by each, g cm s-2, >= 0
    std::vector<double> divergence; ///< [cells] div w, s-1, of the adiabatic loss p/3 div w; empty: none
    std::vector<std::vector<double>> sources; ///< [kinds][cells] Q, cm-3 s-1 (g cm s-1)-1
    std::size_t held_back = 0; ///< cells in which `respond` kept particles from gaining momentum
};

struct MarchSetup {
    const Mesh& mesh;
    std::span<const Corner> corners; ///< of the mesh, where coefficients have an aligned part; else empty
    std::vector<Boundary> sides;     ///< [mesh.sides]
    std::vector<double> momentum;    ///< [nodes] g cm s-1, descending, at least 2
    std::size_t kinds = 1;           ///< of particles that differ only in their sources
    Limiter limiter = Limiter::none; ///< for all kinds together
    /// Of limiter and response: largest relative change of the density in the last iteration
    double limiter_tolerance = 1e-8;
    int limiter_iterations = 200; ///< at one momentum
    bool ages = false;            ///< also the mean ages
    /// Called from the calling thread, once for each of the nodes and of the momenta in between (see
    /// march_momenta), descending. The data may hold what an earlier call put there: overwrite all of it.
    std::function<void(double momentum, MomentumData& data)> evaluate;
    /// Where the medium depends on the particles: overwrites `space`, `divergence` and `held_back` for a
    /// density > 0 [cells] of all kinds together, at a momentum that `evaluate` was called for, of whose
    /// `space` the first guess is made. A cell of the density may only matter within one cell around it.
    /// Called many times, from one thread at a time and never together with `evaluate`. Empty: no response.
    std::function<void(double momentum, std::span<const double> density, MomentumData& data)> respond = {};
};

/// Where the iteration for limiter and response did not reach its tolerance.
struct NotConverged {
    double momentum = 0; ///< g cm s-1
    std::size_t cell = 0;
    double change = 0; ///< relative, of the last iteration
};

struct MarchResult {
    std::vector<std::vector<double>>
        density;                          ///< [kinds][nodes x cells], cell fastest: psi, cm-3 (g cm s-1)-1
    std::vector<std::vector<double>> age; ///< [kinds][nodes x cells] s; empty unless asked for
    std::vector<float> limited; ///< [nodes x cells] smallest L on the faces of a cell; empty without limiter
    std::vector<Budget> budget; ///< [kinds]
    std::vector<NotConverged> not_converged;
    double largest_change = 0;    ///< relative, of any density in the last iteration at any momentum
    std::size_t held_back = 0;    ///< cells and momenta
    std::size_t redone_steps = 0; ///< steps repeated with the positive scheme
    std::size_t factorizations = 0, solves = 0; ///< of linear systems, a solution of all kinds being one
    std::size_t pivoted = 0;                    ///< linear systems that needed a factorisation with pivoting
    int most_limiter_iterations = 0;
    double worst_residual = 0; ///< largest relative residual of a linear system
};

/// Particles gain momentum somewhere: b + (p/3) div w < 0, and marching from high to low momenta fails.
class MomentumGain : public Error {
  public:
    MomentumGain(std::size_t cell_index, double at_momentum, double loss_rate);
    std::size_t cell;
    double momentum;  ///< g cm s-1
    double loss_rate; ///< g cm s-2, < 0
};

/// Steady spectra psi(p) = 4 pi p^2 f of  -d(b psi)/dp = Q + div(K grad psi - w psi) - psi/tau,
/// b = sum of losses + (p/3) div w, with nothing above the first momentum.
/// Method     TR-BDF2 in ln p (Bank et al. 1985, IEEE Trans. El. Dev. 32, 1992), two solutions of one linear
///            system per step; second order, L-stable: where b = 0 or small, psi is the local balance of
///            source and escape. Two backward Euler steps, fitted to p^-2, replace the first step, which so
///            cannot ring, and any step after which a density is below -1e-12 of the largest. They keep
///            densities positive unless the coefficients have an aligned part. What is left below 0 is not
///            cut off, since the budget would break.
/// Top        psi = 0 at the first node if b > 0 anywhere there, else the local balance. Spectra within a
///            factor of 10 below it miss what comes from above.
/// Systems    direct, without pivoting, to a relative residual of 1e-12; with pivoting (KLU) where that
///            fails.
/// Limiter    and response: Newton's method in ln psi, damped as by Deuflhard (2011, Newton Methods for
///            Nonlinear Problems, ch. 3), from the densities before, extrapolated; the matrix by differences
///            in ln psi, cells that no equation shares at once. Where that stalls, fixed-point iterations
///            with Anderson acceleration. The sum of all kinds counts.
/// Ages       mean age T/psi, where T has the source psi; 0 where psi = 0.
/// Throws     MomentumGain; Error(runtime) where a system is singular (nothing is lost or escapes).
/// Accuracy   see the tests "[transport][order]".
MarchResult march(const MarchSetup& setup, const RunContext& context);

/// The momenta at which a march asks for data: every node and, between two nodes, one at a fraction
/// 2 - sqrt(2) of the step in ln p.
std::vector<double> march_momenta(std::span<const double> nodes);

/// The march with ages: [kinds][nodes x cells] s.
std::vector<std::vector<double>> mean_age(MarchSetup setup, const RunContext& context);

} // namespace aureole::transport
