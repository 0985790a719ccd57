#include "aureole/physics/star_formation.hpp"

#include "aureole/base/constants.hpp"
#include "aureole/base/error.hpp"
#include "aureole/base/quadrature.hpp"

#include <fmt/format.h>

#include <algorithm>
#include <cmath>
#include <vector>

namespace aureole::physics {

namespace {

constexpr double solar_radius = 8.5 * constants::kiloparsec; // of the Sun's place in the fits

/// dN/dm, any normalisation.
double mass_function(InitialMassFunction imf, double m) {
    switch (imf) {
    case InitialMassFunction::salpeter_1955:
        return std::pow(m, -2.35);
    case InitialMassFunction::kroupa_2001:
        if (m < 0.08) {
            return std::pow(m / 0.08, -0.3) * std::pow(0.08 / 0.5, -1.3);
        }
        return std::pow(m / 0.5, m < 0.5 ? -1.3 : -2.3);
    case InitialMassFunction::chabrier_2003:
        break;
    }
    // per log10 m, divided by m
    if (m < 1) {
        const double distance = std::log10(m / 0.079) / 0.69;
        return 0.158 * std::exp(-0.5 * distance * distance) / m;
    }
    return 0.0443 * std::pow(m, -2.3);
}

/// int m^power dN between masses, split where the functions break.
double moment(InitialMassFunction imf, const MassRange& range, double power) {
    static const QuadratureRule rule = gauss_legendre(16);
    std::vector<double> edges{std::log(range.lightest), std::log(range.heaviest)};
    for (const double mass : {0.08, 0.5, 1.0, 8.0}) {
        if (mass > range.lightest && mass < range.heaviest) {
            edges.push_back(std::log(mass));
        }
    }
    std::sort(edges.begin(), edges.end());
    return integrate_pieces(
        rule,
        [&](double y) {
            const double m = std::exp(y);
            return std::pow(m, power + 1) * mass_function(imf, m);
        },
        edges);
}

/// x^a exp(-b (x - 1)).
double radial_fit(double x, double a, double b) {
    return std::pow(x, a) * std::exp(-b * (x - 1));
}

} // namespace

double supernovae_per_solar_mass(InitialMassFunction imf, MassRange progenitors, MassRange stars) {
    const bool ordered =
        stars.lightest > 0 && stars.lightest < stars.heaviest && progenitors.lightest < progenitors.heaviest;
    if (!ordered || progenitors.lightest < stars.lightest || progenitors.heaviest > stars.heaviest) {
        throw Error(ErrorKind::runtime,
                    fmt::format("initial mass function: found progenitors of {} to {} and stars of {} to {} "
                                "solar masses, expected ascending masses and progenitors among the stars",
                                progenitors.lightest, progenitors.heaviest, stars.lightest, stars.heaviest));
    }
    return moment(imf, progenitors, 0) / moment(imf, stars, 1);
}

double star_formation_rate_kennicutt_evans_2012(double infrared_luminosity) {
    return std::pow(10.0, -43.41) * infrared_luminosity;
}

double cosmic_ray_power(double supernovae_per_year, double fraction, double supernova_energy) {
    return supernovae_per_year / constants::year * fraction * supernova_energy;
}

double sources_case_bhattacharya_1996(double radius) {
    return radial_fit(radius / solar_radius, 1.69, 3.33);
}

double sources_case_bhattacharya_1998(double radius) {
    return radial_fit(radius / solar_radius, 2.0, 3.53);
}

double sources_green_2015(double radius) {
    return radial_fit(radius / solar_radius, 1.09, 3.87);
}

double sources_lorimer_2006(double radius) {
    return radial_fit(radius / solar_radius, 1.9, 5.0);
}

double sources_yusifov_kucuk_2004(double radius) {
    constexpr double shift = 0.55 * constants::kiloparsec;
    return radial_fit((radius + shift) / (solar_radius + shift), 1.64, 4.01);
}

double sources_exponential(double radius, double scale_length) {
    return std::exp(-(radius - solar_radius) / scale_length);
}

double exponential_disc_energy_density(
    double radius, double height, double luminosity, double scale_length, double softening) {
    static const QuadratureRule rule = gauss_legendre(16);
    const double depth = std::hypot(height, softening);
    // R' = R + Z sinh t takes the peak at R' = R out of the root; pieces follow the exponential
    std::vector<double> edges;
    for (const double scales : {0.0, 1.0, 2.0, 4.0, 8.0, 14.0, 22.0, 32.0, 45.0}) {
        edges.push_back(std::asinh((scales * scale_length - radius) / depth));
    }
    if (radius < 45 * scale_length) {
        edges.push_back(0);
        std::sort(edges.begin(), edges.end());
    }
    const auto ring = [&](double t) {
        const double at = radius + depth * std::sinh(t);
        return std::exp(-at / scale_length) * at / std::hypot(at + radius, depth);
    };
    double sum = 0;
    for (std::size_t i = 1; i < edges.size(); ++i) {
        const double width = edges[i] - edges[i - 1];
        if (width > 0) {
            sum += integrate_panels(rule, ring, edges[i - 1], edges[i],
                                    static_cast<int>(std::ceil(width / 0.6)));
        }
    }
    return luminosity / (2 * constants::pi * scale_length * scale_length) / (2 * constants::speed_of_light) *
           sum;
}

} // namespace aureole::physics
