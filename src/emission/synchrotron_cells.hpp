#pragma once

#include "aureole/emission/channels.hpp"
#include "aureole/emission/emit.hpp"
#include "aureole/emission/synchrotron_rows.hpp"
#include "aureole/grid/cells.hpp"
#include "aureole/media/media.hpp"

#include <cstddef>
#include <span>
#include <vector>

namespace aureole::emission {

/// The field of one cell as the observer sees it.
struct FieldSeen {
    double across = 0; ///< G: sqrt(b0^2 + 2 sigma^2)
    double order = 0;  ///< b0^2/across^2
    double cos2chi = 1,
           sin2chi = 0; ///< of the emitted E-vector, which is perpendicular to b0; North through East
};

FieldSeen field_seen(const media::Field& field,
                     const grid::Cells& cells,
                     std::size_t stored_cell,
                     std::size_t i,
                     std::size_t j,
                     std::size_t k,
                     const Orientation& orientation);

/// Synchrotron emission of the radio channels, ready to be evaluated cell by cell.
struct SynchrotronCells {
    SynchrotronRows rows;
    std::vector<double> log_frequency; ///< ln(nu/nu_1) of every sample
    std::vector<std::size_t> sample_channel;
    std::vector<float> sample_factor; ///< (nu/nu_1)^-tilt x share of the sample in its channel, over that of
                                      ///< the channel's centre
    std::vector<double> unit;         ///< [radio channels] CGS of one stored unit
    std::size_t channels = 0;

    bool active() const { return channels > 0; }

    /// Writes totals to out[plane_of[channel]] and, where rows hold them, Q and U behind `stokes`.
    void emit(const FieldSeen& seen,
              const float* spectrum,
              const spectra::Basis& basis,
              std::span<const std::size_t> negative,
              std::span<const std::size_t> plane_of,
              float* out,
              float* stokes,
              bool portable) const;
};

SynchrotronCells prepare_synchrotron(const spectra::Basis& basis,
                                     const media::Field& field,
                                     const std::vector<Channel>& channels,
                                     const std::vector<std::size_t>& radio_channels,
                                     bool polarised,
                                     const RunContext& context);

} // namespace aureole::emission
