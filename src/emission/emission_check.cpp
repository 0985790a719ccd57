#include "emission_check.hpp"

#include "synchrotron_kernel.hpp"

#include "aureole/base/constants.hpp"
#include "aureole/base/parallel.hpp"
#include "aureole/physics/kinematics.hpp"
#include "aureole/physics/synchrotron.hpp"

#include <algorithm>
#include <array>
#include <cmath>
#include <map>
#include <span>

namespace aureole::emission {

namespace {

using spectra::Basis;
using spectra::Source;
using spectra::Species;

/// The mean spectrum behind one contribution, weighted with volume and with the number that multiplies it.
struct MeanSpectrum {
    std::vector<double> value;
    double weight = 0;
    double field = 0; // weighted mean of B, for synchrotron
};

constexpr std::size_t sample_cells = 2048;

double field_across(const media::Field& field, std::size_t cell) {
    double b2 = 0;
    if (!field.random_rms.empty()) {
        b2 += 2.0 / 3.0 * field.random_rms[cell] * field.random_rms[cell];
    }
    if (!field.ordered.empty()) {
        for (const float component : field.ordered[cell]) {
            b2 += 2.0 / 3.0 * component * component;
        }
    }
    return std::sqrt(b2);
}

std::vector<float> as_float(const std::vector<double>& values) {
    std::vector<float> result(values.size());
    std::transform(values.begin(), values.end(), result.begin(),
                   [](double v) { return static_cast<float>(v); });
    return result;
}

double emission_of(const WeightRow& row, const Basis& basis, const std::vector<double>& spectrum) {
    double sum = 0;
    for (std::size_t i = 0; i < spectrum.size(); ++i) {
        sum += row.cubic[i] * spectrum[i];
    }
    std::vector<std::size_t> negative(basis.intervals());
    const std::size_t found = basis.negative_intervals(as_float(spectrum).data(), negative.data());
    for (std::size_t n = 0; n < found; ++n) {
        const std::size_t j = negative[n];
        for (std::size_t s = 0; s < basis.stencil_size(); ++s) {
            sum += row.fallback[4 * j + s] * spectrum[basis.stencil_start(j) + s];
        }
    }
    return sum;
}

/// Every second node from `start` (0 or 1) on, the first and the last.
std::vector<std::size_t> half_nodes(std::size_t nodes, std::size_t start) {
    std::vector<std::size_t> kept{0};
    for (std::size_t i = start == 0 ? 2 : 1; i < nodes; i += 2) {
        kept.push_back(i);
    }
    if (kept.back() != nodes - 1) {
        kept.push_back(nodes - 1);
    }
    return kept;
}

/// Slope p of N ~ T^-p through two nodes of M = N T^s; a spectrum that is zero there ends sharply.
double end_slope(const Basis& basis, const std::vector<double>& m, bool above) {
    const std::size_t inner = above ? m.size() - 2 : 1;
    const std::size_t outer = above ? m.size() - 1 : 0;
    if (!(m[inner] > 0) || !(m[outer] > 0)) {
        return above ? 1e3 : -1e3;
    }
    const double rise =
        std::log(m[outer] / m[inner]) / std::log(basis.energy()[outer] / basis.energy()[inner]);
    return spectra::weighting - rise;
}

struct Contribution {
    double full = 0, above = 0, below = 0, slow = 0;
    double change = 0; // largest under halved nodes; changes of several contributions add up without sign

    void add(const Contribution& one, double weight) {
        full += weight * one.full;
        change += weight * one.change;
        above += weight * one.above;
        below += weight * one.below;
        slow += weight * one.slow;
    }
};

/// A basis with half the nodes.
struct HalfBasis {
    std::vector<std::size_t> kept;
    Basis basis;
};

std::array<HalfBasis, 2> half_bases(const Basis& basis) {
    const auto half = [&](std::size_t start) {
        const auto kept = half_nodes(basis.nodes(), start);
        std::vector<double> energy;
        for (const std::size_t i : kept) {
            energy.push_back(basis.energy()[i]);
        }
        return HalfBasis{kept, Basis(energy)};
    };
    return {half(0), half(1)};
}

/// What the points of a kernel make of a mean spectrum, per unit weight, with all nodes and with half of
/// them.
Contribution contribution(const Basis& basis,
                          const std::array<HalfBasis, 2>& halves,
                          const MeanSpectrum& mean,
                          std::span<const std::vector<KernelPoint>> photons) {
    Contribution result;
    result.full = emission_of(summed_row(basis, photons), basis, mean.value);
    for (const HalfBasis& half : halves) {
        std::vector<double> value;
        for (const std::size_t i : half.kept) {
            value.push_back(mean.value[i]);
        }
        const double coarse = emission_of(summed_row(half.basis, photons), half.basis, value);
        result.change = std::max(result.change, std::abs(coarse - result.full));
    }
    return result;
}

/// Adds what the spectrum would give if it went on beyond its nodes.
void add_tails(Contribution& result,
               const Basis& basis,
               const MeanSpectrum& mean,
               const std::function<double(double)>& kernel,
               const std::vector<double>& splits,
               double weight) {
    constexpr double decades_up = 4;
    constexpr double decades_down = 3;
    if (mean.value.back() > 0) {
        result.above +=
            weight * mean.value.back() *
            tail_weight(basis, kernel, splits, end_slope(basis, mean.value, true), true, decades_up);
    }
    if (mean.value.front() > 0) {
        result.below +=
            weight * mean.value.front() *
            tail_weight(basis, kernel, splits, end_slope(basis, mean.value, false), false, decades_down);
    }
}

/// Cells that stand for all: about one in `step`, each at another place of its stretch, so that the columns
/// of a grid whose rows divide the step are met alike.
std::vector<std::size_t> cells_to_sample(std::size_t cells) {
    constexpr double golden = 0.6180339887498949;
    const std::size_t step = std::max<std::size_t>(1, cells / sample_cells);
    std::vector<std::size_t> chosen;
    for (std::size_t n = 0; n * step < cells; ++n) {
        const double turns = golden * static_cast<double>(n);
        const auto within = static_cast<std::size_t>((turns - std::floor(turns)) * static_cast<double>(step));
        if (n * step + within < cells) {
            chosen.push_back(n * step + within);
        }
    }
    return chosen;
}

/// One for each term of the plan; the last belongs to synchrotron emission.
std::vector<MeanSpectrum> mean_spectra(const grid::Grid& grid,
                                       const media::Media& media,
                                       const ProductPlan& plan,
                                       const std::vector<Source>& sources,
                                       bool synchrotron) {
    const auto volume = grid::cell_volumes(grid);
    const auto chosen = cells_to_sample(grid.stored_cells());
    std::vector<MeanSpectrum> means(plan.terms.size() + 1);
    for (const Source& source : sources) {
        const auto reader = source.open();
        std::vector<float> spectrum(source.basis->nodes());
        const auto add = [&](MeanSpectrum& mean, double weight, double field) {
            mean.value.resize(spectrum.size(), 0.0);
            for (std::size_t i = 0; i < spectrum.size(); ++i) {
                mean.value[i] += weight * spectrum[i];
            }
            mean.weight += weight;
            mean.field += weight * field;
        };
        for (const std::size_t cell : chosen) {
            reader(cell, 1, spectrum.data(), spectrum.size());
            for (std::size_t t = 0; t < plan.terms.size(); ++t) {
                if (plan.kernels[plan.terms[t].kernel].species == source.species) {
                    float number = 0;
                    plan.terms[t].numbers(cell, 1, &number);
                    add(means[t], volume[cell] * static_cast<double>(number), 0);
                }
            }
            if (source.species == Species::electrons && synchrotron) {
                const double b = field_across(media.field, cell);
                add(means.back(), volume[cell] * std::pow(b / constants::microgauss, 1.75), b);
            }
        }
    }
    for (MeanSpectrum& mean : means) {
        if (mean.weight > 0) {
            for (double& value : mean.value) {
                value /= mean.weight;
            }
            mean.field /= mean.weight;
        }
    }
    return means;
}

/// The kernel is that of a random field: what is ordered points everywhere in the mean over the galaxy.
Contribution synchrotron_contribution(const Basis& basis,
                                      const std::array<HalfBasis, 2>& halves,
                                      const MeanSpectrum& mean,
                                      const KernelTable& random_field,
                                      const Channel& channel) {
    const double log_x1 = std::log(channel.centre() / (physics::synchrotron_critical_constant * mean.field));
    const auto kernel = [&](double kinetic) {
        const double gamma = physics::lorentz_factor(kinetic, constants::electron_rest_energy);
        return random_field.at(log_x1 - 2 * std::log(gamma))[0];
    };
    const std::vector<std::vector<KernelPoint>> points{kernel_points(basis, kernel, {}, 6)};
    Contribution result = contribution(basis, halves, mean, points);
    add_tails(result, basis, mean, kernel, {}, 1);
    return result;
}

Contribution product_contribution(const Basis& basis,
                                  const std::array<HalfBasis, 2>& halves,
                                  const MeanSpectrum& mean,
                                  const ProductKernel& kernel,
                                  std::span<const std::vector<KernelPoint>> points,
                                  bool is_inverse_compton,
                                  const Channel& channel) {
    Contribution result = contribution(basis, halves, mean, points);
    const auto photons = channel_photons(channel);
    for (std::size_t p = 0; p < photons.x.size(); ++p) {
        const double photon = photons.x[p];
        add_tails(
            result, basis, mean, [&](double kinetic) { return kernel.value(kinetic, photon); },
            kernel.splits(photon), photons.w[p]);
        if (is_inverse_compton) {
            const double limit = std::log(9 * constants::electron_rest_energy);
            const auto end = std::find_if(points[p].begin(), points[p].end(),
                                          [&](const KernelPoint& point) { return point.log_energy > limit; });
            const std::span slow(points[p].begin(), end);
            result.slow += emission_of(weight_row(basis, slow), basis, mean.value);
        }
    }
    return result;
}

} // namespace

double check_spectra(std::vector<PlaneReport>& planes,
                     const grid::Grid& grid,
                     const media::Media& media,
                     const ProductPlan& plan,
                     const std::array<const ProductSet*, 2>& sets,
                     const std::vector<Source>& sources,
                     const std::vector<Channel>& channels,
                     bool synchrotron,
                     const RunContext& context) {
    const auto means = mean_spectra(grid, media, plan, sources, synchrotron);
    std::map<Species, std::array<HalfBasis, 2>> halves;
    std::map<Species, const Basis*> basis;
    for (const Source& source : sources) {
        basis[source.species] = source.basis.get();
        halves.emplace(source.species, half_bases(*source.basis));
    }
    const KernelTable random_field = synchrotron ? kernel_table(0) : KernelTable{};
    std::vector<double> slow(channels.size(), 0.0);
    std::vector<std::size_t> place(channels.size(), 0); // of a gamma channel among its like
    for (std::size_t c = 0, gamma = 0; c < channels.size(); ++c) {
        place[c] = gamma;
        gamma += channels[c].band == Band::gamma ? 1 : 0;
    }
    for_each_block(context, channels.size(), [&](std::size_t c) {
        const Channel& channel = channels[c];
        Contribution sum;
        if (channel.band == Band::radio && means.back().weight > 0) {
            sum = synchrotron_contribution(*basis.at(Species::electrons), halves.at(Species::electrons),
                                           means.back(), random_field, channel);
        }
        for (std::size_t t = 0; t < plan.terms.size() && channel.band == Band::gamma; ++t) {
            if (means[t].weight > 0) {
                const ProductKernel& kernel = plan.kernels[plan.terms[t].kernel];
                const ProductSet& set = *sets[kernel.species == Species::electrons ? 0 : 1];
                sum.add(product_contribution(*basis.at(kernel.species), halves.at(kernel.species), means[t],
                                             kernel,
                                             set.points[set.first_row(plan.terms[t].kernel) + place[c]],
                                             plan.terms[t].process.starts_with("inverse_compton"), channel),
                        means[t].weight);
            }
        }
        // Of one-zone galaxies with 25 to 57 nodes over six decades and cut-offs, 92 % have a smaller true
        // error, 96 % one of more than a tenth of this (tests/app/numerical_error.py).
        constexpr double coarsening = 5;
        if (sum.full > 0) {
            planes[c].missing_above = sum.above / (sum.full + sum.above + sum.below);
            planes[c].missing_below = sum.below / (sum.full + sum.above + sum.below);
            planes[c].energy_error = sum.change / (coarsening * sum.full);
            slow[c] = std::max(0.0, sum.slow / sum.full);
        }
    });
    return slow.empty() ? 0 : *std::max_element(slow.begin(), slow.end());
}

} // namespace aureole::emission
