#include "synchrotron_cells.hpp"

#include "aureole/base/constants.hpp"
#include "aureole/base/quadrature.hpp"
#include "aureole/physics/synchrotron.hpp"

#include <algorithm>
#include <array>
#include <cmath>

namespace aureole::emission {

namespace {

using Vec3 = std::array<double, 3>;

double dot(const Vec3& a, const Vec3& b) {
    return a[0] * b[0] + a[1] * b[1] + a[2] * b[2];
}

/// Ordered field of a cell in the galaxy's Cartesian frame, mirrored and turned to its sector.
Vec3 ordered_field(const media::Field& field,
                   const grid::Cells& cells,
                   std::size_t stored_cell,
                   std::size_t j,
                   std::size_t k) {
    if (field.ordered.empty()) {
        return {0, 0, 0};
    }
    const auto& stored = field.ordered[stored_cell];
    Vec3 b{stored[0], stored[1], stored[2]};
    if (cells.is_mirror_image(k)) {
        const double in_plane = field.parity == media::Parity::even ? 1 : -1;
        b = {in_plane * b[0], in_plane * b[1], -in_plane * b[2]};
    }
    if (cells.stored.geometry == grid::Geometry::rz) {
        const double azimuth =
            2 * constants::pi * (static_cast<double>(j) + 0.5) / static_cast<double>(cells.sectors);
        const double c = std::cos(azimuth);
        const double s = std::sin(azimuth);
        b = {b[0] * c - b[1] * s, b[0] * s + b[1] * c, b[2]};
    }
    return b;
}

Vec3 centre(const grid::Cells& cells, std::size_t i, std::size_t j, std::size_t k) {
    const double x = 0.5 * (cells.stored.x[i] + cells.stored.x[i + 1]);
    const double z = 0.5 * (cells.z[k] + cells.z[k + 1]);
    if (cells.stored.geometry == grid::Geometry::rz) {
        const double azimuth =
            2 * constants::pi * (static_cast<double>(j) + 0.5) / static_cast<double>(cells.sectors);
        return {x * std::cos(azimuth), x * std::sin(azimuth), z};
    }
    return {x, 0.5 * (cells.stored.y[j] + cells.stored.y[j + 1]), z};
}

/// A vector across `from` after the smallest turn that takes the unit vector `from` to `to`.
Vec3 turned(const Vec3& v, const Vec3& from, const Vec3& to) {
    const double share = dot(v, to) / (1 + dot(from, to));
    return {v[0] - share * (from[0] + to[0]), v[1] - share * (from[1] + to[1]),
            v[2] - share * (from[2] + to[2])};
}

/// Range of the field across the line of sight over the whole grid: the random part alone is a lower bound,
/// all of it an upper one.
std::array<double, 2> field_range(const media::Field& field) {
    double lowest = 1e300;
    double highest = 0;
    const std::size_t cells = std::max(field.ordered.size(), field.random_rms.size());
    for (std::size_t cell = 0; cell < cells; ++cell) {
        double random = 0;
        double ordered = 0;
        if (!field.random_rms.empty()) {
            const double rms = field.random_rms[cell];
            random = 2.0 / 3.0 * rms * rms;
        }
        if (!field.ordered.empty()) {
            const auto& b = field.ordered[cell];
            ordered = static_cast<double>(b[0]) * b[0] + static_cast<double>(b[1]) * b[1] +
                      static_cast<double>(b[2]) * b[2];
        }
        // Seen almost along itself an ordered field is weaker still; what lies below the table is emitted as
        // at its edge.
        const double low = std::max(random, 1e-4 * ordered);
        if (low > 0) {
            lowest = std::min(lowest, low);
        }
        highest = std::max(highest, random + ordered);
    }
    return {std::sqrt(lowest), std::sqrt(highest)};
}

} // namespace

FieldSeen field_seen(const media::Field& field,
                     const grid::Cells& cells,
                     std::size_t stored_cell,
                     std::size_t i,
                     std::size_t j,
                     std::size_t k,
                     const Orientation& orientation) {
    FieldSeen seen;
    double random = 0;
    if (!field.random_rms.empty()) {
        const double rms = field.random_rms[stored_cell];
        random = 2.0 / 3.0 * rms * rms;
    }
    if (field.ordered.empty()) {
        seen.across = std::sqrt(random);
        return seen;
    }
    const Vec3 b = ordered_field(field, cells, stored_cell, j, k);
    Vec3 towards = orientation.towards;
    Vec3 right_axis = orientation.right;
    Vec3 up_axis = orientation.up;
    if (orientation.observer) {
        const Vec3 at = centre(cells, i, j, k);
        const Vec3& observer = *orientation.observer;
        towards = {observer[0] - at[0], observer[1] - at[1], observer[2] - at[2]};
        const double distance = std::sqrt(dot(towards, towards));
        for (double& component : towards) {
            component /= distance;
        }
        right_axis = turned(right_axis, orientation.towards, towards);
        up_axis = turned(up_axis, orientation.towards, towards);
    }
    const double along = dot(b, towards);
    const double b2 = std::max(0.0, dot(b, b) - along * along);
    seen.across = std::sqrt(b2 + random);
    seen.order = seen.across > 0 ? b2 / (b2 + random) : 0;
    const double right = dot(b, right_axis);
    const double up = dot(b, up_axis);
    const double norm = right * right + up * up;
    if (norm > 0) {
        // Twice the position angle of B is twice that of `right` plus twice the angle from `right`; E is
        // perpendicular to B, so both cosine and sine turn their sign.
        const double c = (right * right - up * up) / norm;
        const double s = 2 * right * up / norm;
        seen.cos2chi = -(c * orientation.cos_double_angle - s * orientation.sin_double_angle);
        seen.sin2chi = -(s * orientation.cos_double_angle + c * orientation.sin_double_angle);
    }
    return seen;
}

SynchrotronCells prepare_synchrotron(const spectra::Basis& basis,
                                     const media::Field& field,
                                     const std::vector<Channel>& channels,
                                     const std::vector<std::size_t>& radio_channels,
                                     bool polarised,
                                     const RunContext& context) {
    SynchrotronCells result;
    const auto range = field_range(field);
    if (!(range[1] > 0) || radio_channels.empty()) {
        return result;
    }
    result.channels = radio_channels.size();
    const double nu_1 = physics::synchrotron_critical_constant;
    std::vector<double> share;
    double lowest = 1e300;
    double highest = -1e300;
    for (std::size_t r = 0; r < radio_channels.size(); ++r) {
        const Channel& channel = channels[radio_channels[r]];
        std::vector<double> frequencies{channel.from};
        std::vector<double> shares{1.0};
        if (channel.is_band()) {
            const auto points = composite_points(gauss_legendre(4), std::array{channel.from, channel.to});
            frequencies = points.x;
            shares = points.w;
            for (double& s : shares) {
                s /= channel.to - channel.from;
            }
        }
        const double centre = channel.centre();
        for (std::size_t f = 0; f < frequencies.size(); ++f) {
            result.log_frequency.push_back(std::log(frequencies[f] / nu_1));
            result.sample_channel.push_back(r);
            result.sample_factor.push_back(
                static_cast<float>(shares[f] * std::pow(frequencies[f] / centre, -SynchrotronRows::tilt)));
            lowest = std::min(lowest, result.log_frequency.back());
            highest = std::max(highest, result.log_frequency.back());
        }
    }
    result.rows = synchrotron_rows(basis, lowest - std::log(range[1]), highest - std::log(range[0]),
                                   polarised, context);
    for (const std::size_t c : radio_channels) {
        // B^(1 + tilt) is stored in microgauss, sums of M row / unit stay near the size of M.
        const double field_unit = std::pow(constants::microgauss, 1 + SynchrotronRows::tilt);
        result.unit.push_back(synchrotron_constant() * field_unit * result.rows.unit *
                              std::pow(channels[c].centre() / nu_1, -SynchrotronRows::tilt) * 1e-16);
    }
    return result;
}

void SynchrotronCells::emit(const FieldSeen& seen,
                            const float* spectrum,
                            const spectra::Basis& basis,
                            std::span<const std::size_t> negative,
                            std::span<const std::size_t> plane_of,
                            float* out,
                            float* stokes,
                            bool portable) const {
    if (!(seen.across > 0)) {
        return;
    }
    constexpr std::size_t most = 64;
    const double log_field = std::log(seen.across);
    const auto amplitude = static_cast<float>(
        1e16 * std::exp((1 + SynchrotronRows::tilt) * (log_field - std::log(constants::microgauss))));
    const OrderPlace order = order_place(rows, seen.order);
    const kernels::RowTable total{rows.total.data(), rows.fine_order.size(), rows.stride,
                                  rows.first_node.data()};
    const kernels::RowTable polarised{rows.polarised.data(), rows.fine_order.size(), rows.stride,
                                      rows.first_node.data()};
    const CubicPlace cubic = negative.empty() ? CubicPlace{} : cubic_place(rows, seen.order);
    const bool with_stokes = !rows.polarised.empty();
    const std::size_t intervals = basis.intervals();

    for (std::size_t start = 0; start < log_frequency.size(); start += most) {
        const std::size_t count = std::min(most, log_frequency.size() - start);
        int table[most];
        float along[most];
        float value[most];
        float angle_value[most];
        bool emits[most];
        for (std::size_t s = 0; s < count; ++s) {
            const double u = log_frequency[start + s] - log_field;
            emits[s] = u < rows.beyond;
            const double place =
                std::clamp((u - rows.first) / rows.step, 0.0, static_cast<double>(rows.tables) - 1.001);
            table[s] = static_cast<int>(place);
            along[s] = static_cast<float>(place - table[s]);
        }
        kernels::interpolated_products(total, order.first, order.towards, table, along, count, spectrum,
                                       value, portable);
        if (with_stokes) {
            kernels::interpolated_products(polarised, order.first, order.towards, table, along, count,
                                           spectrum, angle_value, portable);
        }
        const auto corrected = [&](const std::vector<float>& fallback, std::size_t s) {
            float sum = 0;
            for (const std::size_t j : negative) {
                const float* node = spectrum + basis.stencil_start(j);
                for (std::size_t o = 0; o < cubic.fraction.size(); ++o) {
                    const float* low =
                        fallback.data() +
                        (((cubic.first + o) * rows.tables + static_cast<std::size_t>(table[s])) * intervals +
                         j) *
                            4;
                    const float* high = low + intervals * 4;
                    for (std::size_t n = 0; n < basis.stencil_size(); ++n) {
                        sum += cubic.fraction[o] * (low[n] + along[s] * (high[n] - low[n])) * node[n];
                    }
                }
            }
            return sum;
        };
        for (std::size_t s = 0; s < count; ++s) {
            if (!emits[s]) {
                continue;
            }
            const std::size_t channel = sample_channel[start + s];
            const float factor = amplitude * sample_factor[start + s];
            const float intensity =
                factor *
                std::max(0.0F, value[s] + (negative.empty() ? 0.0F : corrected(rows.total_fallback, s)));
            out[plane_of[channel]] += intensity;
            if (with_stokes && stokes != nullptr) {
                float p = factor * (angle_value[s] +
                                    (negative.empty() ? 0.0F : corrected(rows.polarised_fallback, s)));
                p = std::clamp(p, 0.0F, intensity);
                stokes[channel] += p * static_cast<float>(seen.cos2chi);
                stokes[channels + channel] += p * static_cast<float>(seen.sin2chi);
            }
        }
    }
}

} // namespace aureole::emission
