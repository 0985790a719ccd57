#include "aureole/emission/kernels.hpp"

#include "aureole/base/dispatch.hpp"

// The file is compiled with -ffp-contract=fast: fused multiply-adds where the processor has them.
namespace aureole::emission::kernels {

namespace {

typedef float Lanes __attribute__((vector_size(64), aligned(4), may_alias));

constexpr std::size_t cell_group = 6; // 6 x 16 sums fill the registers of AVX2, and do no harm elsewhere

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
                                                             std::size_t first_order,
                                                             const float* __restrict fraction,
                                                             std::size_t orders,
                                                             const int* __restrict table,
                                                             const float* __restrict along,
                                                             std::size_t channels,
                                                             const float* __restrict spectrum,
                                                             float* __restrict out) {
    const std::size_t nodes = rows.nodes;
    const std::size_t order_step = rows.tables * nodes;
    for (std::size_t c = 0; c < channels; ++c) {
        const float* row = rows.value + first_order * order_step + static_cast<std::size_t>(table[c]) * nodes;
        Lanes sum{};
        for (std::size_t i = 0; i < nodes; i += 16) {
            Lanes weight{};
            for (std::size_t o = 0; o < orders; ++o) {
                const float* at = row + o * order_step + i;
                const Lanes low = *reinterpret_cast<const Lanes*>(at);
                const Lanes high = *reinterpret_cast<const Lanes*>(at + nodes);
                weight += (low + (high - low) * along[c]) * fraction[o];
            }
            sum += weight * *reinterpret_cast<const Lanes*>(spectrum + i);
        }
        float total = 0;
        for (int half = 8; half > 0; half /= 2) {
            for (int lane = 0; lane < half; ++lane) {
                sum[lane] += sum[lane + half];
            }
        }
        total += sum[0];
        out[c] = total;
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
                                  std::size_t first_order,
                                  const float* fraction,
                                  std::size_t orders,
                                  const int* table,
                                  const float* along,
                                  std::size_t channels,
                                  const float* spectrum,
                                  float* out) {
    interpolated_body(rows, first_order, fraction, orders, table, along, channels, spectrum, out);
}

void interpolated_portable(const RowTable& rows,
                           std::size_t first_order,
                           const float* fraction,
                           std::size_t orders,
                           const int* table,
                           const float* along,
                           std::size_t channels,
                           const float* spectrum,
                           float* out) {
    interpolated_body(rows, first_order, fraction, orders, table, along, channels, spectrum, out);
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
                           std::size_t first_order,
                           const float* fraction,
                           std::size_t orders,
                           const int* table,
                           const float* along,
                           std::size_t channels,
                           const float* spectrum,
                           float* out,
                           bool portable) {
    (portable ? interpolated_portable : interpolated_hot)(rows, first_order, fraction, orders, table, along,
                                                          channels, spectrum, out);
}

} // namespace aureole::emission::kernels
