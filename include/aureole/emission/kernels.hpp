#pragma once

#include <cstddef>

/// Inner loops over cells, in a file of their own free of templates and Eigen, compiled for several
/// instruction sets and chosen at run time. `portable` picks the plain x86-64 version, whose bits do not
/// depend on the processor.
namespace aureole::emission::kernels {

inline constexpr std::size_t row_group = 16; ///< weights come in groups of so many rows; pad with zero rows

/// sums[cell * rows + row] = sum_i weights[(group * nodes + i) * row_group + lane] * spectra[cell * stride +
/// i],  row = group * row_group + lane; rows is a multiple of row_group. Accumulated in float in the order of
/// the nodes: relative error below 2e-6 for terms of one sign and up to 100 nodes.
void products(const float* weights,
              std::size_t rows,
              const float* spectra,
              std::size_t cells,
              std::size_t nodes,
              std::size_t stride,
              float* sums,
              bool portable);

/// Synchrotron weight rows: value[((table * orders + order) * nodes + i)], table counting ln(nu/B) and
/// `order` how ordered the field is, so that what one cell needs lies together. nodes is a multiple of 16,
/// padded with zeros. Before `first_node[table]` (a multiple of 16) a row and the next one are zero for every
/// order.
struct RowTable {
    const float* value;
    std::size_t orders, nodes;
    const int* first_node;
};

/// out[c] = sum_i spectrum[i] row_c[i], row_c between the four rows (order, order + 1) x (table[c], table[c]
/// + 1): linear in both, `towards` and along[c] being the way from the first to the second.
void interpolated_products(const RowTable& rows,
                           std::size_t order,
                           float towards,
                           const int* table,
                           const float* along,
                           std::size_t channels,
                           const float* spectrum,
                           float* out,
                           bool portable);

} // namespace aureole::emission::kernels
