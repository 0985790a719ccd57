#include "aureole/profiles/heights.hpp"

#include <fmt/format.h>

#include <algorithm>
#include <cmath>
#include <limits>

namespace aureole::profiles {

namespace {

constexpr double nothing = std::numeric_limits<double>::quiet_NaN();

} // namespace

CombinedHeight
combine(std::span<const HeightResult* const> fits, std::span<const double> fluxes, std::size_t component) {
    CombinedHeight mean;
    mean.component = component;
    double flux = 0;
    double sum = 0;
    double noise = 0;
    double scatter = 0;
    double numerical = 0;
    bool numerical_known = true;
    const auto counts = [&](std::size_t k) {
        return usable(fits[k]->status) && fluxes[k] > 0 && component < fits[k]->component.size() &&
               !fits[k]->component[component].upper_limit;
    };
    for (std::size_t k = 0; k < fits.size(); ++k) {
        if (!counts(k)) {
            continue;
        }
        const Component& part = fits[k]->component[component];
        mean.strips += 1;
        flux += fluxes[k];
        sum += fluxes[k] * part.h;
        noise += std::pow(fluxes[k] * part.h_err_noise, 2);
        scatter += std::pow(fluxes[k] * part.h_err_scatter, 2);
        numerical += fluxes[k] * part.numerical_error.value_or(0);
        numerical_known = numerical_known && part.numerical_error.has_value();
    }
    if (mean.strips == 0) {
        mean.h = mean.error = mean.error_scatter = mean.strip_scatter = nothing;
        return mean;
    }
    mean.h = sum / flux;
    mean.error = std::sqrt(noise) / flux;
    mean.error_scatter = std::sqrt(scatter) / flux;
    if (numerical_known) {
        mean.numerical_error = numerical / flux;
    }
    double spread = 0;
    for (std::size_t k = 0; k < fits.size(); ++k) {
        if (counts(k)) {
            spread += fluxes[k] * std::pow(fits[k]->component[component].h - mean.h, 2);
        }
    }
    const auto n = static_cast<double>(mean.strips);
    mean.strip_scatter = mean.strips > 1 ? std::sqrt(spread / flux * n / (n - 1)) : nothing;
    return mean;
}

HeightExponent
fit_exponent(std::span<const double> frequency, std::span<const double> h, std::span<const double> error) {
    HeightExponent fit;
    fit.maps = frequency.size();
    fit.frequency = fit.h0 = fit.h0_error = fit.eta = fit.eta_error = nothing;
    double weight = 0;
    double x_mean = 0;
    double y_mean = 0;
    for (std::size_t k = 0; k < frequency.size(); ++k) {
        if (!(frequency[k] > 0) || !(h[k] > 0) || !(error[k] > 0) || !std::isfinite(h[k] + error[k])) {
            fit.problem = "a frequency, a height or its error is not positive";
            return fit;
        }
        const double w = std::pow(h[k] / error[k], 2);
        weight += w;
        x_mean += w * std::log(frequency[k]);
        y_mean += w * std::log(h[k]);
    }
    if (frequency.size() < 2) {
        fit.problem = fmt::format("{} heights that can be used, expected 2 or more", frequency.size());
        return fit;
    }
    x_mean /= weight;
    y_mean /= weight;
    double xx = 0;
    double xy = 0;
    for (std::size_t k = 0; k < frequency.size(); ++k) {
        const double w = std::pow(h[k] / error[k], 2);
        const double x = std::log(frequency[k]) - x_mean;
        xx += w * x * x;
        xy += w * x * (std::log(h[k]) - y_mean);
    }
    if (!(xx > 1e-12 * weight)) {
        fit.problem = "all maps have one frequency";
        return fit;
    }
    fit.frequency = std::exp(x_mean);
    fit.h0 = std::exp(y_mean);
    fit.h0_error = fit.h0 / std::sqrt(weight);
    fit.eta = xy / xx;
    fit.eta_error = 1 / std::sqrt(xx);
    for (std::size_t k = 0; k < frequency.size(); ++k) {
        const double model = y_mean + fit.eta * (std::log(frequency[k]) - x_mean);
        fit.chi2 += std::pow((std::log(h[k]) - model) * h[k] / error[k], 2);
    }
    fit.dof = static_cast<double>(frequency.size()) - 2;
    return fit;
}

std::optional<std::size_t> choose(std::span<const ModelScore> scores) {
    std::optional<std::size_t> best;
    std::vector<std::size_t> order(scores.size());
    for (std::size_t k = 0; k < order.size(); ++k) {
        order[k] = k;
    }
    std::stable_sort(order.begin(), order.end(), [&](std::size_t a, std::size_t b) {
        return scores[a].parameters < scores[b].parameters;
    });
    for (const std::size_t k : order) {
        if (!std::isfinite(scores[k].aicc)) {
            continue;
        }
        const double needed = best && scores[k].parameters > scores[*best].parameters ? 6 : 0;
        if (!best || scores[k].aicc < scores[*best].aicc - needed) {
            best = k;
        }
    }
    return best;
}

} // namespace aureole::profiles
