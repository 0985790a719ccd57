#pragma once

#include "aureole/base/constants.hpp"
#include "aureole/emission/emit.hpp"
#include "aureole/spectra/source.hpp"

#include <algorithm>
#include <cmath>
#include <functional>
#include <memory>
#include <vector>

/// One cell, or a few alike, with a spectrum given by a formula: emission against closed forms needs no more.
namespace sample {

inline std::vector<double> log_nodes(double from, double to, std::size_t per_decade) {
    const auto n =
        static_cast<std::size_t>(std::lround(std::log10(to / from) * static_cast<double>(per_decade)));
    std::vector<double> nodes;
    for (std::size_t i = 0; i <= n; ++i) {
        nodes.push_back(from * std::pow(to / from, static_cast<double>(i) / static_cast<double>(n)));
    }
    return nodes;
}

inline aureole::grid::Grid box(std::size_t nx = 1, std::size_t ny = 1, std::size_t nz = 1) {
    const auto edges = [](std::size_t n) {
        std::vector<double> e;
        for (std::size_t i = 0; i <= n; ++i) {
            e.push_back(aureole::constants::kiloparsec *
                        (static_cast<double>(i) - 0.5 * static_cast<double>(n)));
        }
        return e;
    };
    return {aureole::grid::Geometry::xyz, edges(nx), edges(ny), edges(nz), false};
}

/// density: N(T, cell), cm-3 erg-1 against kinetic energy in erg.
inline aureole::spectra::Source source(aureole::spectra::Species species,
                                       std::vector<double> energy,
                                       std::size_t cells,
                                       std::function<double(double, std::size_t)> density) {
    aureole::spectra::Source s;
    s.species = species;
    s.basis = std::make_shared<const aureole::spectra::Basis>(std::move(energy));
    s.cells = cells;
    s.open = [basis = s.basis, density]() -> aureole::spectra::Source::Reader {
        return [basis, density](std::size_t first, std::size_t count, float* weighted, std::size_t stride) {
            for (std::size_t c = 0; c < count; ++c) {
                for (std::size_t i = 0; i < basis->nodes(); ++i) {
                    const double t = basis->energy()[i];
                    weighted[c * stride + i] =
                        static_cast<float>(density(t, first + c) * std::pow(t, aureole::spectra::weighting));
                }
            }
        };
    };
    return s;
}

inline double value(const aureole::emission::Emitted& emitted, std::size_t cell, std::size_t plane) {
    const auto& e = emitted.emissivity;
    return e.planes[plane].unit * static_cast<double>(e.value[cell * e.planes.size() + plane]);
}

} // namespace sample
