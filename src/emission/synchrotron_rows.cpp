#include "aureole/emission/synchrotron_rows.hpp"

#include "synchrotron_kernel.hpp"

#include "aureole/base/constants.hpp"
#include "aureole/base/parallel.hpp"
#include "aureole/base/quadrature.hpp"
#include "aureole/physics/synchrotron.hpp"

#include <algorithm>
#include <array>
#include <cmath>

namespace aureole::emission {

namespace {

constexpr int coarse_intervals = 12;
constexpr int fine_per_coarse = 6;

/// Orders of the table: close together near 1, where the tail of the kernel changes fastest.
std::vector<double> table_orders(int intervals) {
    std::vector<double> order;
    for (int i = 0; i <= intervals; ++i) {
        order.push_back(std::sin(0.5 * constants::pi * i / intervals));
    }
    order.back() = 1;
    return order;
}

/// Rows [fine order][stride] of one table from those [order][stride], cubic in the order.
void refine_orders(const SynchrotronRows& rows, const float* coarse, float* fine) {
    for (std::size_t f = 0; f < rows.fine_order.size(); ++f) {
        const auto [first, fraction] = cubic_place(rows, rows.fine_order[f]);
        const float* from = coarse + rows.stride * first;
        float* to = fine + rows.stride * f;
        for (std::size_t i = 0; i < rows.stride; ++i) {
            to[i] = (fraction[0] * from[i] + fraction[1] * from[rows.stride + i]) +
                    (fraction[2] * from[2 * rows.stride + i] + fraction[3] * from[3 * rows.stride + i]);
        }
    }
}

} // namespace

CubicPlace cubic_place(const SynchrotronRows& rows, double order) {
    const auto& node = rows.order;
    const double t = std::clamp(order, 0.0, 1.0);
    const auto above = std::upper_bound(node.begin() + 1, node.end() - 1, t);
    const auto cell = static_cast<std::size_t>(above - node.begin()) - 1;
    CubicPlace place;
    place.first = std::min(cell == 0 ? 0 : cell - 1, node.size() - 4);
    for (std::size_t a = 0; a < 4; ++a) {
        double weight = 1;
        for (std::size_t b = 0; b < 4; ++b) {
            if (b != a) {
                weight *= (t - node[place.first + b]) / (node[place.first + a] - node[place.first + b]);
            }
        }
        place.fraction[a] = static_cast<float>(weight);
    }
    return place;
}

double synchrotron_constant() {
    return physics::synchrotron_power_constant / (4 * constants::pi);
}

SynchrotronRows synchrotron_rows(
    const spectra::Basis& basis, double from, double to, bool polarised, const RunContext& context) {
    SynchrotronRows rows;
    rows.nodes = basis.nodes();
    rows.stride = (basis.nodes() + 15) / 16 * 16;
    rows.order = table_orders(coarse_intervals);
    rows.fine_order = table_orders(coarse_intervals * fine_per_coarse);
    const auto lorentz = [](double kinetic) { return 1 + kinetic / constants::electron_rest_energy; };
    const double log_gamma2_last = 2 * std::log(lorentz(basis.energy().back()));
    rows.beyond = std::log(KernelTable::largest_x) + log_gamma2_last;
    rows.first = rows.step * std::floor(from / rows.step - 1);
    const double last = std::min(to, rows.beyond);
    rows.tables = static_cast<std::size_t>(std::max(2.0, std::ceil((last - rows.first) / rows.step) + 2));

    std::vector<KernelTable> kernel(rows.order.size());
    for_each_block(context, kernel.size(), [&](std::size_t o) { kernel[o] = kernel_table(rows.order[o]); });

    // Quadrature points of each interval, with what multiplies the kernel there.
    struct Point {
        std::size_t interval;
        double log_gamma2;
        std::array<double, 4> cubic;
        std::array<double, 4> fallback;
    };
    constexpr int points_per_interval = 6;
    const auto rule = gauss_legendre(points_per_interval);
    std::vector<Point> points;
    double largest = 0;
    for (std::size_t j = 0; j < basis.intervals(); ++j) {
        const double from_log = std::log(basis.energy()[j]);
        const double half = 0.5 * (std::log(basis.energy()[j + 1]) - from_log);
        for (std::size_t p = 0; p < rule.node.size(); ++p) {
            const double place = from_log + half * (1 + rule.node[p]);
            const double energy = std::exp(place);
            const double factor = std::pow(energy, 1 - spectra::weighting) * half * rule.weight[p];
            Point point{j, 2 * std::log(lorentz(energy)), basis.cubic(j, place), {}};
            const auto hats = basis.hats(j, place);
            const std::size_t inner = j - basis.stencil_start(j);
            for (std::size_t s = 0; s < 4; ++s) {
                point.cubic[s] *= factor;
                point.fallback[s] = -point.cubic[s];
                largest = std::max(largest, std::abs(point.cubic[s]));
            }
            point.fallback[inner] += factor * hats[0];
            point.fallback[inner + 1] += factor * hats[1];
            points.push_back(point);
        }
    }
    rows.unit = largest;

    const std::size_t all_rows = rows.order.size() * rows.tables;
    std::vector<float> total(all_rows * rows.stride, 0.0F);
    std::vector<float> angle(polarised ? all_rows * rows.stride : 0, 0.0F);
    rows.total_fallback.assign(all_rows * basis.intervals() * 4, 0.0F);
    if (polarised) {
        rows.polarised_fallback.assign(all_rows * basis.intervals() * 4, 0.0F);
    }
    const auto fill = [&](std::size_t row) {
        const auto& table = kernel[row / rows.tables];
        const double u = rows.first + rows.step * static_cast<double>(row % rows.tables);
        const double flatten = std::exp(rows.tilt * u) / rows.unit;
        const std::size_t place = (row % rows.tables * rows.order.size() + row / rows.tables) * rows.stride;
        std::vector<double> sums(2 * basis.nodes(), 0.0);
        std::vector<double> fallback(2 * basis.intervals() * 4, 0.0);
        for (const Point& point : points) {
            const auto value = table.at(u - point.log_gamma2);
            const std::size_t start = basis.stencil_start(point.interval);
            for (std::size_t s = 0; s < basis.stencil_size(); ++s) {
                sums[start + s] += value[0] * point.cubic[s];
                sums[basis.nodes() + start + s] += value[1] * point.cubic[s];
                fallback[4 * point.interval + s] += value[0] * point.fallback[s];
                fallback[4 * (basis.intervals() + point.interval) + s] += value[1] * point.fallback[s];
            }
        }
        // Nodes far below the critical energy add nothing that a float could hold.
        const double least =
            1e-12 *
            *std::max_element(sums.begin(), sums.begin() + static_cast<std::ptrdiff_t>(basis.nodes()));
        for (std::size_t i = 0; i < basis.nodes() && std::abs(sums[i]) < least; ++i) {
            sums[i] = sums[basis.nodes() + i] = 0;
        }
        for (std::size_t i = 0; i < basis.nodes(); ++i) {
            total[place + i] = static_cast<float>(flatten * sums[i]);
            if (polarised) {
                angle[place + i] = static_cast<float>(flatten * sums[basis.nodes() + i]);
            }
        }
        for (std::size_t i = 0; i < 4 * basis.intervals(); ++i) {
            rows.total_fallback[row * basis.intervals() * 4 + i] = static_cast<float>(flatten * fallback[i]);
            if (polarised) {
                rows.polarised_fallback[row * basis.intervals() * 4 + i] =
                    static_cast<float>(flatten * fallback[4 * basis.intervals() + i]);
            }
        }
    };
    constexpr std::size_t rows_per_block = 64;
    for_each_block(context, (all_rows + rows_per_block - 1) / rows_per_block, [&](std::size_t block) {
        for (std::size_t row = block * rows_per_block; row < std::min(all_rows, (block + 1) * rows_per_block);
             ++row) {
            fill(row);
        }
    });
    rows.first_node.assign(rows.tables, 0);
    for (std::size_t table = 0; table < rows.tables; ++table) {
        std::size_t first = rows.nodes;
        for (std::size_t order = 0; order < rows.order.size(); ++order) {
            for (std::size_t t = table; t < std::min(table + 2, rows.tables); ++t) {
                const float* row = total.data() + (t * rows.order.size() + order) * rows.stride;
                const float* end = row + rows.nodes;
                first = std::min(first, static_cast<std::size_t>(
                                            std::find_if(row, end, [](float w) { return w != 0; }) - row));
            }
        }
        rows.first_node[table] = static_cast<int>(first / 16 * 16);
    }
    const std::size_t coarse_size = rows.order.size() * rows.stride;
    const std::size_t fine_size = rows.fine_order.size() * rows.stride;
    rows.total.resize(rows.tables * fine_size);
    rows.polarised.resize(polarised ? rows.tables * fine_size : 0);
    for_each_block(context, rows.tables, [&](std::size_t table) {
        refine_orders(rows, total.data() + table * coarse_size, rows.total.data() + table * fine_size);
        if (polarised) {
            refine_orders(rows, angle.data() + table * coarse_size,
                          rows.polarised.data() + table * fine_size);
        }
    });
    return rows;
}

OrderPlace order_place(const SynchrotronRows& rows, double order) {
    const double t = std::clamp(order, 0.0, 1.0);
    const auto& node = rows.fine_order;
    const double place = std::asin(t) * (2 / constants::pi) * static_cast<double>(node.size() - 1);
    const std::size_t first = std::min(static_cast<std::size_t>(place), node.size() - 2);
    return {first, static_cast<float>((t - node[first]) / (node[first + 1] - node[first]))};
}

} // namespace aureole::emission
