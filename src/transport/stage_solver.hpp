#pragma once

#include "coloured_matrix.hpp"
#include "frontal.hpp"

#include "aureole/base/pool.hpp"
#include "aureole/transport/march.hpp"

#include <atomic>
#include <cstddef>
#include <optional>
#include <span>
#include <vector>

namespace aureole::transport {

/// One momentum of a march. Unknowns are the densities of all kinds and, behind them, their age integrals.
struct Stage {
    double momentum = 0;
    MomentumData data;
    std::vector<double> loss;   ///< [cells] V b
    double implicit = 0;        ///< weight c of the system V b psi + c A psi
    SpatialOperator op;         ///< A, limited where there is a limiter
    SpatialCoefficients space;  ///< that A was made from
    std::vector<double> matrix; ///< of the system
    Factor factor;
    bool factored = false;
    LimitedFaces limited;
    bool negative = false; ///< limiter and response were given up, since densities came out below 0
    std::vector<std::vector<double>> density; ///< [unknowns][cells]
    std::vector<std::vector<double>> leak;    ///< [unknowns][cells] A psi
};

/// Densities are negative below minus this part of the largest.
inline constexpr double negative_part = 1e-12;

/// V b of a stage from its losses and divergence. Throws MomentumGain.
void read_losses(const Mesh& mesh, Stage& stage);

/// Solves the systems of a march.
class StageSolver {
  public:
    StageSolver(const MarchSetup& march_setup, const RunContext& run_context);

    /// Matrix and factor of a stage without limiter. Several stages may be prepared at once.
    void prepare(Stage& stage, double implicit);
    /// Solves for the densities; base[unknown] is what the right-hand side has beside c V Q.
    /// guess      a density of all kinds to start limiter and response from, or empty
    void solve(Stage& stage, std::span<const std::vector<double>> base, std::span<const double> guess);

    bool nonlinear() const { return setup.limiter != Limiter::none || setup.respond; }
    std::size_t unknowns() const { return setup.kinds * (setup.ages ? 2 : 1); }

    const MarchSetup& setup;
    const RunContext& context;
    Pattern pattern;
    Elimination plan;
    std::atomic<std::size_t> factorizations{0}, solves{0}, pivoted{0};
    std::vector<NotConverged> not_converged;
    int most_iterations = 0;
    double worst_residual = 0;
    double largest_change = 0;

  private:
    /// What one momentum's iteration works with.
    struct Iteration {
        std::vector<double> rhs, density;
        int round = 0;
        NotConverged last;
        std::vector<double> best; ///< density that a fixed-point iteration changed least
        NotConverged of_best;
    };
    void make_matrix(Stage& stage);
    void set_coefficients(Stage& stage, std::span<const double> density);
    /// rest = rhs - (V b + c A) density with the coefficients of that density
    void find_rest(Stage& stage,
                   const Iteration& iteration,
                   std::span<const double> density,
                   std::vector<double>& rest);
    void find_density(Stage& stage, std::span<const std::vector<double>> base, std::span<const double> guess);
    /// Ends early where a change is more than `contraction` of the one before.
    bool fixed_points(Stage& stage, Iteration& iteration, int rounds, double contraction);
    bool newton(Stage& stage, Iteration& iteration);
    void find_derivatives(Stage& stage, const Iteration& iteration, std::span<const double> rest);
    bool factorize_jacobian(double blend);
    bool correction(std::span<const double> rest, std::span<const double> density, std::vector<double>& step);
    /// Densities x and leaks A x of several right-hand sides.
    void solve_systems(Stage& stage,
                       std::span<const std::vector<double>> rhs,
                       std::span<std::vector<double>> x,
                       std::span<std::vector<double>> leak);
    double residual(const Stage& stage,
                    std::span<const double> rhs,
                    std::span<const double> x,
                    std::span<double> leak,
                    std::span<double> rest) const;
    void solve_unknowns(Stage& stage, std::span<const std::vector<double>> base, std::size_t from);

    std::optional<ColouredMatrix> jacobian_;
    std::vector<std::uint32_t> linear_entry_; ///< [entries of pattern] the same entry of the Jacobian
    std::vector<double> linear_;              ///< [entries of pattern] matrix with coefficients held fixed
    std::vector<double> perturbed_, perturbed_rest_, leak_, blended_;
    std::vector<std::vector<double>> step_;
    Factor jacobian_factor_;
    Pool<FrontalScratch> spare_{[] { return FrontalScratch{}; }};
};

} // namespace aureole::transport
