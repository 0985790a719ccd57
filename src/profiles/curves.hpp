#pragma once

#include "aureole/profiles/disc.hpp"
#include "aureole/profiles/models.hpp"

#include <Eigen/Core>

#include <map>
#include <memory>
#include <vector>

namespace aureole::profiles {

/// Where and through what a component is seen, lengths in any one unit.
struct BinGeometry {
    std::vector<double> z, width; ///< [bins]
    double beam = 0;              ///< Gaussian width
    double least = 0;             ///< smallest scale height that will be asked for, > 0
    DiscKernel disc;
    bool operator==(const BinGeometry&) const = default;
};

/// Kernel and bins as one matrix: curve = weight x (convolved model at the grid's heights). The model is even
/// in z, so the grid covers heights above the plane. It consists of panels of 10 Chebyshev nodes, as long as
/// the beam near the plane (without a beam: half of `least`) and growing by half of their height beyond; the
/// polynomials through the nodes are integrated over the shifted bins exactly.
/// Accuracy  1e-9 of the peak.
struct BinOperator {
    std::vector<double> grid; ///< heights >= 0
    Eigen::MatrixXd weight;   ///< [bins x grid]
};
BinOperator bin_operator(const BinGeometry& geometry);

/// Unit-amplitude curves of one component in all bins of a geometry, as a function of ln h. Tabulated at
/// multiples of `step` when first asked for there; between them the polynomial of degree 7 through value and
/// slope of four neighbours. Not for use by two threads at once; what it returns does not depend on what was
/// asked before.
/// Accuracy  2e-9 of the peak of the curve, slope 1e-7.
class CurveTable {
  public:
    static constexpr double step = 0.08;
    /// op   of the geometry; null where the kernel is empty
    CurveTable(Model single,
               std::shared_ptr<const BinGeometry> geometry,
               std::shared_ptr<const BinOperator> op);
    Eigen::VectorXd value(double ln_h);
    /// value, d value / d ln h
    struct Pair {
        Eigen::VectorXd value, by_ln_h;
    };
    Pair value_and_slope(double ln_h);

  private:
    const Pair& node(long k);
    Model single_;
    std::shared_ptr<const BinGeometry> geometry_;
    std::shared_ptr<const BinOperator> op_;
    std::map<long, Pair> nodes_;
};

/// Tables shared by fits with the same geometry; for one thread.
class CurveCache {
  public:
    CurveTable& table(Model single, const BinGeometry& geometry);

  private:
    struct Entry {
        std::shared_ptr<const BinGeometry> geometry;
        std::shared_ptr<const BinOperator> op;
        std::map<Model, CurveTable> tables;
    };
    std::vector<std::unique_ptr<Entry>> entries_;
};

} // namespace aureole::profiles
