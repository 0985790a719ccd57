#include "aureole/profiles/profile.hpp"

#include "aureole/base/error.hpp"
#include "aureole/profiles/noise.hpp"

#include <fmt/format.h>

#include <algorithm>
#include <cmath>
#include <numbers>
#include <span>

namespace aureole::profiles {

namespace {

/// Above this many products the covariance is worked out for whole boxes instead of pixels.
constexpr double direct_limit = 1e9;

std::vector<unsigned char> good_pixels(const maps::Image& image) {
    std::vector<unsigned char> good(image.value.size());
    std::transform(image.value.begin(), image.value.end(), good.begin(),
                   [](float value) { return static_cast<unsigned char>(std::isfinite(value) ? 1 : 0); });
    return good;
}

void check_image(const maps::Image& image) {
    if (image.pixels.nx * image.pixels.ny != image.value.size() || image.value.empty()) {
        throw Error(ErrorKind::input, fmt::format("{}: found {} values, expected {} x {}", image.name,
                                                  image.value.size(), image.pixels.nx, image.pixels.ny));
    }
    if (image.beam && !(image.beam->major > 0 && image.beam->minor > 0)) {
        throw Error(ErrorKind::input,
                    image.name + ": found a beam of no width, expected none at all or widths > 0");
    }
}

bool noiseless(const ProfileSpec& spec) {
    return spec.rms && *spec.rms == 0;
}

/// The spec's wish, or scatter where there is no beam to shape the noise by.
NoiseFrom noise_from(const maps::Image& image, const ProfileSpec& spec) {
    return spec.noise == NoiseFrom::beam && !image.beam ? NoiseFrom::scatter : spec.noise;
}

/// Boxes as laid out, taken as whole: one covariance per lag.
Eigen::MatrixXd whole_box_covariance(const Strip& strip, const BeamCovariance& beam) {
    const auto bins = static_cast<Eigen::Index>(strip.box.size());
    const Box& first = strip.box.front();
    const double height = first.y_high - first.y_low;
    Eigen::VectorXd by_lag(bins);
    for (Eigen::Index lag = 0; lag < bins; ++lag) {
        by_lag(lag) =
            box_covariance(0, static_cast<double>(lag) * height, first.x_high - first.x_low, height, beam);
    }
    Eigen::MatrixXd covariance(bins, bins);
    for (Eigen::Index a = 0; a < bins; ++a) {
        for (Eigen::Index b = 0; b < bins; ++b) {
            covariance(a, b) = by_lag(std::abs(a - b));
        }
    }
    return covariance;
}

double products(const Strip& strip, const LagTable& correlation) {
    double pixels = 0;
    for (const Box& box : strip.box) {
        pixels += static_cast<double>(box.pixel.size());
    }
    return pixels * static_cast<double>(correlation.value.size());
}

struct Level {
    double rms = 0, background = 0;
};

Level level_of(const maps::Image& image, const ProfileSpec& spec, NoiseFrom from) {
    Level level{spec.rms.value_or(0), 0};
    const bool measure_rms = !spec.rms && from != NoiseFrom::scatter;
    if (spec.background == BackgroundFrom::given) {
        level.background = spec.background_level;
    }
    if (measure_rms || spec.background == BackgroundFrom::measured) {
        const MeasuredNoise noise = measure_noise(image, source_free_pixels(image.pixels, spec));
        level.rms = measure_rms ? noise.rms : level.rms;
        level.background = spec.background == BackgroundFrom::measured ? noise.level : level.background;
    }
    return level;
}

/// Mean, heights and scatter of one box.
struct BoxMean {
    double area = 0, mean = 0, variance = 0, height = 0, height_variance = 0;
    double pixels = 0;
};

BoxMean mean_of(const Box& box, const maps::Image& image, std::span<const double> pixel_height) {
    BoxMean sum;
    for (std::size_t k = 0; k < box.pixel.size(); ++k) {
        const auto value = static_cast<double>(image.value[box.pixel[k]]);
        if (!std::isfinite(value)) {
            continue;
        }
        sum.area += box.area[k];
        sum.mean += box.area[k] * value;
        sum.height += box.area[k] * pixel_height[box.pixel[k]];
        sum.pixels += 1;
    }
    if (!(sum.area > 0)) {
        return sum;
    }
    sum.mean /= sum.area;
    sum.height /= sum.area;
    for (std::size_t k = 0; k < box.pixel.size(); ++k) {
        const auto value = static_cast<double>(image.value[box.pixel[k]]);
        if (std::isfinite(value)) {
            sum.variance += box.area[k] / sum.area * std::pow(value - sum.mean, 2);
            sum.height_variance +=
                box.area[k] / sum.area * std::pow(pixel_height[box.pixel[k]] - sum.height, 2);
        }
    }
    return sum;
}

/// Variance of the heights inside one pixel, cm2.
double own_variance(const maps::PixelGrid& pixels, const ProfileSpec& spec) {
    const auto origin = strip_position(pixels, spec, 0, 0);
    const auto right = strip_position(pixels, spec, 1, 0);
    const auto up = strip_position(pixels, spec, 0, 1);
    return (std::pow(right[1] - origin[1], 2) + std::pow(up[1] - origin[1], 2)) / 12;
}

/// Boxes of noise are as good as their beams are many, and never better than one.
Eigen::MatrixXd scatter_covariance(std::span<const BoxMean> means, double beam_area) {
    Eigen::VectorXd variance(static_cast<Eigen::Index>(means.size()));
    for (std::size_t b = 0; b < means.size(); ++b) {
        const double count = beam_area > 0 ? means[b].area / beam_area : means[b].pixels;
        variance(static_cast<Eigen::Index>(b)) = means[b].variance / std::max(1.0, count);
    }
    const double largest = variance.size() > 0 ? variance.maxCoeff() : 0;
    return variance.cwiseMax(1e-12 * largest).asDiagonal();
}

Eigen::MatrixXd uniform_covariance(std::span<const double> mean) {
    double peak = 0;
    for (const double value : mean) {
        peak = std::max(peak, std::abs(value));
    }
    const auto bins = static_cast<Eigen::Index>(mean.size());
    return Eigen::MatrixXd::Identity(bins, bins) * (1e-6 * peak * peak);
}

Eigen::MatrixXd chosen_rows(const Eigen::MatrixXd& all, std::span<const std::size_t> kept) {
    const auto bins = static_cast<Eigen::Index>(kept.size());
    Eigen::MatrixXd part(bins, bins);
    for (Eigen::Index a = 0; a < bins; ++a) {
        for (Eigen::Index b = 0; b < bins; ++b) {
            part(a, b) = all(static_cast<Eigen::Index>(kept[static_cast<std::size_t>(a)]),
                             static_cast<Eigen::Index>(kept[static_cast<std::size_t>(b)]));
        }
    }
    return part;
}

ErrorSource source_of(NoiseFrom from) {
    switch (from) {
    case NoiseFrom::beam:
        return ErrorSource::beam;
    case NoiseFrom::autocorrelation:
        return ErrorSource::autocorrelation;
    case NoiseFrom::scatter:
        break;
    }
    return ErrorSource::scatter;
}

Profile profile_of(const Strip& strip,
                   const Eigen::MatrixXd& unit,
                   const maps::Image& image,
                   const ProfileSpec& spec,
                   const Level& level,
                   std::span<const double> pixel_height) {
    Profile profile;
    profile.x_low = strip.x_low;
    profile.x_high = strip.x_high;
    profile.rms = level.rms;
    profile.background = level.background;
    profile.frequency = image.frequency;
    profile.unit = image.unit;
    double beam_area = 0;
    if (image.beam) {
        const BeamCovariance beam = beam_in_strips(*image.beam, spec);
        profile.beam_x = std::sqrt(beam.xx);
        profile.beam_y = std::sqrt(beam.yy);
        beam_area = 2 * std::numbers::pi * std::sqrt(beam.xx * beam.yy - beam.xy * beam.xy);
    }
    const double inside = spec.pixel_meaning == PixelMeaning::averages ? own_variance(image.pixels, spec) : 0;
    std::vector<BoxMean> means;
    std::vector<std::size_t> kept;
    for (std::size_t b = 0; b < strip.box.size(); ++b) {
        const Box& box = strip.box[b];
        const BoxMean mean = mean_of(box, image, pixel_height);
        const double whole = (box.x_high - box.x_low) * (box.y_high - box.y_low);
        if (!(mean.area >= spec.least_coverage * whole * (1 - 1e-9))) {
            continue;
        }
        kept.push_back(b);
        means.push_back(mean);
        profile.height.push_back(mean.height);
        profile.width.push_back(std::sqrt(12 * (mean.height_variance + inside)));
        profile.low.push_back(box.y_low);
        profile.high.push_back(box.y_high);
        profile.mean.push_back(mean.mean - level.background);
        profile.coverage.push_back(mean.area / whole);
        profile.flux += profile.mean.back() * whole;
    }
    if (noiseless(spec)) {
        profile.errors = ErrorSource::noiseless;
        profile.covariance = uniform_covariance(profile.mean);
    } else if (unit.size() == 0) {
        profile.errors = ErrorSource::scatter;
        profile.covariance = scatter_covariance(means, beam_area);
    } else {
        profile.errors = source_of(noise_from(image, spec));
        profile.covariance = level.rms * level.rms * chosen_rows(unit, kept);
    }
    return profile;
}

} // namespace

std::string to_string(ErrorSource source) {
    switch (source) {
    case ErrorSource::beam:
        return "beam";
    case ErrorSource::autocorrelation:
        return "autocorrelation";
    case ErrorSource::scatter:
        return "scatter";
    case ErrorSource::noiseless:
        break;
    }
    return "noiseless";
}

Plan plan(const maps::Image& image, const ProfileSpec& spec) {
    check_image(image);
    Plan made;
    made.strips = spec.strips > 1 ? lay_strips(image.pixels, spec) : std::vector<Strip>{};
    made.strips.push_back(lay_strips(image.pixels, spec, true).front());
    made.covariance.resize(made.strips.size());
    const NoiseFrom from = noise_from(image, spec);
    if (noiseless(spec) || from == NoiseFrom::scatter) {
        return made;
    }
    LagTable correlation;
    if (from == NoiseFrom::beam) {
        correlation = beam_correlation(image.pixels, *image.beam);
    } else {
        const auto free = source_free_pixels(image.pixels, spec);
        correlation = measured_correlation(image, free, measure_noise(image, free));
    }
    const auto good = good_pixels(image);
    for (std::size_t s = 0; s < made.strips.size(); ++s) {
        const bool direct = from != NoiseFrom::beam || products(made.strips[s], correlation) < direct_limit;
        made.covariance[s] = direct ? unit_covariance(image.pixels, made.strips[s], good, correlation)
                                    : whole_box_covariance(made.strips[s], beam_in_strips(*image.beam, spec));
    }
    return made;
}

std::vector<Profile> measure(const maps::Image& image, const ProfileSpec& spec) {
    return measure(image, spec, plan(image, spec));
}

std::vector<Profile> measure(const maps::Image& image, const ProfileSpec& spec, const Plan& plan) {
    check_image(image);
    const Level level = level_of(image, spec, noise_from(image, spec));
    std::vector<double> pixel_height(image.value.size());
    const auto origin = strip_position(image.pixels, spec, 0, 0);
    const auto right = strip_position(image.pixels, spec, 1, 0);
    const auto up = strip_position(image.pixels, spec, 0, 1);
    for (std::size_t j = 0; j < image.pixels.ny; ++j) {
        for (std::size_t i = 0; i < image.pixels.nx; ++i) {
            pixel_height[i + image.pixels.nx * j] = origin[1] +
                                                    static_cast<double>(i) * (right[1] - origin[1]) +
                                                    static_cast<double>(j) * (up[1] - origin[1]);
        }
    }
    std::vector<Profile> profiles;
    std::size_t bins = 0;
    for (std::size_t s = 0; s < plan.strips.size(); ++s) {
        profiles.push_back(profile_of(plan.strips[s], plan.covariance[s], image, spec, level, pixel_height));
        profiles.back().strip = s + 1 == plan.strips.size() ? -1 : static_cast<int>(s);
        bins += profiles.back().height.size();
    }
    if (bins == 0) {
        throw Error(
            ErrorKind::input,
            fmt::format("{}: found no box with {} of its area on good pixels; expected strips on the map",
                        image.name, spec.least_coverage));
    }
    return profiles;
}

} // namespace aureole::profiles
