#include "curves.hpp"

#include "aureole/base/quadrature.hpp"

#include <algorithm>
#include <array>
#include <cmath>
#include <numbers>

namespace aureole::profiles {

namespace {

constexpr std::size_t order = 10;

Eigen::Index index(std::size_t i) {
    return static_cast<Eigen::Index>(i);
}

/// Chebyshev nodes of the first kind on [-1, 1] with their barycentric weights, and the integrals of their
/// cardinal functions.
struct PanelRule {
    std::array<double, order> node{}, weight{}, integral{};
    QuadratureRule part = gauss_legendre(order / 2); ///< exact for the panel's polynomials

    PanelRule() {
        for (std::size_t i = 0; i < order; ++i) {
            const double angle =
                std::numbers::pi * (2 * static_cast<double>(i) + 1) / (2 * static_cast<double>(order));
            node[i] = -std::cos(angle);
            weight[i] = (i % 2 == 0 ? 1 : -1) * std::sin(angle);
        }
        for (std::size_t q = 0; q < part.node.size(); ++q) {
            const auto at = cardinals(part.node[q]);
            for (std::size_t i = 0; i < order; ++i) {
                integral[i] += part.weight[q] * at[i];
            }
        }
    }

    std::array<double, order> cardinals(double x) const {
        std::array<double, order> value{};
        double sum = 0;
        for (std::size_t i = 0; i < order; ++i) {
            if (x == node[i]) {
                value.fill(0);
                value[i] = 1;
                return value;
            }
            value[i] = weight[i] / (x - node[i]);
            sum += value[i];
        }
        for (double& one : value) {
            one /= sum;
        }
        return value;
    }
};

std::vector<double> panel_edges(const BinGeometry& geometry, double end) {
    std::vector<double> edges{0};
    while (edges.back() < end) {
        const double at = edges.back();
        const double near =
            geometry.beam > 0 ? geometry.beam : 0.5 * geometry.least * geometry.disc.sin_inclination;
        // Nine widths up a Gaussian has gone, and an exponential that has not gone with it is all there is.
        const double far = at > 9 * geometry.beam ? 0.5 * at : 0;
        edges.push_back(at + std::max(near, far));
    }
    return edges;
}

/// One row of the matrix under construction.
class RowBuilder {
  public:
    RowBuilder(const PanelRule& rule, const std::vector<double>& edges, Eigen::Ref<Eigen::VectorXd> row)
        : rule_(rule), edges_(edges), row_(row) {}

    void add_point(double z, double weight) {
        const std::size_t panel = panel_at(std::abs(z));
        add(panel, rule_.cardinals(inside(panel, std::abs(z))), weight);
    }

    /// weight x integral from `from` to `to`
    void add_interval(double from, double to, double weight) {
        if (from < 0 && to > 0) {
            add_above(0, -from, weight);
            add_above(0, to, weight);
        } else {
            add_above(std::min(std::abs(from), std::abs(to)), std::max(std::abs(from), std::abs(to)), weight);
        }
    }

  private:
    std::size_t panel_at(double z) const {
        const auto after = std::upper_bound(edges_.begin(), edges_.end() - 1, z);
        return static_cast<std::size_t>(after - edges_.begin()) - 1;
    }
    double half(std::size_t panel) const { return 0.5 * (edges_[panel + 1] - edges_[panel]); }
    double inside(std::size_t panel, double z) const { return (z - edges_[panel]) / half(panel) - 1; }

    void add(std::size_t panel, const std::array<double, order>& values, double weight) {
        for (std::size_t i = 0; i < order; ++i) {
            row_(index(panel * order + i)) += weight * values[i];
        }
    }

    void add_above(double from, double to, double weight) {
        for (std::size_t panel = panel_at(from); panel + 1 < edges_.size() && edges_[panel] < to; ++panel) {
            const double low = std::max(from, edges_[panel]);
            const double high = std::min(to, edges_[panel + 1]);
            if (low == edges_[panel] && high == edges_[panel + 1]) {
                add(panel, rule_.integral, weight * half(panel));
                continue;
            }
            for (std::size_t q = 0; q < rule_.part.node.size(); ++q) {
                const double z = 0.5 * (low + high) + 0.5 * (high - low) * rule_.part.node[q];
                add(panel, rule_.cardinals(inside(panel, z)),
                    weight * 0.5 * (high - low) * rule_.part.weight[q]);
            }
        }
    }

    const PanelRule& rule_;
    const std::vector<double>& edges_;
    Eigen::Ref<Eigen::VectorXd> row_;
};

/// Weights of value and slope (by t, nodes one apart) of the nodes at -1, 0, 1, 2, and the derivatives of
/// these weights.
struct HermiteWeights {
    std::array<double, 4> value{}, slope{}, value_by_t{}, slope_by_t{};
};

HermiteWeights hermite(double t) {
    HermiteWeights made;
    for (int i = 0; i < 4; ++i) {
        const double at = i - 1;
        double cardinal = 1;
        double by_t = 0;
        double own = 0; // slope of the cardinal function at its node
        for (int j = 0; j < 4; ++j) {
            if (j == i) {
                continue;
            }
            const double gap = i - j;
            const double factor = (t - (j - 1)) / gap;
            by_t = by_t * factor + cardinal / gap;
            cardinal *= factor;
            own += 1 / gap;
        }
        const auto k = static_cast<std::size_t>(i);
        const double square = cardinal * cardinal;
        const double square_by_t = 2 * cardinal * by_t;
        const double line = 1 - 2 * own * (t - at);
        made.value[k] = square * line;
        made.value_by_t[k] = square_by_t * line - 2 * own * square;
        made.slope[k] = square * (t - at);
        made.slope_by_t[k] = square_by_t * (t - at) + square;
    }
    return made;
}

struct Place {
    long node; ///< the one below
    double t;  ///< distance from it in steps, [0, 1)
};

/// Rounding must not make a node miss itself.
Place place_of(double ln_h) {
    const double steps = ln_h / CurveTable::step;
    const double nearest = std::round(steps);
    if (std::abs(steps - nearest) < 1e-12) {
        return {static_cast<long>(nearest), 0};
    }
    const double below = std::floor(steps);
    return {static_cast<long>(below), steps - below};
}

} // namespace

BinOperator bin_operator(const BinGeometry& geometry) {
    const PanelRule rule;
    const DiscKernel& disc = geometry.disc;
    double reach = 0;
    for (const double offset : disc.offset) {
        reach = std::max(reach, std::abs(offset));
    }
    double end = 0;
    for (std::size_t b = 0; b < geometry.z.size(); ++b) {
        end = std::max(end, std::abs(geometry.z[b]) + 0.5 * geometry.width[b] + reach);
    }
    const auto edges = panel_edges(geometry, end * (1 + 1e-9) + geometry.least);
    BinOperator made;
    for (std::size_t panel = 0; panel + 1 < edges.size(); ++panel) {
        const double half = 0.5 * (edges[panel + 1] - edges[panel]);
        for (const double node : rule.node) {
            made.grid.push_back(edges[panel] + half * (1 + node));
        }
    }
    // Built a bin to a column, which lies together in memory.
    Eigen::MatrixXd columns = Eigen::MatrixXd::Zero(index(made.grid.size()), index(geometry.z.size()));
    for (std::size_t b = 0; b < geometry.z.size(); ++b) {
        RowBuilder row(rule, edges, columns.col(index(b)));
        const double width = geometry.width[b];
        for (std::size_t k = 0; k < disc.offset.size(); ++k) {
            const double z = geometry.z[b] - disc.offset[k];
            const double weight = disc.weight[k] / disc.sin_inclination;
            if (width > 0) {
                row.add_interval(z - 0.5 * width, z + 0.5 * width, weight / width);
            } else {
                row.add_point(z, weight);
            }
        }
    }
    made.weight = columns.transpose();
    return made;
}

CurveTable::CurveTable(Model single,
                       std::shared_ptr<const BinGeometry> geometry,
                       std::shared_ptr<const BinOperator> op)
    : single_(kind(single)), geometry_(std::move(geometry)), op_(std::move(op)) {}

const CurveTable::Pair& CurveTable::node(long k) {
    const auto found = nodes_.find(k);
    if (found != nodes_.end()) {
        return found->second;
    }
    const double h = std::exp(step * static_cast<double>(k));
    const BinGeometry& geometry = *geometry_;
    const std::size_t points = op_ ? op_->grid.size() : geometry.z.size();
    Eigen::MatrixXd sampled(index(points), 2);
    for (std::size_t p = 0; p < points; ++p) {
        const Shape shape =
            op_ ? convolved(single_, h * geometry.disc.sin_inclination, geometry.beam, op_->grid[p])
                : bin_mean(single_, h, geometry.beam, geometry.z[p], geometry.width[p], geometry.disc);
        sampled(index(p), 0) = shape.value;
        sampled(index(p), 1) = shape.by_ln_h;
    }
    if (op_) {
        sampled = (op_->weight * sampled).eval();
    }
    return nodes_.emplace(k, Pair{sampled.col(0), sampled.col(1)}).first->second;
}

Eigen::VectorXd CurveTable::value(double ln_h) {
    const auto [k, t] = place_of(ln_h);
    if (t == 0) {
        return node(k).value;
    }
    const HermiteWeights weights = hermite(t);
    Eigen::VectorXd sum = Eigen::VectorXd::Zero(index(geometry_->z.size()));
    for (std::size_t i = 0; i < 4; ++i) {
        const Pair& at = node(k - 1 + static_cast<long>(i));
        sum += weights.value[i] * at.value + (step * weights.slope[i]) * at.by_ln_h;
    }
    return sum;
}

CurveTable::Pair CurveTable::value_and_slope(double ln_h) {
    const auto [k, t] = place_of(ln_h);
    if (t == 0) {
        return node(k);
    }
    const HermiteWeights weights = hermite(t);
    const Eigen::Index bins = index(geometry_->z.size());
    Pair sum{Eigen::VectorXd::Zero(bins), Eigen::VectorXd::Zero(bins)};
    for (std::size_t i = 0; i < 4; ++i) {
        const Pair& at = node(k - 1 + static_cast<long>(i));
        sum.value += weights.value[i] * at.value + (step * weights.slope[i]) * at.by_ln_h;
        sum.by_ln_h += (weights.value_by_t[i] / step) * at.value + weights.slope_by_t[i] * at.by_ln_h;
    }
    return sum;
}

CurveTable& CurveCache::table(Model single, const BinGeometry& geometry) {
    auto found = std::find_if(entries_.begin(), entries_.end(),
                              [&](const auto& entry) { return *entry->geometry == geometry; });
    if (found == entries_.end()) {
        auto entry = std::make_unique<Entry>();
        entry->geometry = std::make_shared<const BinGeometry>(geometry);
        if (!geometry.disc.offset.empty()) {
            entry->op = std::make_shared<const BinOperator>(bin_operator(geometry));
        }
        entries_.push_back(std::move(entry));
        found = entries_.end() - 1;
    }
    Entry& entry = **found;
    return entry.tables.try_emplace(kind(single), kind(single), entry.geometry, entry.op).first->second;
}

} // namespace aureole::profiles
