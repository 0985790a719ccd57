#pragma once

#include <algorithm>
#include <cstddef>

/// Dense kernels of the frontal factorisation, always compiled into the function that calls them, so that
/// they take the instruction set of that function. Matrices by rows, row lengths multiples of 8.
namespace aureole::transport::kernels {

#define AUREOLE_KERNEL [[gnu::always_inline]] inline

/// Eight numbers; one register of AVX-512, else as many as it takes.
typedef double Lanes __attribute__((vector_size(64)));
/// The same anywhere in an array.
typedef double LooseLanes __attribute__((vector_size(64), aligned(8), may_alias));

AUREOLE_KERNEL LooseLanes& lanes(double* at) {
    return *reinterpret_cast<LooseLanes*>(at);
}
AUREOLE_KERNEL const LooseLanes& lanes(const double* at) {
    return *reinterpret_cast<const LooseLanes*>(at);
}

/// target[0..4)[0..8) -= sum over k of left[k][0..4) right[k][0..8).
AUREOLE_KERNEL void subtract_tile(double* target,
                                  std::size_t target_row,
                                  const double* left,
                                  std::size_t left_row,
                                  const double* right,
                                  std::size_t right_row,
                                  std::size_t depth) {
    Lanes a = lanes(target);
    Lanes b = lanes(target + target_row);
    Lanes c = lanes(target + 2 * target_row);
    Lanes d = lanes(target + 3 * target_row);
    for (std::size_t k = 0; k < depth; ++k) {
        const Lanes r = lanes(right + k * right_row);
        const double* l = left + k * left_row;
        a -= l[0] * r;
        b -= l[1] * r;
        c -= l[2] * r;
        d -= l[3] * r;
    }
    lanes(target) = a;
    lanes(target + target_row) = b;
    lanes(target + 2 * target_row) = c;
    lanes(target + 3 * target_row) = d;
}

/// Four rows from column `from` to `to`, both multiples of 8.
AUREOLE_KERNEL void subtract_rows(double* target,
                                  std::size_t target_row,
                                  const double* left,
                                  std::size_t left_row,
                                  const double* right,
                                  std::size_t right_row,
                                  std::size_t depth,
                                  std::size_t from,
                                  std::size_t to) {
    for (std::size_t j = from; j < to; j += 8) {
        subtract_tile(target + j, target_row, left, left_row, right + j, right_row, depth);
    }
}

/// The rest of a triangular solve inside four rows: row r loses factor(t, r) times the rows t < r of the
/// four. Then every row r is multiplied by scale[r] if given (before it is used for the next ones).
AUREOLE_KERNEL void finish_rows(double* rows,
                                std::size_t row,
                                const double* factor,
                                std::size_t factor_row,
                                const double* scale,
                                std::size_t from,
                                std::size_t to) {
    const double f01 = factor[1];
    const double f02 = factor[2];
    const double f03 = factor[3];
    const double f12 = factor[factor_row + 2];
    const double f13 = factor[factor_row + 3];
    const double f23 = factor[2 * factor_row + 3];
    for (std::size_t j = from; j < to; j += 8) {
        Lanes a = lanes(rows + j);
        Lanes b = lanes(rows + row + j);
        Lanes c = lanes(rows + 2 * row + j);
        Lanes d = lanes(rows + 3 * row + j);
        if (scale != nullptr) {
            a *= scale[0];
        }
        b -= f01 * a;
        if (scale != nullptr) {
            b *= scale[1];
        }
        c -= f02 * a + f12 * b;
        if (scale != nullptr) {
            c *= scale[2];
        }
        d -= f03 * a + f13 * b + f23 * c;
        if (scale != nullptr) {
            d *= scale[3];
        }
        lanes(rows + j) = a;
        lanes(rows + row + j) = b;
        lanes(rows + 2 * row + j) = c;
        lanes(rows + 3 * row + j) = d;
    }
}

/// Square part of the upper panel -> its LU factors without pivoting; the strictly lower factor goes,
/// transposed, into the square part of the lower panel. False if a pivot is 0 or not finite (or negative
/// where `positive`).
AUREOLE_KERNEL bool factor_square(
    double* upper, double* lower, double* inverse, std::size_t pivots, std::size_t width, bool positive) {
    for (std::size_t k = 0; k < pivots; ++k) {
        double* row = upper + k * width;
        const double pivot = row[k];
        const bool usable = positive ? pivot > 0 : (pivot < 0 || pivot > 0);
        if (!usable || !(pivot - pivot == 0)) {
            return false;
        }
        const double one_over = 1 / pivot;
        inverse[k] = one_over;
        for (std::size_t i = k + 1; i < pivots; ++i) {
            double* other = upper + i * width;
            const double l = other[k] * one_over;
            lower[k * width + i] = l;
#pragma GCC ivdep
            for (std::size_t j = k + 1; j < pivots; ++j) {
                other[j] -= l * row[j];
            }
        }
    }
    return true;
}

/// Both panels of a front, the square part first, from its assembled panels; then the Schur complement in
/// `remainder` (on and above the diagonal only, if symmetric).
AUREOLE_KERNEL bool eliminate(double* upper,
                              double* lower,
                              double* inverse,
                              double* remainder,
                              std::size_t pivots,
                              std::size_t pivot_columns,
                              std::size_t later_columns,
                              bool symmetric) {
    const std::size_t width = pivot_columns + later_columns;
    if (symmetric) {
        for (std::size_t i = 1; i < pivots; ++i) {
            for (std::size_t j = 0; j < i; ++j) {
                upper[i * width + j] = upper[j * width + i];
            }
        }
    }
    if (!factor_square(upper, lower, inverse, pivots, width, symmetric)) {
        return false;
    }
    for (std::size_t k = 0; k < pivots; k += 4) {
        double* rows = upper + k * width;
        const double* factor = lower + k;
        subtract_rows(rows, width, factor, width, upper, width, k, pivot_columns, width);
        finish_rows(rows, width, factor + k * width, width, nullptr, pivot_columns, width);
    }
    if (symmetric) {
        for (std::size_t k = 0; k < pivots; ++k) {
#pragma GCC ivdep
            for (std::size_t j = pivot_columns; j < width; ++j) {
                lower[k * width + j] = upper[k * width + j] * inverse[k];
            }
        }
    } else {
        for (std::size_t k = 0; k < pivots; k += 4) {
            double* rows = lower + k * width;
            const double* factor = upper + k;
            subtract_rows(rows, width, factor, width, lower, width, k, pivot_columns, width);
            finish_rows(rows, width, factor + k * width, width, inverse + k, pivot_columns, width);
        }
    }
    for (std::size_t i = 0; i < later_columns; i += 4) {
        subtract_rows(remainder + i * later_columns, later_columns, lower + pivot_columns + i, width,
                      upper + pivot_columns, width, pivots, symmetric ? i / 8 * 8 : 0, later_columns);
    }
    return true;
}

/// One front in the solution of `sides` systems at once; the work of system s starts at s * stride.
struct Panel {
    const double* values;
    const double* inverse; ///< of the pivots
    std::size_t pivots, rows, pivot_columns, width, stride;
};

/// Solves with the lower factor for the pivots in work[0..pivots), and puts what the later unknowns lose by
/// them behind. `scaled`: the panel is the upper one of a symmetric factor, which stands in for the lower.
template <std::size_t sides>
AUREOLE_KERNEL void forward(const Panel& panel, bool scaled, double* work, double* pivot_values) {
    for (std::size_t s = 0; s < sides; ++s) {
        double* one = work + s * panel.stride;
        double* found = pivot_values + s * panel.stride;
        for (std::size_t k = 0; k < panel.pivots; ++k) {
            const double value = scaled ? one[k] * panel.inverse[k] : one[k];
            found[k] = value;
            const double* row = panel.values + k * panel.width;
#pragma GCC ivdep
            for (std::size_t j = k + 1; j < panel.pivots; ++j) {
                one[j] -= value * row[j];
            }
        }
        std::fill(found + panel.pivots, found + panel.rows, 0.0);
    }
    for (std::size_t j = panel.pivot_columns; j < panel.width; j += 8) {
        Lanes even[sides] = {};
        Lanes odd[sides] = {};
        for (std::size_t k = 0; k < panel.rows; k += 2) {
            const double* row = panel.values + k * panel.width + j;
            const Lanes first = lanes(row);
            const Lanes second = lanes(row + panel.width);
            for (std::size_t s = 0; s < sides; ++s) {
                even[s] -= pivot_values[s * panel.stride + k] * first;
                odd[s] -= pivot_values[s * panel.stride + k + 1] * second;
            }
        }
        for (std::size_t s = 0; s < sides; ++s) {
            lanes(work + s * panel.stride + j) = even[s] + odd[s];
        }
    }
}

/// Solves with the upper factor for the pivots in work[0..pivots) where the later unknowns stand behind them.
template <std::size_t sides> AUREOLE_KERNEL void backward(const Panel& panel, double* work) {
    for (std::size_t k = 0; k < panel.rows; k += 2) {
        const double* row = panel.values + k * panel.width;
        Lanes first[sides] = {};
        Lanes second[sides] = {};
        for (std::size_t j = panel.pivot_columns; j < panel.width; j += 8) {
            const Lanes a = lanes(row + j);
            const Lanes b = lanes(row + panel.width + j);
            for (std::size_t s = 0; s < sides; ++s) {
                const Lanes w = lanes(work + s * panel.stride + j);
                first[s] += a * w;
                second[s] += b * w;
            }
        }
        for (std::size_t s = 0; s < sides; ++s) {
            double* one = work + s * panel.stride + k;
            const Lanes& a = first[s];
            const Lanes& b = second[s];
            one[0] -= ((a[0] + a[1]) + (a[2] + a[3])) + ((a[4] + a[5]) + (a[6] + a[7]));
            one[1] -= ((b[0] + b[1]) + (b[2] + b[3])) + ((b[4] + b[5]) + (b[6] + b[7]));
        }
    }
    for (std::size_t s = 0; s < sides; ++s) {
        double* one = work + s * panel.stride;
        for (std::size_t k = panel.pivots; k-- > 0;) {
            const double* row = panel.values + k * panel.width;
            double sum = 0;
#pragma omp simd reduction(+ : sum)
            for (std::size_t j = k + 1; j < panel.pivots; ++j) {
                sum += row[j] * one[j];
            }
            one[k] = (one[k] - sum) * panel.inverse[k];
        }
    }
}

} // namespace aureole::transport::kernels
