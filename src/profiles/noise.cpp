#include "aureole/profiles/noise.hpp"

#include "aureole/base/error.hpp"
#include "aureole/base/quadrature.hpp"

#include <Eigen/Eigenvalues>
#include <fmt/format.h>

#include <algorithm>
#include <array>
#include <cmath>
#include <complex>
#include <numbers>

namespace aureole::profiles {

namespace {

double median(std::vector<double>& values) {
    const auto middle = values.begin() + static_cast<std::ptrdiff_t>(values.size() / 2);
    std::nth_element(values.begin(), middle, values.end());
    if (values.size() % 2 == 1) {
        return *middle;
    }
    return 0.5 * (*middle + *std::max_element(values.begin(), middle));
}

/// Pixels (i, j) of a box with weights that add up to 1, and the rows and columns they span.
struct Weights {
    std::vector<std::size_t> pixel;
    std::vector<double> weight;
    std::ptrdiff_t i_low = 0, i_high = -1, j_low = 0, j_high = -1;
};

Weights weights_of(const Box& box, std::span<const unsigned char> good, std::ptrdiff_t nx) {
    Weights weights;
    double total = 0;
    for (std::size_t k = 0; k < box.pixel.size(); ++k) {
        if (good[box.pixel[k]] == 0) {
            continue;
        }
        const auto index = static_cast<std::ptrdiff_t>(box.pixel[k]);
        const std::ptrdiff_t i = index % nx;
        const std::ptrdiff_t j = index / nx;
        const bool first = weights.pixel.empty();
        weights.i_low = first ? i : std::min(weights.i_low, i);
        weights.i_high = first ? i : std::max(weights.i_high, i);
        weights.j_low = first ? j : std::min(weights.j_low, j);
        weights.j_high = first ? j : std::max(weights.j_high, j);
        weights.pixel.push_back(box.pixel[k]);
        weights.weight.push_back(box.area[k]);
        total += box.area[k];
    }
    for (double& weight : weights.weight) {
        weight /= total;
    }
    return weights;
}

/// A window of the map, grown by the reach of the correlation.
struct Window {
    std::ptrdiff_t i_low = 0, i_high = -1, j_low = 0, j_high = -1;
    std::ptrdiff_t width() const { return i_high - i_low + 1; }
    std::size_t at(std::ptrdiff_t i, std::ptrdiff_t j) const {
        return static_cast<std::size_t>((j - j_low) * width() + i - i_low);
    }
    bool meets(const Weights& other) const {
        return other.i_low <= i_high && other.i_high >= i_low && other.j_low <= j_high &&
               other.j_high >= j_low;
    }
    bool holds(std::ptrdiff_t i, std::ptrdiff_t j) const {
        return i >= i_low && i <= i_high && j >= j_low && j <= j_high;
    }
};

/// R w on the window around the weights.
void spread(const Weights& weights,
            std::ptrdiff_t nx,
            const LagTable& correlation,
            const Window& window,
            std::vector<double>& out) {
    out.assign(static_cast<std::size_t>(window.width() * (window.j_high - window.j_low + 1)), 0.0);
    const std::ptrdiff_t row = 2 * correlation.reach_x + 1;
    for (std::size_t k = 0; k < weights.pixel.size(); ++k) {
        const std::ptrdiff_t i = static_cast<std::ptrdiff_t>(weights.pixel[k]) % nx;
        const std::ptrdiff_t j = static_cast<std::ptrdiff_t>(weights.pixel[k]) / nx;
        for (std::ptrdiff_t dj = -correlation.reach_y; dj <= correlation.reach_y; ++dj) {
            double* target = out.data() + window.at(i - correlation.reach_x, j + dj);
            const double* source = correlation.value.data() + (dj + correlation.reach_y) * row;
            for (std::ptrdiff_t d = 0; d < row; ++d) {
                target[d] += weights.weight[k] * source[d];
            }
        }
    }
}

double
dot(const Weights& weights, std::ptrdiff_t nx, const Window& window, const std::vector<double>& field) {
    double sum = 0;
    for (std::size_t k = 0; k < weights.pixel.size(); ++k) {
        const std::ptrdiff_t i = static_cast<std::ptrdiff_t>(weights.pixel[k]) % nx;
        const std::ptrdiff_t j = static_cast<std::ptrdiff_t>(weights.pixel[k]) / nx;
        if (window.holds(i, j)) {
            sum += weights.weight[k] * field[window.at(i, j)];
        }
    }
    return sum;
}

double second_integral(double u, double s) {
    return s * std::sqrt(std::numbers::pi / 2) * u * std::erf(u / (s * std::numbers::sqrt2)) +
           s * s * std::exp(-u * u / (2 * s * s));
}

double line_covariance(double d, double a, double s) {
    return (second_integral(d + a, s) - 2 * second_integral(d, s) + second_integral(d - a, s)) / (a * a);
}

/// Nodes and triangle weights (1 - |u - d|/a)/a on the part of [d - a, d + a] within `range` of 0, panels at
/// most `step` long.
WeightedPoints triangle_points(double d, double a, double range, double step) {
    std::vector<double> ends{std::max(d - a, -range), std::clamp(d, -range, range), std::min(d + a, range)};
    std::vector<double> edges{ends.front()};
    for (std::size_t e = 1; e < ends.size() && ends.front() < ends.back(); ++e) {
        const double length = ends[e] - ends[e - 1];
        const double panels = std::ceil(length / step);
        for (double p = 1; p <= panels; ++p) {
            edges.push_back(ends[e - 1] + length * p / panels);
        }
    }
    WeightedPoints points = composite_points(gauss_legendre(8), edges);
    for (std::size_t k = 0; k < points.x.size(); ++k) {
        points.w[k] *= (1 - std::abs(points.x[k] - d) / a) / a;
    }
    return points;
}

double clip_rms(std::vector<double> values, double& level, std::size_t& used) {
    double rms = 0;
    for (int round = 0; round < 20; ++round) {
        level = median(values);
        std::vector<double> deviation(values.size());
        std::transform(values.begin(), values.end(), deviation.begin(),
                       [&](double v) { return std::abs(v - level); });
        rms = 1.482602218505602 * median(deviation);
        const std::size_t before = values.size();
        std::erase_if(values, [&](double v) { return std::abs(v - level) > 4 * rms; });
        if (values.size() == before || values.size() < 30) {
            break;
        }
    }
    used = values.size();
    return rms;
}

/// 1 up to half the reach, then half a cosine down to 0 at the reach. `part`: lag over the reach.
double flat_taper(double part) {
    const double beyond = std::clamp(2 * part - 1, 0.0, 1.0);
    return 0.5 * (1 + std::cos(std::numbers::pi * beyond));
}

/// exp(-2 pi i k d/period), d from -reach to reach against k.
Eigen::MatrixXcd waves(std::ptrdiff_t period, std::ptrdiff_t reach) {
    Eigen::MatrixXcd table(period, 2 * reach + 1);
    for (std::ptrdiff_t k = 0; k < period; ++k) {
        for (std::ptrdiff_t d = -reach; d <= reach; ++d) {
            const double turns = static_cast<double>(k * d % period) / static_cast<double>(period);
            table(k, d + reach) = std::polar(1.0, -2 * std::numbers::pi * turns);
        }
    }
    return table;
}

/// Kernel whose power spectrum is the one of the lags, 0 where that is negative, cut at half the reach.
Eigen::MatrixXd kernel_of(const LagTable& raw) {
    const std::ptrdiff_t columns = 2 * raw.reach_x + 1;
    const std::ptrdiff_t rows = 2 * raw.reach_y + 1;
    Eigen::MatrixXcd lags(rows, columns);
    for (std::ptrdiff_t j = 0; j < rows; ++j) {
        for (std::ptrdiff_t i = 0; i < columns; ++i) {
            lags(j, i) = raw.value[static_cast<std::size_t>(j * columns + i)];
        }
    }
    const std::ptrdiff_t period_x = 2 * columns;
    const std::ptrdiff_t period_y = 2 * rows;
    // The lags are symmetric about 0, hence their spectrum is real.
    const Eigen::MatrixXcd spectrum =
        waves(period_y, raw.reach_y) * lags * waves(period_x, raw.reach_x).transpose();
    const Eigen::MatrixXcd amplitude = spectrum.real().cwiseMax(0.0).cwiseSqrt().cast<std::complex<double>>();
    return (waves(period_y, raw.reach_y / 2).adjoint() * amplitude *
            waves(period_x, raw.reach_x / 2).conjugate())
        .real();
}

/// The kernel of the lags folded with itself: no covariance made of it has a negative eigenvalue.
LagTable semidefinite(const LagTable& raw) {
    const Eigen::MatrixXd kernel = kernel_of(raw);
    LagTable table = raw;
    const double square = kernel.squaredNorm();
    for (std::ptrdiff_t dj = -raw.reach_y; dj <= raw.reach_y; ++dj) {
        for (std::ptrdiff_t di = -raw.reach_x; di <= raw.reach_x; ++di) {
            const std::ptrdiff_t height = kernel.rows() - std::abs(dj);
            const std::ptrdiff_t width = kernel.cols() - std::abs(di);
            const auto here = kernel.block(std::max<std::ptrdiff_t>(0, -dj), std::max<std::ptrdiff_t>(0, -di),
                                           height, width);
            const auto there =
                kernel.block(std::max<std::ptrdiff_t>(0, dj), std::max<std::ptrdiff_t>(0, di), height, width);
            const std::ptrdiff_t place = (dj + raw.reach_y) * (2 * raw.reach_x + 1) + di + raw.reach_x;
            table.value[static_cast<std::size_t>(place)] =
                square > 0 ? here.cwiseProduct(there).sum() / square : 0;
        }
    }
    return table;
}

/// Lifts eigenvalues to `least` of the greatest. Rows of zeros stay so.
void raise_eigenvalues(Eigen::MatrixXd& covariance, double least) {
    std::vector<Eigen::Index> filled;
    for (Eigen::Index b = 0; b < covariance.rows(); ++b) {
        if (covariance(b, b) > 0) {
            filled.push_back(b);
        }
    }
    if (filled.empty()) {
        return;
    }
    const Eigen::MatrixXd part = covariance(filled, filled);
    const Eigen::SelfAdjointEigenSolver<Eigen::MatrixXd> eigen(part);
    const Eigen::VectorXd values = eigen.eigenvalues().cwiseMax(least * eigen.eigenvalues().maxCoeff());
    covariance(filled, filled) =
        eigen.eigenvectors() * values.asDiagonal() * eigen.eigenvectors().transpose();
}

} // namespace

LagTable beam_correlation(const maps::PixelGrid& pixels, const maps::Beam& beam) {
    const double to_sigma = 1 / std::sqrt(8 * std::numbers::ln2);
    const double a2 = std::pow(beam.major * to_sigma, 2);
    const double b2 = std::pow(beam.minor * to_sigma, 2);
    const double sine = std::sin(beam.position_angle);
    const double cosine = std::cos(beam.position_angle);
    const double inverse_ee = sine * sine / a2 + cosine * cosine / b2;
    const double inverse_nn = cosine * cosine / a2 + sine * sine / b2;
    const double inverse_en = (1 / a2 - 1 / b2) * sine * cosine;
    // Beyond 6 sigma the correlation is below 2e-8.
    const double reach = 6 * beam.major * to_sigma;
    LagTable table;
    table.reach_x = static_cast<std::ptrdiff_t>(std::ceil(reach / std::abs(pixels.step_x)));
    table.reach_y = static_cast<std::ptrdiff_t>(std::ceil(reach / std::abs(pixels.step_y)));
    const double turn_cosine = std::cos(pixels.rotation);
    const double turn_sine = std::sin(pixels.rotation);
    for (std::ptrdiff_t dj = -table.reach_y; dj <= table.reach_y; ++dj) {
        for (std::ptrdiff_t di = -table.reach_x; di <= table.reach_x; ++di) {
            const auto x = static_cast<double>(di);
            const auto y = static_cast<double>(dj);
            const double east = pixels.step_x * (x * turn_cosine - y * turn_sine);
            const double north = pixels.step_y * (x * turn_sine + y * turn_cosine);
            table.value.push_back(std::exp(-0.5 * (inverse_ee * east * east + 2 * inverse_en * east * north +
                                                   inverse_nn * north * north)));
        }
    }
    return table;
}

MeasuredNoise measure_noise(const maps::Image& image, std::span<const unsigned char> source_free) {
    std::vector<double> values;
    for (std::size_t k = 0; k < image.value.size(); ++k) {
        if (source_free[k] != 0 && std::isfinite(image.value[k])) {
            values.push_back(static_cast<double>(image.value[k]));
        }
    }
    if (values.size() < 30) {
        throw Error(
            ErrorKind::input,
            fmt::format("{}: found {} source-free pixels to measure the noise in, expected 30 or more",
                        image.name, values.size()));
    }
    MeasuredNoise noise;
    noise.rms = clip_rms(std::move(values), noise.level, noise.pixels);
    return noise;
}

std::vector<unsigned char> source_free_pixels(const maps::PixelGrid& pixels, const ProfileSpec& spec) {
    std::vector<unsigned char> free(pixels.nx * pixels.ny, 0);
    const std::size_t border_x = (pixels.nx + 9) / 10;
    const std::size_t border_y = (pixels.ny + 9) / 10;
    for (std::size_t j = 0; j < pixels.ny; ++j) {
        for (std::size_t i = 0; i < pixels.nx; ++i) {
            const std::size_t index = i + pixels.nx * j;
            bool use = i < border_x || i + border_x >= pixels.nx || j < border_y || j + border_y >= pixels.ny;
            if (spec.source_free_height > 0) {
                const auto place =
                    strip_position(pixels, spec, static_cast<double>(i), static_cast<double>(j));
                use = std::abs(place[1]) > spec.source_free_height;
            }
            const bool masked = !spec.mask.empty() && spec.mask[index] != 0;
            free[index] = use && !masked ? 1 : 0;
        }
    }
    return free;
}

LagTable measured_correlation(const maps::Image& image,
                              std::span<const unsigned char> source_free,
                              const MeasuredNoise& noise) {
    const auto nx = static_cast<std::ptrdiff_t>(image.pixels.nx);
    const auto ny = static_cast<std::ptrdiff_t>(image.pixels.ny);
    const double reach = image.beam ? 3 * image.beam->major : 0;
    // Even, as the kernel behind the correlation has half the reach.
    const auto reach_of = [&](double step, std::ptrdiff_t size) {
        const auto half =
            reach > 0 ? static_cast<std::ptrdiff_t>(std::ceil(0.5 * reach / std::abs(step))) : 5;
        return 2 * std::min(half, (size - 1) / 2);
    };
    LagTable raw;
    raw.reach_x = reach_of(image.pixels.step_x, nx);
    raw.reach_y = reach_of(image.pixels.step_y, ny);
    std::vector<double> value(image.value.size(), 0.0);
    std::vector<double> used(image.value.size(), 0.0);
    double pixels = 0;
    for (std::size_t k = 0; k < value.size(); ++k) {
        const double departure = static_cast<double>(image.value[k]) - noise.level;
        if (source_free[k] != 0 && std::abs(departure) <= 5 * noise.rms) {
            value[k] = departure;
            used[k] = 1;
            pixels += 1;
        }
    }
    const auto covariance = [&](std::ptrdiff_t di, std::ptrdiff_t dj) {
        double sum = 0;
        double pairs = 0;
        for (std::ptrdiff_t j = 0; j + dj < ny; ++j) {
            for (std::ptrdiff_t i = std::max<std::ptrdiff_t>(0, -di); i < std::min(nx, nx - di); ++i) {
                const auto here = static_cast<std::size_t>(i + nx * j);
                const auto there = static_cast<std::size_t>(i + di + nx * (j + dj));
                sum += value[here] * value[there];
                pairs += used[here] * used[there];
            }
        }
        return pairs > 0 ? sum / pairs : 0.0;
    };
    const std::ptrdiff_t row = 2 * raw.reach_x + 1;
    raw.value.assign(static_cast<std::size_t>(row * (2 * raw.reach_y + 1)), 0.0);
    const double variance = covariance(0, 0);
    const double step_x = reach > 0 ? std::abs(image.pixels.step_x) / reach : 0.1;
    const double step_y = reach > 0 ? std::abs(image.pixels.step_y) / reach : 0.1;
    for (std::ptrdiff_t dj = 0; dj <= raw.reach_y; ++dj) {
        for (std::ptrdiff_t di = -raw.reach_x; di <= raw.reach_x; ++di) {
            const double kept =
                flat_taper(std::hypot(step_x * static_cast<double>(di), step_y * static_cast<double>(dj)));
            const double correlation = variance > 0 && kept > 0 ? covariance(di, dj) / variance : 0;
            const double tapered = kept * std::clamp(correlation, -1.0, 1.0);
            raw.value[static_cast<std::size_t>((raw.reach_y + dj) * row + raw.reach_x + di)] = tapered;
            raw.value[static_cast<std::size_t>((raw.reach_y - dj) * row + raw.reach_x - di)] = tapered;
        }
    }
    LagTable table = semidefinite(raw);
    double squares = 0;
    for (const double correlation : table.value) {
        squares += correlation * correlation;
    }
    table.least_eigenvalue = pixels > 0 ? std::min(1.0, 2 * squares / pixels) : 0;
    return table;
}

Eigen::MatrixXd unit_covariance(const maps::PixelGrid& pixels,
                                const Strip& strip,
                                std::span<const unsigned char> good,
                                const LagTable& correlation) {
    const auto nx = static_cast<std::ptrdiff_t>(pixels.nx);
    std::vector<Weights> weights;
    for (const Box& box : strip.box) {
        weights.push_back(weights_of(box, good, nx));
    }
    const auto bins = static_cast<Eigen::Index>(weights.size());
    Eigen::MatrixXd covariance = Eigen::MatrixXd::Zero(bins, bins);
    std::vector<double> field;
    for (Eigen::Index a = 0; a < bins; ++a) {
        const Weights& box = weights[static_cast<std::size_t>(a)];
        if (box.pixel.empty()) {
            continue;
        }
        const Window window{box.i_low - correlation.reach_x, box.i_high + correlation.reach_x,
                            box.j_low - correlation.reach_y, box.j_high + correlation.reach_y};
        spread(box, nx, correlation, window, field);
        for (Eigen::Index b = a; b < bins; ++b) {
            const Weights& other = weights[static_cast<std::size_t>(b)];
            if (!other.pixel.empty() && window.meets(other)) {
                covariance(a, b) = covariance(b, a) = dot(other, nx, window, field);
            }
        }
    }
    if (correlation.least_eigenvalue > 0) {
        raise_eigenvalues(covariance, correlation.least_eigenvalue);
    }
    return covariance;
}

double box_covariance(double d, double e, double a, double b, const BeamCovariance& beam) {
    const double sx = std::sqrt(beam.xx);
    const double sy = std::sqrt(beam.yy);
    if (std::abs(beam.xy) <= 1e-12 * sx * sy) {
        return line_covariance(d, a, sx) * line_covariance(e, b, sy);
    }
    const double determinant = beam.xx * beam.yy - beam.xy * beam.xy;
    const double narrow = std::sqrt(determinant / std::max(beam.xx, beam.yy));
    const double range = 7 * std::sqrt(std::max(beam.xx, beam.yy));
    const WeightedPoints along = triangle_points(d, a, range, narrow);
    const WeightedPoints up = triangle_points(e, b, range, narrow);
    double sum = 0;
    for (std::size_t i = 0; i < along.x.size(); ++i) {
        for (std::size_t j = 0; j < up.x.size(); ++j) {
            const double x = along.x[i];
            const double y = up.x[j];
            const double exponent =
                (beam.yy * x * x - 2 * beam.xy * x * y + beam.xx * y * y) / (2 * determinant);
            sum += along.w[i] * up.w[j] * std::exp(-exponent);
        }
    }
    return sum;
}

} // namespace aureole::profiles
