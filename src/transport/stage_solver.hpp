#pragma once

#include "frontal.hpp"

#include "aureole/base/pool.hpp"
#include "aureole/transport/march.hpp"

#include <atomic>
#include <cstddef>
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
    std::vector<double> matrix; ///< of the system
    Factor factor;
    bool factored = false;
    LimitedFaces limited;
    std::vector<std::vector<double>> density; ///< [unknowns][cells]
    std::vector<std::vector<double>> leak;    ///< [unknowns][cells] A psi
};

/// Solves the systems of a march.
class StageSolver {
  public:
    StageSolver(const MarchSetup& march_setup, const RunContext& run_context);

    /// Matrix and factor of a stage without limiter. Several stages may be prepared at once.
    void prepare(Stage& stage, double implicit);
    /// Solves for the densities; base[unknown] is what the right-hand side has beside c V Q.
    /// shape      a density to start the limiter from, or empty
    void solve(Stage& stage, std::span<const std::vector<double>> base, std::span<const double> shape);

    std::size_t unknowns() const { return setup.kinds * (setup.ages ? 2 : 1); }

    const MarchSetup& setup;
    const RunContext& context;
    Pattern pattern;
    Elimination plan;
    std::atomic<std::size_t> factorizations{0}, pivoted{0};
    std::vector<NotConverged> not_converged;
    int most_iterations = 0;
    double worst_residual = 0;

  private:
    void make_matrix(Stage& stage, const SpatialCoefficients& coefficients);
    void find_limit(Stage& stage, std::span<const double> base, std::span<const double> shape);
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

    Pool<FrontalScratch> spare_{[] { return FrontalScratch{}; }};
};

} // namespace aureole::transport
