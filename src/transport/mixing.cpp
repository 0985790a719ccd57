#include "mixing.hpp"

#include <Eigen/Dense>

#include <algorithm>
#include <cstddef>

namespace aureole::transport {
namespace {

constexpr std::size_t memory = 6;

double product(const std::vector<double>& a, const std::vector<double>& b) {
    double sum = 0;
    for (std::size_t i = 0; i < a.size(); ++i) {
        sum += a[i] * b[i];
    }
    return sum;
}

std::vector<double> difference(std::span<const double> a, std::span<const double> b) {
    std::vector<double> result(a.size());
    for (std::size_t i = 0; i < a.size(); ++i) {
        result[i] = a[i] - b[i];
    }
    return result;
}

} // namespace

void Mixing::forget() {
    last_g_.clear();
    changes_g_.clear();
    changes_f_.clear();
}

std::vector<double> Mixing::next(std::span<const double> u, std::span<const double> g, double largest_step) {
    std::vector<double> f = difference(g, u);
    if (!last_g_.empty()) {
        changes_g_.push_back(difference(g, last_g_));
        changes_f_.push_back(difference(f, last_f_));
        if (changes_f_.size() > memory) {
            changes_g_.erase(changes_g_.begin());
            changes_f_.erase(changes_f_.begin());
        }
    }
    last_g_.assign(g.begin(), g.end());
    last_f_ = f;
    std::vector<double> result(g.begin(), g.end());
    const auto m = static_cast<Eigen::Index>(changes_f_.size());
    if (m > 0) {
        Eigen::MatrixXd normal(m, m);
        Eigen::VectorXd right(m);
        for (Eigen::Index a = 0; a < m; ++a) {
            const auto& change = changes_f_[static_cast<std::size_t>(a)];
            right(a) = product(change, f);
            for (Eigen::Index b = 0; b <= a; ++b) {
                normal(a, b) = normal(b, a) = product(change, changes_f_[static_cast<std::size_t>(b)]);
            }
        }
        normal.diagonal() *= 1 + 1e-12;
        const Eigen::VectorXd share = normal.completeOrthogonalDecomposition().solve(right);
        for (Eigen::Index a = 0; a < m; ++a) {
            const auto& change = changes_g_[static_cast<std::size_t>(a)];
            for (std::size_t i = 0; i < result.size(); ++i) {
                result[i] -= share(a) * change[i];
            }
        }
    }
    for (std::size_t i = 0; i < result.size(); ++i) {
        result[i] = std::clamp(result[i], u[i] - largest_step, u[i] + largest_step);
    }
    return result;
}

} // namespace aureole::transport
