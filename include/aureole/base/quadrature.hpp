#pragma once

#include <cassert>
#include <cmath>
#include <cstddef>
#include <numbers>
#include <span>
#include <vector>

namespace aureole {

/// Nodes and weights of a rule on [-1, 1], nodes ascending.
struct QuadratureRule {
    std::vector<double> node, weight;
};

/// Nodes x and weights w of a sum  sum_i w_i f(x_i)  that stands for an integral.
struct WeightedPoints {
    std::vector<double> x, w;
};

/// Gauss-Legendre rule of `points` >= 1 nodes, exact for polynomials up to degree 2 points - 1.
/// Method     Newton iteration on P_n from the asymptotic zeros; nodes and weights to 2e-15 up to 100
/// points.
/// Source     Abramowitz & Stegun 1964, 25.4.29 and 22.16.6.
inline QuadratureRule gauss_legendre(int points) {
    assert(points >= 1);
    const auto n = static_cast<std::size_t>(points);
    QuadratureRule rule{std::vector<double>(n), std::vector<double>(n)};
    for (std::size_t i = 0; i < (n + 1) / 2; ++i) {
        long double x = std::cos(std::numbers::pi_v<long double> * (static_cast<long double>(i) + 0.75L) /
                                 (static_cast<long double>(n) + 0.5L));
        long double slope = 1;
        for (int iteration = 0; iteration < 12; ++iteration) {
            long double before = 1;
            long double value = x;
            for (std::size_t k = 2; k <= n; ++k) {
                const auto degree = static_cast<long double>(k);
                const long double next = ((2 * degree - 1) * x * value - (degree - 1) * before) / degree;
                before = value;
                value = next;
            }
            slope = static_cast<long double>(n) * (x * value - before) / (x * x - 1);
            const long double step = value / slope;
            x -= step;
            if (std::abs(step) < 1e-18L) {
                break;
            }
        }
        const bool middle = 2 * i + 1 == n;
        rule.node[i] = middle ? 0.0 : static_cast<double>(-x);
        rule.node[n - 1 - i] = -rule.node[i];
        rule.weight[i] = static_cast<double>(2 / ((1 - x * x) * slope * slope));
        rule.weight[n - 1 - i] = rule.weight[i];
    }
    return rule;
}

/// Integral of f over [from, to] by the rule; the sign turns with the bounds.
template <class Function> double integrate(const QuadratureRule& rule, Function&& f, double from, double to) {
    const double middle = 0.5 * (from + to);
    const double half = 0.5 * (to - from);
    double sum = 0;
    for (std::size_t i = 0; i < rule.node.size(); ++i) {
        sum += rule.weight[i] * f(middle + half * rule.node[i]);
    }
    return half * sum;
}

/// The same over `panels` >= 1 equal pieces of [from, to].
template <class Function>
double integrate_panels(const QuadratureRule& rule, Function&& f, double from, double to, int panels) {
    assert(panels >= 1);
    const double width = (to - from) / panels;
    double sum = 0;
    for (int panel = 0; panel < panels; ++panel) {
        sum += integrate(rule, f, from + panel * width, from + (panel + 1) * width);
    }
    return sum;
}

/// The same over consecutive pieces between ascending `edges`; fewer than two edges give 0.
template <class Function>
double integrate_pieces(const QuadratureRule& rule, Function&& f, std::span<const double> edges) {
    double sum = 0;
    for (std::size_t i = 1; i < edges.size(); ++i) {
        sum += integrate(rule, f, edges[i - 1], edges[i]);
    }
    return sum;
}

/// Nodes and weights of the rule repeated on the pieces between ascending `edges`: for integrands that
/// share their nodes.
inline WeightedPoints composite_points(const QuadratureRule& rule, std::span<const double> edges) {
    WeightedPoints points;
    for (std::size_t piece = 1; piece < edges.size(); ++piece) {
        const double middle = 0.5 * (edges[piece - 1] + edges[piece]);
        const double half = 0.5 * (edges[piece] - edges[piece - 1]);
        for (std::size_t i = 0; i < rule.node.size(); ++i) {
            points.x.push_back(middle + half * rule.node[i]);
            points.w.push_back(half * rule.weight[i]);
        }
    }
    return points;
}

} // namespace aureole
