#include "aureole/physics/secondaries.hpp"

#include "kelner_2006.hpp"

#include "aureole/base/constants.hpp"
#include "aureole/base/error.hpp"
#include "aureole/base/quadrature.hpp"

#include <algorithm>
#include <array>
#include <cmath>

namespace aureole::physics {

namespace {

constexpr double gev = constants::gigaelectronvolt;
constexpr double mb_per_gev = constants::millibarn / gev;
constexpr double proton_rest = constants::proton_rest_energy;
constexpr double neutral_pion_rest = kelner_2006::neutral_pion * gev;

/// (m_mu/m_pi)^2, masses in MeV of the Particle Data Group.
constexpr double r = 105.6583755 * 105.6583755 / (139.57039 * 139.57039);
constexpr double direct_share = 1 - r; // x of the neutrino of pi -> mu nu

constexpr double isospin_below = 500 * gev, kelner_above = 2000 * gev;

double square(double x) {
    return x * x;
}

double muon_electron(double x) {
    const double scale = (3 - 2 * r) / (9 * square(1 - r));
    const auto outer = [&](double y) { return scale * (9 * y * y - 6 * std::log(y) - 4 * y * y * y - 5); };
    if (x >= r) {
        return outer(x);
    }
    return outer(r) + (1 + 2 * r) * (r - x) / (9 * r * r) * (9 * (r + x) - 4 * (r * r + r * x + x * x));
}

double muon_electron_neutrino(double x) {
    const double scale = 2 / (3 * square(1 - r));
    const auto outer = [&](double y) {
        return scale * ((1 - y) * (6 * square(1 - y) + r * (5 + 5 * y - 4 * y * y)) + 6 * r * std::log(y));
    };
    if (x >= r) {
        return outer(x);
    }
    return outer(r) + 2 * (r - x) / (3 * r * r) *
                          (7 * r * r - 4 * r * r * r + 7 * x * r - 4 * x * r * r - 2 * x * x - 4 * x * x * r);
}

double lepton_of_muon(double x, double l) {
    const double b = 1 / (69.5 + (2.65 + 0.3 * l) * l);
    const double beta = 1 / std::sqrt(std::sqrt(0.201 + (0.062 + 0.00042 * l) * l));
    const double k = (0.279 + (0.141 + 0.0172 * l) * l) / (0.3 + square(2.3 + l));
    const double log_x = std::log(x);
    const double rise = 1 + k * log_x * log_x;
    return -b * rise * rise * rise * std::pow(log_x, 5) / (x * (1 + 0.3 * std::pow(x, -beta)));
}

double neutrino_of_pion(double x, double l) {
    const double y = x / 0.427;
    if (y >= 1) {
        return 0;
    }
    const double b = 1.75 + (0.204 + 0.010 * l) * l;
    const double beta = 1 / (1.67 + (0.111 + 0.0038 * l) * l);
    const double k = 1.07 + (-0.086 + 0.002 * l) * l;
    const double log_y = std::log(y);
    const double power = std::exp(beta * log_y);
    const double left = -std::expm1(beta * log_y);
    const double below = 1 + k * power * left;
    const double ratio = left / below;
    return b * log_y / y * square(square(ratio)) *
           (1 / log_y - 4 * beta * power / left - 4 * k * beta * power * (1 - 2 * power) / below);
}

double usual_multiplicity(Secondary secondary) {
    switch (secondary) {
    case Secondary::muon_neutrinos_of_pions:
        return 0.638;
    case Secondary::electron_neutrinos:
        return 0.679;
    default:
        return 0.658;
    }
}

double direct_cross_section(Secondary secondary, double energy, double kinetic_energy) {
    const double total = kinetic_energy + proton_rest;
    return kelner_2006::inelastic(total / gev) * constants::millibarn / total *
           kelner_2006_lepton_spectrum(secondary, energy / total, total);
}

/// Leptons from the photon spectrum of the neutral pions: int rho(x) sigma(E/x) dx/x, piece by piece between
/// the bends of both.
double isospin_cross_section(PionModel pions, Secondary secondary, double energy, double kinetic_energy) {
    const auto photons = [&](double photon_energy) {
        return pion_gamma_cross_section(pions, photon_energy, kinetic_energy);
    };
    if (secondary == Secondary::muon_neutrinos_of_pions) {
        return photons(energy / direct_share) / direct_share;
    }
    static const QuadratureRule rule = gauss_legendre(12);
    const PhotonRange range = pion_photon_range(kinetic_energy);
    const double low = energy / range.max;
    const double high = std::min(1.0, energy / range.min);
    if (!(low < high)) {
        return 0;
    }
    std::array<double, 4> edges{low, high, std::clamp(r, low, high),
                                std::clamp(2 * energy / neutral_pion_rest, low, high)};
    std::sort(edges.begin(), edges.end());
    double sum = 0;
    for (std::size_t i = 1; i < edges.size(); ++i) {
        const double width = std::log(edges[i] / edges[i - 1]);
        if (width > 0) {
            sum += integrate_panels(
                rule,
                [&](double y) {
                    const double x = std::exp(y);
                    return pion_rest_spectrum(secondary, x) * photons(energy / x);
                },
                std::log(edges[i - 1]), std::log(edges[i]), static_cast<int>(std::ceil(width / 3)));
        }
    }
    return sum;
}

/// 0 below 0.5 TeV, 1 above 2 TeV, with continuous slope in ln T between.
double kelner_share(double kinetic_energy) {
    const double t = std::clamp(
        std::log(kinetic_energy / isospin_below) / std::log(kelner_above / isospin_below), 0.0, 1.0);
    return t * t * (3 - 2 * t);
}

/// int E f(E) dE between energies, in ln E.
template <class Function> double energy_moment(double low, double high, Function&& f) {
    static const QuadratureRule rule = gauss_legendre(12);
    const int panels = static_cast<int>(std::ceil(std::log(high / low) / 0.7));
    return integrate_panels(
        rule,
        [&](double y) {
            const double e = std::exp(y);
            return e * e * f(e);
        },
        std::log(low), std::log(high), panels);
}

constexpr int stencil = 6;

/// Weights of six values at 0, 1, ... 5 in the polynomial through them, at t.
std::array<double, stencil> lagrange(double t) {
    constexpr std::array<double, stencil> scale{-1.0 / 120, 1.0 / 24,  -1.0 / 12,
                                                1.0 / 12,   -1.0 / 24, 1.0 / 120};
    std::array<double, stencil> weight = scale;
    double below = 1;
    double above = 1;
    for (std::size_t i = 0; i < stencil; ++i) {
        const std::size_t j = stencil - 1 - i;
        weight[i] *= below;
        weight[j] *= above;
        below *= t - static_cast<double>(i);
        above *= t - static_cast<double>(j);
    }
    return weight;
}

/// rho(x) = sum_k c_k x^k above and below x = r.
struct RestSpectrum {
    std::array<double, 4> above, below;
};

RestSpectrum rest_polynomials(Secondary secondary) {
    const double rr = r * r;
    if (secondary == Secondary::electron_neutrinos) {
        const double scale = 2 / (3 * square(1 - r));
        return {{-6 * r * scale, 18 * scale, (18 * r - 36) * scale, (18 - 12 * r) * scale},
                {0, 0, 12 / r, -4 * (1 + 2 * r) / rr}};
    }
    const double scale = 6 * (3 - 2 * r) / (9 * square(1 - r));
    return {{scale, 0, -3 * scale, 2 * scale}, {0, 0, 2 * (1 + 2 * r) / rr, -4 * (1 + 2 * r) / (3 * rr)}};
}

/// isospin_cross_section() of the leptons of muons.
double isospin_of_moments(const PionPhotons& photons, Secondary secondary, double energy) {
    const RestSpectrum rho = rest_polynomials(secondary);
    const auto all = photons.moments_above(energy);
    const auto soft = photons.moments_above(energy / r);
    double sum = 0;
    double power = 1;
    for (std::size_t k = 0; k < all.size(); ++k) {
        sum += power * (rho.above[k] * (all[k] - soft[k]) + rho.below[k] * soft[k]);
        power *= energy;
    }
    return std::max(0.0, sum); // at the highest energies the terms cancel
}

} // namespace

PionPhotons::PionPhotons(PionModel model, double kinetic_energy) {
    const PhotonRange range = pion_photon_range(kinetic_energy);
    if (!(range.min < range.max)) {
        return;
    }
    peak_ = 0.5 * std::log(range.min * range.max);
    end_ = 0.5 * std::log(range.max / range.min);
    const int half = std::max(20, static_cast<int>(std::ceil(end_ / 0.15)));
    step_ = end_ / half;
    for (int i = 0; i < half; ++i) {
        photons_.push_back(pion_gamma_cross_section(model, std::exp(peak_ + i * step_), kinetic_energy));
    }
    photons_.push_back(0);
    above_.assign(static_cast<std::size_t>(2 * half + 1), {});
    for (int i = 2 * half; i-- > 0;) {
        const auto node = static_cast<std::size_t>(i);
        above_[node] = moments(peak_ + (i - half) * step_, peak_ + (i + 1 - half) * step_);
        for (std::size_t k = 0; k < 4; ++k) {
            above_[node][k] += above_[node + 1][k];
        }
    }
}

double PionPhotons::photons(double log_energy) const {
    const double at = std::abs(log_energy - peak_) / step_;
    const int last = static_cast<int>(photons_.size()) - stencil;
    const int start = std::clamp(static_cast<int>(at) - stencil / 2 + 1, 0, last);
    const auto weight = lagrange(at - start);
    double sum = 0;
    for (std::size_t i = 0; i < stencil; ++i) {
        sum += weight[i] * photons_[static_cast<std::size_t>(start) + i];
    }
    return sum;
}

std::array<double, 4> PionPhotons::moments(double from, double to) const {
    static const QuadratureRule rule = gauss_legendre(4);
    std::array<double, 4> sum{};
    const double half = 0.5 * (to - from);
    for (std::size_t i = 0; i < rule.node.size(); ++i) {
        const double log_energy = from + half * (1 + rule.node[i]);
        const double inverse = std::exp(-log_energy);
        double value = half * rule.weight[i] * photons(log_energy);
        for (double& part : sum) {
            part += value;
            value *= inverse;
        }
    }
    return sum;
}

std::array<double, 4> PionPhotons::moments_above(double energy) const {
    const double log_energy = std::log(energy);
    if (above_.empty() || log_energy >= peak_ + end_) {
        return {};
    }
    if (log_energy <= peak_ - end_) {
        return above_.front();
    }
    const auto node =
        std::min(static_cast<std::size_t>((log_energy - peak_ + end_) / step_) + 1, above_.size() - 1);
    auto sum = moments(log_energy, peak_ - end_ + static_cast<double>(node) * step_);
    for (std::size_t k = 0; k < 4; ++k) {
        sum[k] += above_[node][k];
    }
    return sum;
}

SecondarySpectrum::SecondarySpectrum(SecondaryModel model,
                                     PionModel pions,
                                     Secondary secondary,
                                     double kinetic_energy)
    : model_(model), pions_(pions), secondary_(secondary), kinetic_energy_(kinetic_energy) {
    const bool isospin = model == SecondaryModel::isospin || model == SecondaryModel::isospin_kelner_2006;
    if (!isospin || pions == PionModel::kelner_2006 || secondary == Secondary::muon_neutrinos_of_pions ||
        !(kinetic_energy > pion_threshold())) {
        return;
    }
    direct_share_ = model == SecondaryModel::isospin ? 0 : kelner_share(kinetic_energy);
    if (direct_share_ < 1) {
        table_.emplace(pions, kinetic_energy);
    }
}

double SecondarySpectrum::operator()(double energy) const {
    if (!table_) {
        return secondary_cross_section(model_, pions_, secondary_, energy, kinetic_energy_);
    }
    double sum = (1 - direct_share_) * isospin_of_moments(*table_, secondary_, energy);
    if (direct_share_ > 0) {
        sum += direct_share_ * direct_cross_section(secondary_, energy, kinetic_energy_);
    }
    return sum;
}

double kelner_2006_lepton_spectrum(Secondary secondary, double x, double total_energy) {
    if (!(x > 0 && x < 1)) {
        return 0;
    }
    const double l = std::log(std::max(0.1, total_energy / (1000 * gev)));
    return secondary == Secondary::muon_neutrinos_of_pions ? neutrino_of_pion(x, l) : lepton_of_muon(x, l);
}

double pion_decay_spectrum(Secondary secondary, double x) {
    if (!(x >= 0 && x < 1)) {
        return 0;
    }
    switch (secondary) {
    case Secondary::muon_neutrinos_of_pions:
        return x < direct_share ? 1 / direct_share : 0.0;
    case Secondary::electron_neutrinos:
        return muon_electron_neutrino(x);
    default:
        return muon_electron(x);
    }
}

double pion_rest_spectrum(Secondary secondary, double x) {
    if (secondary == Secondary::muon_neutrinos_of_pions) {
        throw Error(ErrorKind::runtime,
                    "pion_rest_spectrum: found muon_neutrinos_of_pions, which are a line, "
                    "expected leptons of muon decay");
    }
    if (!(x > 0 && x < 1)) {
        return 0;
    }
    const double xx = x * x;
    if (secondary == Secondary::electron_neutrinos) {
        return x >= r ? 2 / (3 * square(1 - r)) * (18 * x * square(1 - x) + 6 * r * (3 * xx - 2 * xx * x - 1))
                      : (12 * r - 4 * (1 + 2 * r) * x) * xx / (r * r);
    }
    return x >= r ? (3 - 2 * r) / (9 * square(1 - r)) * 6 * square(1 - x) * (1 + 2 * x)
                  : (1 + 2 * r) / (9 * r * r) * xx * (18 - 12 * x);
}

double kelner_2006_secondary_cross_section(Secondary secondary,
                                           double energy,
                                           double kinetic_energy,
                                           double multiplicity) {
    if (energy >= kelner_2006::joint * gev) {
        return direct_cross_section(secondary, energy, kinetic_energy);
    }
    const double pion = kelner_2006::pion_energy_fraction * kinetic_energy;
    if (!(pion > energy)) {
        return 0;
    }
    return 2 * multiplicity * kelner_2006::inelastic((kinetic_energy + proton_rest) / gev) *
           constants::millibarn / pion * pion_decay_spectrum(secondary, energy / pion);
}

double kelner_2006_secondary_multiplicity(Secondary secondary, double slope) {
    static const QuadratureRule rule = gauss_legendre(16);
    constexpr double joint = kelner_2006::joint * gev;
    const auto emissivity = [&](auto&& cross_section, double lowest) {
        // the neutrinos of pions have an edge: their integral begins there
        return integrate_panels(
            rule,
            [&](double y) {
                const double total = std::exp(y);
                return cross_section(total - proton_rest) * std::pow(total / joint, 1 - slope);
            },
            std::log(lowest), std::log(lowest) + 18.5, 40);
    };
    const bool line = secondary == Secondary::muon_neutrinos_of_pions;
    const double below = joint * (1 - 1e-12);
    const double direct = emissivity([&](double t) { return direct_cross_section(secondary, joint, t); },
                                     line ? joint / 0.427 : joint);
    const double pion = line ? below / direct_share : below;
    const double continued =
        emissivity([&](double t) { return kelner_2006_secondary_cross_section(secondary, below, t, 1); },
                   pion / kelner_2006::pion_energy_fraction + proton_rest);
    return direct / continued;
}

double secondary_cross_section(
    SecondaryModel model, PionModel pions, Secondary secondary, double energy, double kinetic_energy) {
    if (!(kinetic_energy > pion_threshold())) {
        return 0;
    }
    switch (model) {
    case SecondaryModel::kelner_2006:
        return kelner_2006_secondary_cross_section(secondary, energy, kinetic_energy,
                                                   usual_multiplicity(secondary));
    case SecondaryModel::kelner_2006_direct:
        return direct_cross_section(secondary, energy, kinetic_energy);
    case SecondaryModel::isospin:
        return isospin_cross_section(pions, secondary, energy, kinetic_energy);
    case SecondaryModel::isospin_kelner_2006:
        break;
    }
    const double share = kelner_share(kinetic_energy);
    double sum = 0;
    if (share < 1) {
        sum += (1 - share) * isospin_cross_section(pions, secondary, energy, kinetic_energy);
    }
    if (share > 0) {
        sum += share * direct_cross_section(secondary, energy, kinetic_energy);
    }
    return sum;
}

double
secondary_energy_fraction(SecondaryModel model, PionModel pions, Secondary secondary, double kinetic_energy) {
    if (model == SecondaryModel::kelner_2006) {
        throw Error(ErrorKind::runtime, "secondary_energy_fraction: found kelner_2006, expected a model that "
                                        "conserves energy at each proton energy");
    }
    const double inelastic = inelastic_cross_section(pions, kinetic_energy);
    if (!(inelastic > 0) || !(kinetic_energy > pion_threshold())) {
        return 0;
    }
    const double highest = kinetic_energy + proton_rest;
    const double lowest = std::min(1e-6 * highest, 1e-5 * gev);
    return energy_moment(lowest, highest,
                         [&](double e) {
                             return secondary_cross_section(model, pions, secondary, e, kinetic_energy);
                         }) /
           (kinetic_energy * inelastic);
}

double gamma_energy_fraction(PionModel pions, double kinetic_energy) {
    const double inelastic = inelastic_cross_section(pions, kinetic_energy);
    if (!(inelastic > 0) || !(kinetic_energy > pion_threshold())) {
        return 0;
    }
    if (pions == PionModel::kelner_2006) {
        const double total = kinetic_energy + proton_rest;
        return energy_moment(1e-9, 1, [&](double x) { return kelner_2006_spectrum(x, total); }) * total /
               kinetic_energy;
    }
    const PhotonRange range = pion_photon_range(kinetic_energy);
    const auto photons = [&](double e) { return pion_gamma_cross_section(pions, e, kinetic_energy); };
    const double peak = 0.5 * neutral_pion_rest; // the spectrum bends there
    return (energy_moment(range.min, peak, photons) + energy_moment(peak, range.max, photons)) /
           (kinetic_energy * inelastic);
}

double positron_fraction(PionModel pions, double kinetic_energy) {
    constexpr double lost_charge = 0.7;
    const PionModel counted = pions == PionModel::kelner_2006 ? PionModel::kafexhiu_2014_continuous : pions;
    const double neutral = neutral_pion_cross_section(counted, kinetic_energy);
    if (!(neutral > 0)) {
        return 1;
    }
    const double charged = 2 * neutral / inelastic_cross_section(counted, kinetic_energy);
    return std::min(1.0, 0.5 * (1 + lost_charge / charged));
}

} // namespace aureole::physics
