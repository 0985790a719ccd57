#include "aureole/physics/synchrotron.hpp"

#include "aureole/base/error.hpp"

#include <fmt/format.h>
#include <gsl/gsl_errno.h>
#include <gsl/gsl_sf_bessel.h>
#include <gsl/gsl_sf_hyperg.h>
#include <gsl/gsl_sf_synchrotron.h>

#include <algorithm>
#include <array>
#include <cmath>
#include <limits>

namespace aureole::physics {

namespace {

constexpr double underflow = 745; // exp(-x) is 0 above

using GslFunction = int (*)(double, gsl_sf_result*);

/// GSL would abort the program on an error instead of returning its code.
void quiet_gsl() {
    static const bool quiet = (gsl_set_error_handler_off(), true);
    static_cast<void>(quiet);
}

double checked(int status, const gsl_sf_result& result, const char* what) {
    if (status == GSL_EUNDRFLW) {
        return 0;
    }
    if (status != GSL_SUCCESS) {
        throw Error(ErrorKind::runtime, fmt::format("{}: GSL found '{}'", what, gsl_strerror(status)));
    }
    return result.val;
}

double evaluate(GslFunction function, double x, const char* what) {
    if (std::isnan(x) || x < 0) {
        return std::numeric_limits<double>::quiet_NaN();
    }
    if (x == 0 || x > underflow) {
        return 0;
    }
    gsl_sf_result result;
    quiet_gsl();
    return checked(function(x, &result), result, what);
}

/// I_2(z)/I_0(z) from the scaled i0 and i1; the recurrence cancels at small z, where the series takes over.
double second_order_ratio(double z, double i0, double i1) {
    if (z > 0.3) {
        return 1 - 2 * i1 / (z * i0);
    }
    const double y = z * z / 4;
    const double i2 = y / 2 * (1 + y / 3 * (1 + y / 8 * (1 + y / 15 * (1 + y / 24))));
    const double unscaled = 1 + y * (1 + y / 4 * (1 + y / 9 * (1 + y / 16 * (1 + y / 25))));
    return i2 / unscaled;
}

/// Where the integrand of the Rice average is largest, roughly: the root of b (b - b0)/var = x/b + 8/3.
double integrand_peak(double x, double b0, double variance) {
    double low = b0;
    double high = b0 + std::cbrt(x * variance) + 3 * std::sqrt(variance);
    for (int i = 0; i < 40; ++i) {
        const double b = 0.5 * (low + high);
        (b * (b - b0) > variance * (x / b + 8.0 / 3.0) ? high : low) = b;
    }
    return 0.5 * (low + high);
}

/// Trapezium step in ln b for a relative error of about 1e-11. Off the real axis by theta the integrand
/// grows at most by the factor exp(growth), so the error is exp(growth - 2 pi theta/step); the best theta
/// gives the widest step.
double rice_step(double ordered, double cut) { // b0^2/(2 var), x/b at the peak
    constexpr double depth = 31;
    double widest = 0;
    for (const double theta :
         {0.7, 0.6, 0.5, 0.4, std::min(0.3, std::sqrt(depth / (1 + ordered + 1.5 * cut)))}) {
        const double c = std::cos(theta);
        const double c2 = 2 * c * c - 1;
        const double growth = ordered * (1 - c * c) / c2 + 1.5 * cut * (1 - std::cbrt(c * c * c2));
        widest = std::max(widest, 2 * constants::pi * theta / (depth + growth));
    }
    return widest;
}

/// Coefficients of z^-1, z^-2, ... in 2z/pi e^2z times the bracket of the closed form of R: the term z^0 is
/// 0 exactly, which is what the closed form loses its digits to.
constexpr auto random_kernel_series = [] {
    constexpr std::size_t terms = 24;
    std::array<double, terms + 2> high{1}, low{1}; // Hankel's series of K_{4/3}, K_{1/3}
    for (std::size_t k = 1; k < high.size(); ++k) {
        const double odd = static_cast<double>(2 * k - 1);
        const double divisor = 8 * static_cast<double>(k);
        high[k] = high[k - 1] * (64.0 / 9 - odd * odd) / divisor;
        low[k] = low[k - 1] * (4.0 / 9 - odd * odd) / divisor;
    }
    std::array<double, terms> series{};
    for (std::size_t n = 1; n <= terms; ++n) {
        for (std::size_t k = 0; k <= n; ++k) {
            series[n - 1] += high[k] * low[n - k];
        }
        for (std::size_t k = 1; k <= n + 1; ++k) {
            series[n - 1] -= 0.6 * (high[k] - low[k]) * (high[n + 1 - k] + low[n + 1 - k]);
        }
    }
    return series;
}();

double power_law_amplitude(double k, double s, double frequency) {
    if (!(s > 1.0 / 3.0)) {
        throw Error(
            ErrorKind::runtime,
            fmt::format("synchrotron emissivity of a power law: found the slope {}, expected more than 1/3",
                        s));
    }
    return k * synchrotron_power_constant / (4 * constants::pi) * std::pow(2.0, (s - 1) / 2) / (s + 1) *
           std::tgamma(s / 4 + 19.0 / 12) * std::tgamma(s / 4 - 1.0 / 12) *
           std::pow(frequency / synchrotron_critical_constant, -(s - 1) / 2);
}

/// 1F1(a; b; -z), z >= 0; by its asymptotic series where GSL's own evaluation overflows.
double confluent(double a, double b, double z) {
    if (z > 40) {
        double term = 1;
        double sum = 1;
        for (int n = 0; n < 60 && std::abs(term) > 1e-17; ++n) {
            term *= (a + n) * (a - b + 1 + n) / ((n + 1) * z);
            sum += term;
        }
        return std::tgamma(b) / std::tgamma(b - a) * std::pow(z, -a) * sum;
    }
    gsl_sf_result result;
    quiet_gsl();
    return checked(gsl_sf_hyperg_1F1_e(a, b, -z, &result), result, "confluent hypergeometric function");
}

} // namespace

double synchrotron_f(double x) {
    return evaluate(gsl_sf_synchrotron_1_e, x, "synchrotron function F");
}

double synchrotron_g(double x) {
    return evaluate(gsl_sf_synchrotron_2_e, x, "synchrotron function G");
}

double synchrotron_random(double x) {
    if (std::isnan(x) || x < 0) {
        return std::numeric_limits<double>::quiet_NaN();
    }
    if (x > underflow) {
        return 0;
    }
    if (x < 1e-30) {
        const double third = std::tgamma(1.0 / 3);
        return std::cbrt(x) * std::pow(4.0, 5.0 / 3) / 2 * third * third * (1.0 / 12 - 1.0 / 30);
    }
    const double z = x / 2;
    if (x > 60) {
        double sum = 0;
        for (std::size_t n = random_kernel_series.size(); n > 0; --n) {
            sum = (sum + random_kernel_series[n - 1]) / z;
        }
        return constants::pi * z * std::exp(-x) * sum;
    }
    quiet_gsl();
    gsl_sf_result high, low; // both scaled by exp(z)
    const double k43 = checked(gsl_sf_bessel_Knu_scaled_e(4.0 / 3, z, &high), high, "Bessel function K");
    const double k13 = checked(gsl_sf_bessel_Knu_scaled_e(1.0 / 3, z, &low), low, "Bessel function K");
    return x * x / 2 * std::exp(-x) * (k43 * k13 - 0.6 * z * (k43 - k13) * (k43 + k13));
}

MixedField mixed_field(double x, double order) {
    if (!(order >= 0 && order <= 1) || !(x >= 0)) {
        throw Error(
            ErrorKind::runtime,
            fmt::format(
                "synchrotron in a mixed field: found x = {}, order = {}, expected x >= 0 and 0 <= order <= 1",
                x, order));
    }
    if (x == 0 || std::isinf(x)) {
        return {};
    }
    if (1 - order < 1e-14) {
        return {synchrotron_f(x), synchrotron_g(x)};
    }
    // Trapezium in ln b, walked from the peak to both sides. The integrand is analytic in a strip of
    // half-width pi/4 and dies off at both ends, so the error falls exponentially with the step.
    const double b0 = std::sqrt(order);
    const double variance = (1 - order) / 2;
    const double peak = integrand_peak(x, b0, variance);
    const double step = rice_step(order / (2 * variance), x / peak);
    const double offset = peak - b0;
    quiet_gsl();
    MixedField sum;
    const auto add = [&](int k) {
        const double b = peak * std::exp(k * step);
        const double away = offset + peak * std::expm1(k * step);
        const double z = b * b0 / variance;
        gsl_sf_result i0, i1;
        checked(gsl_sf_bessel_I0_scaled_e(z, &i0), i0, "Bessel function I");
        checked(gsl_sf_bessel_I1_scaled_e(z, &i1), i1, "Bessel function I");
        const double weight = b * b * b / variance * std::exp(-away * away / (2 * variance)) * i0.val;
        const double term = weight * synchrotron_f(x / b);
        sum.total += term;
        sum.polarised += weight * synchrotron_g(x / b) * second_order_ratio(z, i0.val, i1.val);
        return term;
    };
    add(0);
    constexpr double negligible = 1e-13;
    constexpr int most = 500; // never reached: both tails fall off faster
    for (int k = 1; k < most && add(k) > negligible * sum.total; ++k) {
    }
    for (int k = 1; k < most && add(-k) > negligible * sum.total; ++k) {
    }
    return {sum.total * step, sum.polarised * step};
}

double mixed_field_f(double x, double order) {
    return mixed_field(x, order).total;
}

double mixed_field_g(double x, double order) {
    return mixed_field(x, order).polarised;
}

double power_law_emissivity_ordered(double k, double s, double field_across, double frequency) {
    return power_law_amplitude(k, s, frequency) * std::pow(field_across, (s + 1) / 2);
}

double power_law_emissivity_random(double k, double s, double field, double frequency) {
    return power_law_amplitude(k, s, frequency) * std::pow(field, (s + 1) / 2) * std::sqrt(constants::pi) /
           2 * std::tgamma((s + 5) / 4) / std::tgamma((s + 7) / 4);
}

MixedField power_law_emissivity_mixed(double k, double s, double b0, double sigma, double frequency) {
    if (sigma == 0) {
        const double total = power_law_emissivity_ordered(k, s, b0, frequency);
        return {total, total * maximum_polarisation(s)};
    }
    const double a = (s + 1) / 2;
    const double z = b0 * b0 / (2 * sigma * sigma);
    const double scale = power_law_amplitude(k, s, frequency) * std::pow(2 * sigma * sigma, a / 2);
    const double total = scale * std::tgamma(1 + a / 2) * confluent(-a / 2, 1, z);
    const double across = scale * std::tgamma(2 + a / 2) / 2 * z * confluent(1 - a / 2, 3, z);
    return {total, across * maximum_polarisation(s)};
}

} // namespace aureole::physics
