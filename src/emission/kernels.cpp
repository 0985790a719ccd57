#include "aureole/emission/kernels.hpp"

#include "aureole/base/dispatch.hpp"

// The file is compiled with -ffp-contract=fast: fused multiply-adds where the processor has them.
namespace aureole::emission::kernels {

namespace {

typedef float Lanes __attribute__((vector_size(64), aligned(4), may_alias));

constexpr std::size_t cell_group = 6; // 6 x 16 sums fill the registers of AVX2, and do no harm elsewhere

inline __attribute__((always_inline)) const Lanes& lanes(const float* at) {
    return *reinterpret_cast<const Lanes*>(at);
}

inline __attribute__((always_inline)) float lane_sum(const Lanes& v) {
    const Lanes two = v + __builtin_shufflevector(v, v, 8, 9, 10, 11, 12, 13, 14, 15, 0, 1, 2, 3, 4, 5, 6, 7);
    const Lanes four =
        two + __builtin_shufflevector(two, two, 4, 5, 6, 7, 0, 1, 2, 3, 12, 13, 14, 15, 8, 9, 10, 11);
    const Lanes eight =
        four + __builtin_shufflevector(four, four, 2, 3, 0, 1, 6, 7, 4, 5, 10, 11, 8, 9, 14, 15, 12, 13);
    return eight[0] + eight[1];
}

inline __attribute__((always_inline)) void products_body(const float* __restrict weights,
                                                         std::size_t rows,
                                                         const float* __restrict spectra,
                                                         std::size_t cells,
                                                         std::size_t nodes,
                                                         std::size_t stride,
                                                         float* __restrict sums) {
    for (std::size_t group = 0; group < rows / row_group; ++group) {
        const float* weight = weights + group * nodes * row_group;
        std::size_t cell = 0;
        for (; cell + cell_group <= cells; cell += cell_group) {
            const float* s = spectra + cell * stride;
            Lanes a0{}, a1{}, a2{}, a3{}, a4{}, a5{};
            for (std::size_t i = 0; i < nodes; ++i) {
                const Lanes w = *reinterpret_cast<const Lanes*>(weight + i * row_group);
                a0 += w * s[i];
                a1 += w * s[stride + i];
                a2 += w * s[2 * stride + i];
                a3 += w * s[3 * stride + i];
                a4 += w * s[4 * stride + i];
                a5 += w * s[5 * stride + i];
            }
            float* out = sums + cell * rows + group * row_group;
            *reinterpret_cast<Lanes*>(out) = a0;
            *reinterpret_cast<Lanes*>(out + rows) = a1;
            *reinterpret_cast<Lanes*>(out + 2 * rows) = a2;
            *reinterpret_cast<Lanes*>(out + 3 * rows) = a3;
            *reinterpret_cast<Lanes*>(out + 4 * rows) = a4;
            *reinterpret_cast<Lanes*>(out + 5 * rows) = a5;
        }
        for (; cell < cells; ++cell) {
            const float* s = spectra + cell * stride;
            Lanes a{};
            for (std::size_t i = 0; i < nodes; ++i) {
                a += *reinterpret_cast<const Lanes*>(weight + i * row_group) * s[i];
            }
            *reinterpret_cast<Lanes*>(sums + cell * rows + group * row_group) = a;
        }
    }
}

inline __attribute__((always_inline)) void interpolated_body(const RowTable& rows,
                                                             std::size_t order,
                                                             float towards,
                                                             const int* __restrict table,
                                                             const float* __restrict along,
                                                             std::size_t channels,
                                                             const float* __restrict spectrum,
                                                             float* __restrict out) {
    const std::size_t nodes = rows.nodes;
    const std::size_t next = rows.orders * nodes;
    for (std::size_t c = 0; c < channels; ++c) {
        const float* row = rows.value + (static_cast<std::size_t>(table[c]) * rows.orders + order) * nodes;
        const auto first_node = static_cast<std::size_t>(rows.first_node[table[c]]);
        const float w01 = towards - towards * along[c], w00 = 1 - along[c] - w01;
        const float w11 = towards * along[c], w10 = along[c] - w11;
        Lanes sum{};
        for (std::size_t i = first_node; i < nodes; i += 16) {
            const float* low = row + i;
            const float* high = low + next;
            const Lanes weight = (lanes(low) * w00 + lanes(low + nodes) * w01) +
                                 (lanes(high) * w10 + lanes(high + nodes) * w11);
            sum += weight * lanes(spectrum + i);
        }
        out[c] = lane_sum(sum);
    }
}

AUREOLE_HOT void products_hot(const float* weights,
                              std::size_t rows,
                              const float* spectra,
                              std::size_t cells,
                              std::size_t nodes,
                              std::size_t stride,
                              float* sums) {
    products_body(weights, rows, spectra, cells, nodes, stride, sums);
}

void products_portable(const float* weights,
                       std::size_t rows,
                       const float* spectra,
                       std::size_t cells,
                       std::size_t nodes,
                       std::size_t stride,
                       float* sums) {
    products_body(weights, rows, spectra, cells, nodes, stride, sums);
}

AUREOLE_HOT void interpolated_hot(const RowTable& rows,
                                  std::size_t order,
                                  float towards,
                                  const int* table,
                                  const float* along,
                                  std::size_t channels,
                                  const float* spectrum,
                                  float* out) {
    interpolated_body(rows, order, towards, table, along, channels, spectrum, out);
}

void interpolated_portable(const RowTable& rows,
                           std::size_t order,
                           float towards,
                           const int* table,
                           const float* along,
                           std::size_t channels,
                           const float* spectrum,
                           float* out) {
    interpolated_body(rows, order, towards, table, along, channels, spectrum, out);
}

} // namespace

void products(const float* weights,
              std::size_t rows,
              const float* spectra,
              std::size_t cells,
              std::size_t nodes,
              std::size_t stride,
              float* sums,
              bool portable) {
    (portable ? products_portable : products_hot)(weights, rows, spectra, cells, nodes, stride, sums);
}

void interpolated_products(const RowTable& rows,
                           std::size_t order,
                           float towards,
                           const int* table,
                           const float* along,
                           std::size_t channels,
                           const float* spectrum,
                           float* out,
                           bool portable) {
    (portable ? interpolated_portable : interpolated_hot)(rows, order, towards, table, along, channels,
                                                          spectrum, out);
}

} // namespace aureole::emission::kernels
