#pragma once

#include "aureole/base/quadrature.hpp"
#include "aureole/emission/channels.hpp"
#include "aureole/emission/emit.hpp"
#include "aureole/emission/weights.hpp"
#include "aureole/physics/pion_decay.hpp"

#include <functional>
#include <span>
#include <string>
#include <vector>

namespace aureole::emission {

/// A kernel whose integral over the spectrum, times one number per cell, is an emissivity. kernel(T, E):
/// photons s-1 sr-1 erg-1 per particle and unit of the cell's number, times cm-3 of whatever that number
/// counts. T kinetic energy, E photon energy, erg.
struct ProductKernel {
    spectra::Species species = spectra::Species::electrons;
    std::function<double(double kinetic, double photon)> value;
    std::function<std::vector<double>(double photon)> splits; ///< kinetic energies where the kernel bends
};

/// Writes the numbers of stored cells first .. first + count - 1.
using CellNumbers = std::function<void(std::size_t first, std::size_t count, float* out)>;

/// One contribution to the gamma channels: a kernel, the cell's number that multiplies it, and the process it
/// belongs to.
struct ProductTerm {
    std::string process;
    std::size_t kernel = 0;
    CellNumbers numbers;
};

struct ProductPlan {
    std::vector<ProductKernel> kernels;
    std::vector<ProductTerm> terms;
};

/// The model of a name in the scenario. Throws Error(scenario) for an unknown one.
physics::PionModel pion_model(const std::string& name);

ProductPlan
plan_products(const media::Media& media, const Processes& processes, bool electrons, bool protons);

/// The weight rows of all kernels of one species: kernel after kernel, channel after channel.
struct ProductSet {
    std::vector<std::size_t> kernels; ///< which of the plan
    std::vector<WeightRow> row;       ///< [kernels.size() x channels]
    /// [row][photon of the channel] what the rows are made of, weights of the photons included
    std::vector<std::vector<std::vector<KernelPoint>>> points;
    std::vector<double> largest; ///< [channels] largest weight
    std::size_t channels = 0, nodes = 0;
    std::size_t rows = 0, stride = 0; ///< padded
    LargeArray<float> packed;         ///< as kernels::products wants them
    std::vector<float> fallback;      ///< [interval][4][rows]

    std::size_t first_row(std::size_t kernel) const;
    void
    add_fallback(const spectra::Basis& basis, std::size_t interval, const float* spectrum, float* sums) const;
};

/// The rows of several lists of points added up; at least one list.
WeightRow summed_row(const spectra::Basis& basis, std::span<const std::vector<KernelPoint>> photons);

ProductSet build_products(const ProductPlan& plan,
                          spectra::Species species,
                          const spectra::Source* source,
                          const std::vector<Channel>& channels,
                          const std::vector<std::size_t>& gamma_channels,
                          const RunContext& context);

/// Fills `packed` and `fallback`; unit[g] divides the rows of channel g.
void pack(ProductSet& set, const std::vector<double>& unit);

/// Photon energies [erg] whose kernels, times the weights, add up to a channel: its energy alone, or nodes of
/// a quadrature over its band. Each energy keeps a kernel of its own, since the kernel bends where the
/// electron's energy is the photon's.
WeightedPoints channel_photons(const Channel& channel);

} // namespace aureole::emission
