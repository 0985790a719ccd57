#include "aureole/base/constants.hpp"
#include "aureole/base/error.hpp"
#include "aureole/maps/image.hpp"

#include <fftw3.h>
#include <fmt/format.h>

#include <algorithm>
#include <cctype>
#include <cmath>
#include <memory>
#include <mutex>

namespace aureole::maps {

namespace {

/// Symmetric 2 x 2 matrix.
struct Covariance {
    double xx = 0, xy = 0, yy = 0;
};

double variance(double width) {
    return width * width / (8 * std::log(2.0));
}

/// Of a beam on the sky, rad2; x East, y North.
Covariance covariance(const Beam& beam) {
    const double cosine = std::cos(beam.position_angle);
    const double sine = std::sin(beam.position_angle);
    const double major = variance(beam.major);
    const double minor = variance(beam.minor);
    return {major * sine * sine + minor * cosine * cosine, (major - minor) * sine * cosine,
            major * cosine * cosine + minor * sine * sine};
}

std::string describe(const Beam& beam) {
    return fmt::format("{:.6g} x {:.6g} arcsec at position angle {:.6g} deg",
                       beam.major / constants::arcsecond, beam.minor / constants::arcsecond,
                       beam.position_angle / constants::degree);
}

void check_beam(const Beam& beam, const std::string& name) {
    if (!(beam.major > 0) || !(beam.minor > 0) || !std::isfinite(beam.major) || !std::isfinite(beam.minor) ||
        !std::isfinite(beam.position_angle)) {
        throw Error(ErrorKind::input,
                    fmt::format("{}: found a beam of {}, expected widths > 0", name, describe(beam)));
    }
}

/// What has to be folded with the image to turn its beam into `target`, rad2. Throws if that is not a
/// Gaussian.
Covariance kernel_covariance(const Image& image, const Beam& target) {
    const Covariance wanted = covariance(target);
    const Covariance present = image.beam ? covariance(*image.beam) : Covariance{};
    const Covariance kernel{wanted.xx - present.xx, wanted.xy - present.xy, wanted.yy - present.yy};
    const double middle = 0.5 * (kernel.xx + kernel.yy);
    const double half = std::hypot(0.5 * (kernel.xx - kernel.yy), kernel.xy);
    // Beams read from headers have some 7 digits.
    if (image.beam && middle - half < -1e-6 * (wanted.xx + wanted.yy)) {
        throw Error(
            ErrorKind::input,
            fmt::format(
                "{}: the beam asked for, {}, is narrower than the map's own, {}, in some direction; expected "
                "one that holds it",
                image.name.empty() ? "map" : image.name, describe(target), describe(*image.beam)));
    }
    return kernel;
}

/// The same in pixels2, along the pixel axes.
Covariance in_pixels(const Covariance& sky, const PixelGrid& pixels) {
    const double cosine = std::cos(pixels.rotation);
    const double sine = std::sin(pixels.rotation);
    const double xx = sky.xx / (pixels.step_x * pixels.step_x);
    const double xy = sky.xy / (pixels.step_x * pixels.step_y);
    const double yy = sky.yy / (pixels.step_y * pixels.step_y);
    return {cosine * cosine * xx + 2 * cosine * sine * xy + sine * sine * yy,
            cosine * sine * (yy - xx) + (cosine * cosine - sine * sine) * xy,
            sine * sine * xx - 2 * cosine * sine * xy + cosine * cosine * yy};
}

/// Smallest product of 2, 3, 5 and 7 from `size` on, which FFTW is fast at.
std::size_t fast_size(std::size_t size) {
    for (;; ++size) {
        std::size_t rest = size;
        for (const std::size_t factor : {2U, 3U, 5U, 7U}) {
            while (rest % factor == 0) {
                rest /= factor;
            }
        }
        if (rest == 1) {
            return size;
        }
    }
}

struct FreeFftw {
    void operator()(double* memory) const { fftw_free(memory); }
};
struct FreePlan {
    void operator()(fftw_plan_s* plan) const;
};

/// FFTW's planner keeps a state that threads must not share.
std::mutex& planner_lock() {
    static std::mutex lock;
    return lock;
}

void FreePlan::operator()(fftw_plan_s* plan) const {
    const std::lock_guard guard(planner_lock());
    fftw_destroy_plan(plan);
}

/// A padded array, transformed in place.
struct Transform {
    std::size_t nx, ny; ///< padded
    std::size_t row;    ///< doubles per row
    std::unique_ptr<double, FreeFftw> memory;
    std::unique_ptr<fftw_plan_s, FreePlan> forward, backward;
};

Transform make_transform(std::size_t nx, std::size_t ny) {
    Transform transform{nx, ny, 2 * (nx / 2 + 1), nullptr, nullptr, nullptr};
    transform.memory.reset(fftw_alloc_real(transform.row * ny));
    if (!transform.memory) {
        throw Error(ErrorKind::runtime, fmt::format("convolution: no memory for {} x {} pixels", nx, ny));
    }
    double* real = transform.memory.get();
    auto* complex = reinterpret_cast<fftw_complex*>(real);
    const std::lock_guard guard(planner_lock());
    const int rows = static_cast<int>(ny);
    const int columns = static_cast<int>(nx);
    transform.forward.reset(fftw_plan_dft_r2c_2d(rows, columns, real, complex, FFTW_ESTIMATE));
    transform.backward.reset(fftw_plan_dft_c2r_2d(rows, columns, complex, real, FFTW_ESTIMATE));
    if (!transform.forward || !transform.backward) {
        throw Error(ErrorKind::runtime,
                    fmt::format("convolution: FFTW has no plan for {} x {} pixels", nx, ny));
    }
    return transform;
}

/// exp(-2 pi^2 k^T C k) on all waves, k in cycles per pixel; 1/(number of pixels) included.
void multiply_by_kernel(Transform& transform, const Covariance& kernel) {
    const double norm = 1 / (static_cast<double>(transform.nx) * static_cast<double>(transform.ny));
    double* value = transform.memory.get();
    for (std::size_t j = 0; j < transform.ny; ++j) {
        const double wave = static_cast<double>(j) / static_cast<double>(transform.ny);
        const double ky = wave > 0.5 ? wave - 1 : wave;
        for (std::size_t i = 0; i < transform.row / 2; ++i, value += 2) {
            const double kx = static_cast<double>(i) / static_cast<double>(transform.nx);
            const double form = kernel.xx * kx * kx + 2 * kernel.xy * kx * ky + kernel.yy * ky * ky;
            const double factor = norm * std::exp(-2 * constants::pi * constants::pi * form);
            value[0] *= factor;
            value[1] *= factor;
        }
    }
}

/// Folds pixel(i, j), i < nx, j < ny, with the kernel; zero beyond. The result fills the corner of the
/// transform's memory.
template <class Pixel>
void fold(Transform& transform, const Covariance& kernel, std::size_t nx, std::size_t ny, Pixel&& pixel) {
    double* value = transform.memory.get();
    std::fill(value, value + transform.row * transform.ny, 0.0);
    for (std::size_t j = 0; j < ny; ++j) {
        for (std::size_t i = 0; i < nx; ++i) {
            value[i + transform.row * j] = pixel(i, j);
        }
    }
    fftw_execute(transform.forward.get());
    multiply_by_kernel(transform, kernel);
    fftw_execute(transform.backward.get());
}

/// Share of the kernel at each pixel that falls on blanks.
std::vector<double> blank_share(Transform& transform, const Covariance& kernel, const Image& image) {
    const std::size_t nx = image.pixels.nx;
    fold(transform, kernel, nx, image.pixels.ny,
         [&](std::size_t i, std::size_t j) { return std::isnan(image.value[i + nx * j]) ? 1.0 : 0.0; });
    std::vector<double> share(nx * image.pixels.ny);
    for (std::size_t j = 0; j < image.pixels.ny; ++j) {
        std::copy_n(transform.memory.get() + transform.row * j, nx,
                    share.begin() + static_cast<std::ptrdiff_t>(nx * j));
    }
    return share;
}

std::size_t padded(std::size_t size, double squared_sigma) {
    return fast_size(size + static_cast<std::size_t>(std::ceil(5 * std::sqrt(std::max(squared_sigma, 0.0)))));
}

bool is_per_beam(std::string unit) {
    std::transform(unit.begin(), unit.end(), unit.begin(),
                   [](unsigned char c) { return static_cast<char>(std::tolower(c)); });
    return unit.find("beam") != std::string::npos;
}

/// Replaces the image's values by their fold with the kernel, times `scale`.
void smooth(Image& image, const Covariance& kernel, double scale) {
    const std::size_t nx = image.pixels.nx;
    const std::size_t ny = image.pixels.ny;
    Transform transform = make_transform(padded(nx, kernel.xx), padded(ny, kernel.yy));
    const bool has_blanks =
        std::any_of(image.value.begin(), image.value.end(), [](float value) { return std::isnan(value); });
    const auto share = has_blanks ? blank_share(transform, kernel, image) : std::vector<double>{};
    fold(transform, kernel, nx, ny, [&](std::size_t i, std::size_t j) {
        const float value = image.value[i + nx * j];
        return std::isnan(value) ? 0.0 : static_cast<double>(value);
    });
    for (std::size_t j = 0; j < ny; ++j) {
        for (std::size_t i = 0; i < nx; ++i) {
            float& value = image.value[i + nx * j];
            if (!std::isnan(value)) {
                const double weight = has_blanks ? 1 - share[i + nx * j] : 1.0;
                value = static_cast<float>(scale * transform.memory.get()[i + transform.row * j] / weight);
            }
        }
    }
}

} // namespace

double solid_angle(const Beam& beam) {
    return constants::pi * beam.major * beam.minor / (4 * std::log(2.0));
}

Image convolve(const Image& image, const Beam& beam) {
    const std::string name = image.name.empty() ? "map" : image.name;
    check_beam(beam, name);
    if (image.beam) {
        check_beam(*image.beam, name);
    }
    if (image.value.size() != image.pixels.nx * image.pixels.ny || image.value.empty()) {
        throw Error(ErrorKind::input, fmt::format("{}: found {} values, expected {} x {} pixels", name,
                                                  image.value.size(), image.pixels.nx, image.pixels.ny));
    }
    double scale = 1;
    if (is_per_beam(image.unit)) {
        if (!image.beam) {
            throw Error(ErrorKind::input,
                        fmt::format("{}: found the unit {} without a beam, expected the beam it refers to",
                                    name, image.unit));
        }
        scale = solid_angle(beam) / solid_angle(*image.beam);
    }
    const Covariance kernel = in_pixels(kernel_covariance(image, beam), image.pixels);
    Image result = image;
    result.beam = beam;
    smooth(result, kernel, scale);
    return result;
}

} // namespace aureole::maps
