#include "aureole/physics/inverse_compton.hpp"

#include "photon_table.hpp"

#include "aureole/base/constants.hpp"
#include "aureole/base/error.hpp"
#include "aureole/base/quadrature.hpp"

#include <fmt/format.h>
#include <gsl/gsl_errno.h>
#include <gsl/gsl_sf_dilog.h>

#include <algorithm>
#include <array>
#include <cmath>
#include <limits>

namespace aureole::physics {

namespace {

constexpr double rest = constants::electron_rest_energy;
constexpr double thomson_rate = constants::thomson_cross_section * constants::speed_of_light; // cm3 s-1

/// The bracket of the isotropic kernel; recoil = (Gq)^2/(2(1 + Gq)) = z^2/(2(1 - z)) does not depend on the
/// target photon.
double bracket(double q, double recoil) {
    return 2 * q * std::log(q) + (1 - q) * (1 + 2 * q + recoil);
}

double recoil_term(double z) {
    return z * z / (2 * (1 - z));
}

/// 3 sigma_T c/(4 gamma^2) [cm3 s-1]: the rate per eps1 is this times int n(eps)/eps bracket d eps,
/// energies in erg.
double kernel_scale(double gamma) {
    return 3 * thomson_rate / (4 * gamma * gamma);
}

const QuadratureRule& panel_rule() {
    static const QuadratureRule rule = gauss_legendre(14);
    return rule;
}

/// int_low^high x/(e^x - 1) bracket(first/x) dx: pieces of equal ratio below 1, of growing width above.
double blackbody_integral(double first, double high, double recoil) {
    constexpr double ratio = 2.2; // of a piece, in ln x
    const double smallest = std::max(first, 1e-14);
    double sum = 0;
    double from = smallest;
    const double joint = std::min(high, std::max(smallest, 1.0));
    if (joint > from) {
        const int panels = static_cast<int>(std::ceil(std::log(joint / from) / ratio));
        sum += integrate_panels(
            panel_rule(),
            [&](double y) {
                const double x = std::exp(y);
                return x * x / std::expm1(x) * bracket(std::min(1.0, first / x), recoil);
            },
            std::log(from), std::log(joint), panels);
        from = joint;
    }
    constexpr std::array<double, 9> width{1, 2, 3, 4, 5, 6, 7, 8, 9};
    for (std::size_t i = 0; i < width.size() && from < high; ++i) {
        const double to = std::min(high, from + width[i]);
        sum += integrate(
            panel_rule(),
            [&](double x) { return x / std::expm1(x) * bracket(std::min(1.0, first / x), recoil); }, from,
            to);
        from = to;
    }
    return sum;
}

} // namespace

double minimum_target_energy(double gamma, double eps1) {
    const double z = eps1 / (gamma * rest);
    return z < 1 ? rest * z / (4 * gamma * (1 - z)) : std::numeric_limits<double>::infinity();
}

double inverse_compton_kernel(double gamma, double eps, double eps1) {
    const double z = eps1 / (gamma * rest);
    if (!(z > 0 && z < 1)) {
        return 0;
    }
    const double q = minimum_target_energy(gamma, eps1) / eps;
    if (q > 1 || q * 4 * gamma * gamma < 1) {
        return 0;
    }
    return std::max(0.0, kernel_scale(gamma) / eps * bracket(q, recoil_term(z)));
}

double inverse_compton_kernel(double gamma, double eps, double eps1, double mu) {
    const double z = eps1 / (gamma * rest);
    const double b = 2 * (1 - mu) * eps / rest * gamma;
    if (!(z > 0 && z < 1) || !(z * (1 + b) <= b)) {
        return 0;
    }
    const double w = z / (b * (1 - z));
    return std::max(0.0, kernel_scale(gamma) / eps * (1 + z * z / (2 * (1 - z)) - 2 * w + 2 * w * w));
}

double klein_nishina_loss_factor(double b) {
    if (b < 0.25) {
        // 9 int_0^1 q [2q ln q + (1+2q)(1-q)]/(1+bq)^3 dq + (9/2) b^2 int_0^1 q^3 (1-q)/(1+bq)^4 dq, in
        // powers of -b
        double sum = 0;
        double power = 1;
        for (int n = 0; n < 40 && std::abs(power) > 1e-20; ++n) {
            const double a = n;
            const double thomson = -2 / ((a + 3) * (a + 3)) + 1 / (a + 2) + 1 / (a + 3) - 2 / (a + 4);
            const double recoil = 1 / (a + 4) - 1 / (a + 5);
            sum += power *
                   ((a + 1) * (a + 2) / 2 * thomson + b * b / 2 * (a + 1) * (a + 2) * (a + 3) / 6 * recoil);
            power *= -b;
        }
        return 9 * sum;
    }
    static const bool quiet =
        (gsl_set_error_handler_off(), true); // GSL would abort the program instead of returning a code
    static_cast<void>(quiet);
    gsl_sf_result dilogarithm;
    const int status = gsl_sf_dilog_e(-b, &dilogarithm);
    if (status != GSL_SUCCESS) {
        throw Error(ErrorKind::runtime, fmt::format("Klein-Nishina loss factor at b = {}: GSL found '{}'", b,
                                                    gsl_strerror(status)));
    }
    const double polynomial = ((11.0 / 12 * b + 6) * b + 9) * b + 4;
    return 9 / (b * b * b) *
           ((b / 2 + 6 + 6 / b) * std::log1p(b) - polynomial / ((1 + b) * (1 + b)) - 2 + 2 * dilogarithm.val);
}

double klein_nishina_rate_factor(double b) {
    if (b == 0) {
        return 1;
    }
    // 3 int_0^1 bracket/(1 + bq)^2 dq with q = (e^u - 1)/b; u = v^4 tames q ln q at 0
    const double high = std::sqrt(std::sqrt(std::log1p(b)));
    return 3 * integrate_panels(
                   panel_rule(),
                   [&](double v) {
                       const double u = v * v * v * v;
                       const double scattered = std::expm1(u); // b q
                       const double q = std::min(1.0, scattered / b);
                       if (q == 0) {
                           return 0.0;
                       }
                       return 4 * v * v * v * bracket(q, scattered * scattered / (2 * (1 + scattered))) /
                              (b * (1 + scattered));
                   },
                   0, high, 4);
}

double inverse_compton_rate(double gamma, double eps, double photon_density) {
    return thomson_rate * photon_density * klein_nishina_rate_factor(4 * gamma * eps / rest);
}

double minimum_lorentz_factor(double eps, double eps1) {
    const double half = eps1 / (2 * rest);
    return half + std::sqrt(half * half + eps1 / (4 * eps));
}

double inverse_compton_blackbody_kernel(double gamma, double eps1, double temperature) {
    const double z = eps1 / (gamma * rest);
    if (!(z > 0 && z < 1)) {
        return 0;
    }
    const double thermal = constants::boltzmann * temperature;
    const double first = minimum_target_energy(gamma, eps1) / thermal;
    if (!(first < 700)) {
        return 0;
    }
    const double high = std::min(first * 4 * gamma * gamma, std::max(first, 1.0) + 45);
    constexpr double unit_energy_density =
        15 / (constants::pi * constants::pi * constants::pi * constants::pi);
    return kernel_scale(gamma) * unit_energy_density / (thermal * thermal) *
           blackbody_integral(first, high, recoil_term(z));
}

double inverse_compton_tabulated_kernel(double gamma,
                                        double eps1,
                                        std::span<const double> energy,
                                        std::span<const double> density) {
    photon_table::check(energy, density);
    const double z = eps1 / (gamma * rest);
    if (!(z > 0 && z < 1)) {
        return 0;
    }
    const double first = minimum_target_energy(gamma, eps1);
    const double last = first * 4 * gamma * gamma;
    double sum = 0;
    for (std::size_t i = 1; i < energy.size(); ++i) {
        const photon_table::Segment segment{energy[i - 1], energy[i], density[i - 1], density[i]};
        const double from = std::max(segment.e0, first);
        const double to = std::min(segment.e1, last);
        if (!(to > from) || segment.empty()) {
            continue;
        }
        sum += integrate_panels(
            panel_rule(),
            [&](double y) {
                const double e = std::exp(y);
                return segment.at(e) * bracket(std::min(1.0, first / e), recoil_term(z));
            },
            std::log(from), std::log(to), segment.panels(from, to));
    }
    return kernel_scale(gamma) * sum;
}

} // namespace aureole::physics
