#include "aureole/emission/weights.hpp"

#include "aureole/base/quadrature.hpp"

#include <algorithm>
#include <cmath>

namespace aureole::emission {

namespace {

/// Ends of the smooth pieces of [from, to], in ln T.
std::vector<double> pieces(double from, double to, std::span<const double> splits) {
    std::vector<double> ends{from};
    for (const double split : splits) {
        if (split > 0 && std::log(split) > from && std::log(split) < to) {
            ends.push_back(std::log(split));
        }
    }
    ends.push_back(to);
    std::sort(ends.begin(), ends.end());
    return ends;
}

} // namespace

std::vector<KernelPoint> kernel_points(const spectra::Basis& basis,
                                       const std::function<double(double)>& kernel,
                                       std::span<const double> splits,
                                       int points) {
    const auto rule = gauss_legendre(points);
    std::vector<KernelPoint> result;
    for (std::size_t j = 0; j < basis.intervals(); ++j) {
        const auto ends = pieces(std::log(basis.energy()[j]), std::log(basis.energy()[j + 1]), splits);
        for (std::size_t piece = 0; piece + 1 < ends.size(); ++piece) {
            const double half = 0.5 * (ends[piece + 1] - ends[piece]);
            const double middle = 0.5 * (ends[piece + 1] + ends[piece]);
            for (std::size_t p = 0; p < rule.node.size(); ++p) {
                const double place = middle + half * rule.node[p];
                const double energy = std::exp(place);
                // dT = T d ln T and N = M T^-s.
                result.push_back({place, kernel(energy) * std::pow(energy, 1 - spectra::weighting) * half *
                                             rule.weight[p]});
            }
        }
    }
    return result;
}

WeightRow weight_row(const spectra::Basis& basis, std::span<const KernelPoint> points) {
    WeightRow row;
    row.cubic.assign(basis.nodes(), 0.0);
    row.fallback.assign(basis.intervals() * 4, 0.0);
    std::size_t j = 0;
    for (const auto& [place, value] : points) {
        while (j + 1 < basis.intervals() && place > basis.log_energy()[j + 1]) {
            ++j;
        }
        if (value == 0) {
            continue;
        }
        const std::size_t start = basis.stencil_start(j);
        const auto cubic = basis.cubic(j, place);
        for (std::size_t s = 0; s < basis.stencil_size(); ++s) {
            row.cubic[start + s] += value * cubic[s];
            row.fallback[4 * j + s] -= value * cubic[s];
        }
        const auto hats = basis.hats(j, place);
        row.fallback[4 * j + (j - start)] += value * hats[0];
        row.fallback[4 * j + (j - start) + 1] += value * hats[1];
    }
    return row;
}

WeightRow integrate_kernel(const spectra::Basis& basis,
                           const std::function<double(double)>& kernel,
                           std::span<const double> splits,
                           int points) {
    return weight_row(basis, kernel_points(basis, kernel, splits, points));
}

double tail_weight(const spectra::Basis& basis,
                   const std::function<double(double)>& kernel,
                   std::span<const double> splits,
                   double slope,
                   bool above,
                   double decades) {
    const auto rule = gauss_legendre(4);
    const double end = std::log(above ? basis.energy().back() : basis.energy().front());
    const double reach = decades * std::log(10.0);
    const double step = std::log(10.0) / 4;
    double sum = 0;
    for (double done = 0; done < reach - 1e-9; done += step) {
        const double from = above ? end + done : end - done - step;
        const auto ends = pieces(from, from + step, splits);
        for (std::size_t piece = 0; piece + 1 < ends.size(); ++piece) {
            const double half = 0.5 * (ends[piece + 1] - ends[piece]);
            const double middle = 0.5 * (ends[piece + 1] + ends[piece]);
            for (std::size_t p = 0; p < rule.node.size(); ++p) {
                const double place = middle + half * rule.node[p];
                const double energy = std::exp(place);
                const double density = std::exp(-slope * (place - end) - spectra::weighting * end);
                sum += kernel(energy) * density * energy * half * rule.weight[p];
            }
        }
    }
    return sum;
}

} // namespace aureole::emission
