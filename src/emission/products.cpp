#include "products.hpp"

#include "aureole/base/constants.hpp"
#include "aureole/base/error.hpp"
#include "aureole/base/parallel.hpp"
#include "aureole/base/quadrature.hpp"
#include "aureole/emission/kernels.hpp"
#include "aureole/physics/bremsstrahlung.hpp"
#include "aureole/physics/inverse_compton.hpp"
#include "aureole/physics/kinematics.hpp"
#include "aureole/physics/pion_decay.hpp"

#include <fmt/format.h>

#include <algorithm>
#include <array>
#include <cmath>
#include <functional>

namespace aureole::emission {

namespace {

using constants::electron_rest_energy;
using constants::proton_rest_energy;
using constants::speed_of_light;
using spectra::Species;

constexpr double per_sr = 1 / (4 * constants::pi);

CellNumbers cell_values(const std::vector<float>& values) {
    return [data = values.data()](std::size_t first, std::size_t count, float* out) {
        std::copy_n(data + first, count, out);
    };
}

CellNumbers same_everywhere(float value) {
    return [value](std::size_t, std::size_t count, float* out) { std::fill_n(out, count, value); };
}

double electron_speed(double kinetic) {
    return physics::speed_over_c(kinetic, electron_rest_energy) * speed_of_light;
}

/// Kinetic energies closing in on that of an electron that gives all it has: deep in the Klein-Nishina range
/// the kernel peaks within a fraction m c^2/(4 gamma eps) of it.
std::vector<double> above_photon(double photon) {
    std::vector<double> splits{photon};
    for (const double above : {1e-3, 1e-2, 0.05, 0.2, 0.6}) {
        splits.push_back((1 + above) * photon - electron_rest_energy);
    }
    return splits;
}

ProductKernel blackbody_kernel(double temperature) {
    return {Species::electrons,
            [temperature](double kinetic, double photon) {
                const double gamma = physics::lorentz_factor(kinetic, electron_rest_energy);
                return per_sr * physics::inverse_compton_blackbody_kernel(gamma, photon, temperature);
            },
            above_photon};
}

/// Photons of one node of a tabulated spectrum: a triangle in energy.
ProductKernel photon_node_kernel(const std::vector<double>& energy, std::size_t node) {
    std::vector<double> at;
    std::vector<double> density;
    for (std::size_t i = node == 0 ? 0 : node - 1; i <= std::min(node + 1, energy.size() - 1); ++i) {
        at.push_back(energy[i]);
        density.push_back(i == node ? 1.0 : 0.0);
    }
    return {Species::electrons,
            [at, density](double kinetic, double photon) {
                const double gamma = physics::lorentz_factor(kinetic, electron_rest_energy);
                return per_sr * physics::inverse_compton_tabulated_kernel(gamma, photon, at, density);
            },
            [at](double photon) {
                auto splits = above_photon(photon);
                for (const double eps : at) {
                    splits.push_back((physics::minimum_lorentz_factor(eps, photon) - 1) *
                                     electron_rest_energy);
                }
                return splits;
            }};
}

ProductKernel bremsstrahlung_kernel(double (*cross_section)(double, double, double), double helium) {
    return {Species::electrons,
            [cross_section, helium](double kinetic, double photon) {
                if (photon >= kinetic) {
                    return 0.0;
                }
                return per_sr * electron_speed(kinetic) *
                       cross_section(kinetic + electron_rest_energy, photon, helium);
            },
            above_photon};
}

ProductKernel pion_kernel(const std::string& name, double enhancement) {
    const auto model = pion_model(name);
    return {Species::protons,
            [model, enhancement](double kinetic, double photon) {
                const double speed = physics::speed_over_c(kinetic, proton_rest_energy) * speed_of_light;
                return per_sr * enhancement * speed *
                       physics::pion_gamma_cross_section(model, photon, kinetic);
            },
            [model](double photon) {
                const auto borders = physics::pion_borders(model);
                std::vector<double> splits(borders.begin(), borders.end());
                splits.push_back(physics::minimum_proton_energy(model, photon));
                splits.push_back(1.2 * splits.back());
                return splits;
            }};
}

} // namespace

physics::PionModel pion_model(const std::string& name) {
    using physics::PionModel;
    const std::array<std::pair<const char*, PionModel>, 6> known{{
        {"kafexhiu_2014_continuous", PionModel::kafexhiu_2014_continuous},
        {"kafexhiu_2014", PionModel::kafexhiu_2014},
        {"kafexhiu_2014_geant4", PionModel::kafexhiu_2014_geant4},
        {"kafexhiu_2014_sibyll", PionModel::kafexhiu_2014_sibyll},
        {"kafexhiu_2014_qgsjet", PionModel::kafexhiu_2014_qgsjet},
        {"kelner_2006", PionModel::kelner_2006},
    }};
    for (const auto& [text, model] : known) {
        if (name == text) {
            return model;
        }
    }
    throw Error(ErrorKind::scenario, fmt::format("unknown pion model \"{}\"", name));
}

ProductPlan
plan_products(const media::Media& media, const Processes& processes, bool electrons, bool protons) {
    ProductPlan plan;
    const auto add = [&](std::string process, ProductKernel kernel, CellNumbers numbers) {
        plan.kernels.push_back(std::move(kernel));
        plan.terms.push_back({std::move(process), plan.kernels.size() - 1, std::move(numbers)});
    };
    if (electrons && processes.inverse_compton) {
        for (const auto& field : media.radiation) {
            const std::string process = "inverse_compton:" + field.name;
            if (field.temperature > 0) {
                const auto uniform = static_cast<float>(field.uniform_density);
                add(process, blackbody_kernel(field.temperature),
                    field.energy_density.empty() ? same_everywhere(uniform)
                                                 : cell_values(field.energy_density));
                continue;
            }
            const std::size_t nodes = field.photon_energy.size();
            for (std::size_t node = 0; node < nodes; ++node) {
                add(process, photon_node_kernel(field.photon_energy, node),
                    [data = field.photon_density.data() + node, nodes](std::size_t first, std::size_t count,
                                                                       float* out) {
                        for (std::size_t c = 0; c < count; ++c) {
                            out[c] = data[(first + c) * nodes];
                        }
                    });
            }
        }
    }
    if (electrons && processes.bremsstrahlung) {
        if (!media.gas.hi.empty() || !media.gas.h2.empty()) {
            plan.kernels.push_back(
                bremsstrahlung_kernel(physics::bremsstrahlung_atomic, processes.helium_fraction));
            const std::size_t neutral = plan.kernels.size() - 1;
            if (!media.gas.hi.empty()) {
                plan.terms.push_back({"bremsstrahlung:hi", neutral, cell_values(media.gas.hi)});
            }
            if (!media.gas.h2.empty()) {
                plan.terms.push_back({"bremsstrahlung:h2", neutral, cell_values(media.gas.h2)});
            }
        }
        if (!media.gas.hii.empty()) {
            add("bremsstrahlung:hii",
                bremsstrahlung_kernel(physics::bremsstrahlung_ionised, processes.helium_fraction),
                cell_values(media.gas.hii));
        }
    }
    if (protons && processes.pion_decay) {
        std::vector<const float*> phases;
        for (const auto* phase : {&media.gas.hi, &media.gas.h2, &media.gas.hii}) {
            if (!phase->empty()) {
                phases.push_back(phase->data());
            }
        }
        if (!phases.empty()) {
            add("pion_decay", pion_kernel(processes.pion_model, processes.nuclear_enhancement),
                [phases](std::size_t first, std::size_t count, float* out) {
                    std::fill_n(out, count, 0.0F);
                    for (const float* phase : phases) {
                        for (std::size_t c = 0; c < count; ++c) {
                            out[c] += phase[first + c];
                        }
                    }
                });
        }
    }
    return plan;
}

WeightedPoints channel_photons(const Channel& channel) {
    if (!channel.is_band()) {
        return {{channel.from}, {1.0}};
    }
    const double from = std::log(channel.from);
    const double to = std::log(channel.to);
    const int panels = std::max(1, static_cast<int>(std::ceil((to - from) / std::log(10.0))));
    std::vector<double> edges;
    for (int i = 0; i <= panels; ++i) {
        edges.push_back(from + (to - from) * i / panels);
    }
    auto points = composite_points(gauss_legendre(8), edges);
    for (std::size_t p = 0; p < points.x.size(); ++p) {
        points.x[p] = std::exp(points.x[p]);
        points.w[p] *= points.x[p]; // dE = E d ln E
    }
    return points;
}

namespace {

/// Points of every photon of a channel, the photon's weight included.
std::vector<std::vector<KernelPoint>>
channel_points(const spectra::Basis& basis, const ProductKernel& kernel, const Channel& channel) {
    constexpr int per_piece = 6;
    std::vector<std::vector<KernelPoint>> result;
    const auto photons = channel_photons(channel);
    for (std::size_t p = 0; p < photons.x.size(); ++p) {
        const double photon = photons.x[p];
        auto points = kernel_points(
            basis, [&](double kinetic) { return kernel.value(kinetic, photon); }, kernel.splits(photon),
            per_piece);
        for (KernelPoint& point : points) {
            point.value *= photons.w[p];
        }
        result.push_back(std::move(points));
    }
    return result;
}

} // namespace

WeightRow summed_row(const spectra::Basis& basis, std::span<const std::vector<KernelPoint>> photons) {
    WeightRow sum = weight_row(basis, photons.front());
    for (const auto& points : photons.subspan(1)) {
        const WeightRow row = weight_row(basis, points);
        std::transform(row.cubic.begin(), row.cubic.end(), sum.cubic.begin(), sum.cubic.begin(),
                       std::plus<>());
        std::transform(row.fallback.begin(), row.fallback.end(), sum.fallback.begin(), sum.fallback.begin(),
                       std::plus<>());
    }
    return sum;
}

ProductSet build_products(const ProductPlan& plan,
                          Species species,
                          const spectra::Source* source,
                          const std::vector<Channel>& channels,
                          const std::vector<std::size_t>& gamma_channels,
                          const RunContext& context) {
    ProductSet set;
    set.channels = gamma_channels.size();
    set.largest.assign(set.channels, 0.0);
    if (source == nullptr) {
        return set;
    }
    set.nodes = source->basis->nodes();
    set.stride = (set.nodes + 15) / 16 * 16;
    for (std::size_t k = 0; k < plan.kernels.size(); ++k) {
        if (plan.kernels[k].species == species) {
            set.kernels.push_back(k);
        }
    }
    set.row.resize(set.kernels.size() * set.channels);
    set.points.resize(set.row.size());
    for_each_block(context, set.row.size(), [&](std::size_t r) {
        set.points[r] = channel_points(*source->basis, plan.kernels[set.kernels[r / set.channels]],
                                       channels[gamma_channels[r % set.channels]]);
        set.row[r] = summed_row(*source->basis, set.points[r]);
    });
    for (std::size_t r = 0; r < set.row.size(); ++r) {
        for (const double weight : set.row[r].cubic) {
            set.largest[r % set.channels] = std::max(set.largest[r % set.channels], std::abs(weight));
        }
    }
    return set;
}

void pack(ProductSet& set, const std::vector<double>& unit) {
    constexpr std::size_t group = kernels::row_group;
    set.rows = (set.row.size() + group - 1) / group * group;
    set.packed.assign(set.rows * set.nodes, 0.0F);
    const std::size_t intervals = set.nodes == 0 ? 0 : set.nodes - 1;
    set.fallback.assign(intervals * 4 * set.rows, 0.0F);
    for (std::size_t r = 0; r < set.row.size(); ++r) {
        const double scale = 1 / unit[r % set.channels];
        for (std::size_t i = 0; i < set.nodes; ++i) {
            set.packed[(r / group * set.nodes + i) * group + r % group] =
                static_cast<float>(set.row[r].cubic[i] * scale);
        }
        for (std::size_t f = 0; f < 4 * intervals; ++f) {
            set.fallback[f * set.rows + r] = static_cast<float>(set.row[r].fallback[f] * scale);
        }
    }
}

std::size_t ProductSet::first_row(std::size_t kernel) const {
    const auto found = std::find(kernels.begin(), kernels.end(), kernel);
    return static_cast<std::size_t>(found - kernels.begin()) * channels;
}

void ProductSet::add_fallback(const spectra::Basis& basis,
                              std::size_t interval,
                              const float* spectrum,
                              float* sums) const {
    const float* node = spectrum + basis.stencil_start(interval);
    for (std::size_t s = 0; s < basis.stencil_size(); ++s) {
        const float* weight = fallback.data() + (4 * interval + s) * rows;
        for (std::size_t r = 0; r < rows; ++r) {
            sums[r] += weight[r] * node[s];
        }
    }
}

} // namespace aureole::emission
