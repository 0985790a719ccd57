#pragma once

#include "aureole/base/constants.hpp"
#include "aureole/maps/image.hpp"
#include "aureole/profiles/geometry.hpp"
#include "aureole/profiles/profile.hpp"

#include <cmath>
#include <cstdint>
#include <random>
#include <vector>

/// Maps and profiles made for the tests. Lengths are kpc where a name says so.
namespace synthetic {

inline constexpr double kpc = aureole::constants::kiloparsec;
inline constexpr double distance = 1e4 * kpc;
inline constexpr double to_sigma = 0.42466090014400953; // 1/sqrt(8 ln 2)

/// A map of nx x ny pixels, its reference point in the middle, East to the left.
inline aureole::maps::Image blank_map(std::size_t nx, std::size_t ny, double pixel_kpc, double fwhm_kpc) {
    aureole::maps::Image image;
    image.pixels.nx = nx;
    image.pixels.ny = ny;
    image.pixels.step_x = -pixel_kpc * kpc / distance;
    image.pixels.step_y = pixel_kpc * kpc / distance;
    image.pixels.centre_x = 0.5 * static_cast<double>(nx - 1);
    image.pixels.centre_y = 0.5 * static_cast<double>(ny - 1);
    image.value.assign(nx * ny, 0.0F);
    image.unit = "Jy/beam";
    image.name = "synthetic map";
    image.frequency = 1.4e9;
    if (fwhm_kpc > 0) {
        const double fwhm = fwhm_kpc * kpc / distance;
        image.beam = aureole::maps::Beam{fwhm, fwhm, 0};
    }
    return image;
}

/// Strips along East-West (position angle 270 deg: X to the West, Y to the North).
inline aureole::profiles::ProfileSpec
spec(std::size_t strips, double width_kpc, double bin_kpc, double range_kpc) {
    aureole::profiles::ProfileSpec made;
    made.position_angle = 270 * aureole::constants::degree;
    made.distance = distance;
    made.strips = strips;
    made.strip_width = width_kpc * kpc;
    made.bin_height = bin_kpc * kpc;
    made.half_range = range_kpc * kpc;
    return made;
}

/// Fills a map with a function of (X, Y) in kpc in the frame of the strips.
template <class Function>
void fill(aureole::maps::Image& image, const aureole::profiles::ProfileSpec& spec, Function&& function) {
    for (std::size_t j = 0; j < image.pixels.ny; ++j) {
        for (std::size_t i = 0; i < image.pixels.nx; ++i) {
            const auto place = aureole::profiles::strip_position(image.pixels, spec, static_cast<double>(i),
                                                                 static_cast<double>(j));
            image.value[i + image.pixels.nx * j] =
                static_cast<float>(function(place[0] / kpc, place[1] / kpc));
        }
    }
}

/// Normal numbers by Box & Muller, so that every standard library draws the same ones.
class Normal {
  public:
    explicit Normal(std::uint64_t seed) : engine_(seed) {}
    double operator()() {
        if (spare_ready_) {
            spare_ready_ = false;
            return spare_;
        }
        const double u = (static_cast<double>(engine_() >> 11) + 0.5) * 0x1p-53;
        const double v = (static_cast<double>(engine_() >> 11) + 0.5) * 0x1p-53;
        const double radius = std::sqrt(-2 * std::log(u));
        spare_ = radius * std::sin(2 * aureole::constants::pi * v);
        spare_ready_ = true;
        return radius * std::cos(2 * aureole::constants::pi * v);
    }

  private:
    std::mt19937_64 engine_;
    double spare_ = 0;
    bool spare_ready_ = false;
};

/// Unit-rms noise correlated like a round beam of `sigma` pixels: white noise filtered with a Gaussian of
/// sigma/sqrt2.
inline std::vector<double> beam_noise(std::size_t nx, std::size_t ny, double sigma, Normal& normal) {
    const double width = sigma / std::sqrt(2.0);
    const auto reach = static_cast<std::size_t>(std::ceil(5 * width));
    std::vector<double> kernel;
    double square = 0;
    for (std::size_t k = 0; k <= 2 * reach; ++k) {
        const double x = (static_cast<double>(k) - static_cast<double>(reach)) / width;
        kernel.push_back(std::exp(-0.5 * x * x));
        square += kernel.back() * kernel.back();
    }
    for (double& value : kernel) {
        value /= std::sqrt(square);
    }
    const std::size_t wide = nx + 2 * reach;
    const std::size_t tall = ny + 2 * reach;
    std::vector<double> rows(nx * tall, 0.0);
    std::vector<double> white(wide);
    for (std::size_t j = 0; j < tall; ++j) {
        for (double& value : white) {
            value = normal();
        }
        for (std::size_t i = 0; i < nx; ++i) {
            double sum = 0;
            for (std::size_t k = 0; k < kernel.size(); ++k) {
                sum += kernel[k] * white[i + k];
            }
            rows[i + nx * j] = sum;
        }
    }
    std::vector<double> noise(nx * ny, 0.0);
    for (std::size_t j = 0; j < ny; ++j) {
        for (std::size_t k = 0; k < kernel.size(); ++k) {
            for (std::size_t i = 0; i < nx; ++i) {
                noise[i + nx * j] += kernel[k] * rows[i + nx * (j + k)];
            }
        }
    }
    return noise;
}

/// A profile without noise: means of `curve(z, width)` (kpc) in bins of `width` on [-range, range].
template <class Curve>
aureole::profiles::Profile profile(double width, double range, double sigma, Curve&& curve) {
    aureole::profiles::Profile made;
    const auto per_side = static_cast<int>(std::lround(range / width));
    double peak = 0;
    for (int b = -per_side; b < per_side; ++b) {
        const double z = (b + 0.5) * width;
        made.height.push_back(z * kpc);
        made.width.push_back(width * kpc);
        made.low.push_back((z - 0.5 * width) * kpc);
        made.high.push_back((z + 0.5 * width) * kpc);
        made.mean.push_back(curve(z, width));
        made.coverage.push_back(1);
        peak = std::max(peak, made.mean.back());
    }
    const auto bins = static_cast<Eigen::Index>(made.mean.size());
    made.covariance = Eigen::MatrixXd::Identity(bins, bins) * (1e-6 * peak * peak);
    made.errors = aureole::profiles::ErrorSource::noiseless;
    made.beam_x = made.beam_y = sigma * kpc;
    return made;
}

} // namespace synthetic
