// A bare loop over the spectra of a grid file, to compare `aureole predict` with:
//   bare_loop GRID.fits [THREADS [REPEATS]]
// Reads the data of CR_ELECTRON and CR_PROTON, swaps their bytes and multiplies each spectrum with the rows
// of weights of the benchmark run: 16 gamma-ray channels of 3 inverse-Compton components and of pion decay,
// and for each of 8 radio frequencies the four rows between which a run finds the row of a cell's own field.
// It checks nothing, knows no field, gas or bremsstrahlung, and throws the sums away. Prints the seconds of
// every repeat and a sum of results.
#include <omp.h>

#include <algorithm>
#include <chrono>
#include <cstdint>
#include <cstdio>
#include <cstdlib>
#include <cstring>
#include <fcntl.h>
#include <string>
#include <unistd.h>
#include <vector>

#if defined(__x86_64__) && defined(__gnu_linux__) && defined(__GNUC__) && !defined(__clang__)
#define HOT __attribute__((target_clones("default", "arch=x86-64-v3", "arch=x86-64-v4")))
#else
#define HOT
#endif

namespace {

typedef float Lanes __attribute__((vector_size(64), aligned(4), may_alias));

constexpr std::size_t row_group = 16;
constexpr std::size_t cell_group = 6;
constexpr std::size_t block = 252; // cells read and multiplied at once
constexpr std::size_t record = 2880;

/// Image HDU of 32-bit floats, energy fastest.
struct Spectra {
    std::size_t offset = 0, nodes = 0, cells = 0;
};

/// Integer of a card such as "NAXIS1  =                   64", or 0.
long card_value(const std::string& header, const char* keyword) {
    std::string start(keyword);
    start.resize(8, ' ');
    start += "= ";
    for (std::size_t at = 0; at + 80 <= header.size(); at += 80) {
        if (header.compare(at, 10, start) == 0) {
            return std::strtol(header.c_str() + at + 10, nullptr, 10);
        }
    }
    return 0;
}

bool has_name(const std::string& header, const std::string& name) {
    return header.find("EXTNAME = '" + name) != std::string::npos;
}

/// Scans the headers for an HDU.
Spectra find_spectra(int file, const std::string& name) {
    std::size_t offset = 0;
    while (true) {
        std::string header;
        char text[record];
        std::size_t end = std::string::npos;
        do {
            if (pread(file, text, record, static_cast<off_t>(offset)) != static_cast<ssize_t>(record)) {
                std::fprintf(stderr, "bare_loop: no HDU %s\n", name.c_str());
                std::exit(1);
            }
            offset += record;
            header.append(text, record);
            end = header.find("END     ", header.size() - record);
        } while (end == std::string::npos);
        const long axes = card_value(header, "NAXIS");
        std::size_t values = axes > 0 ? 1 : 0;
        for (long a = 1; a <= axes; ++a) {
            values *= static_cast<std::size_t>(card_value(header, ("NAXIS" + std::to_string(a)).c_str()));
        }
        if (has_name(header, name)) {
            const auto nodes = static_cast<std::size_t>(card_value(header, "NAXIS1"));
            return {offset, nodes, values / nodes};
        }
        const auto size = values * static_cast<std::size_t>(std::labs(card_value(header, "BITPIX"))) / 8;
        offset += (size + record - 1) / record * record;
    }
}

HOT void swap_bytes(const std::uint32_t* __restrict raw, std::size_t count, float* __restrict out) {
    for (std::size_t i = 0; i < count; ++i) {
        const std::uint32_t bits = __builtin_bswap32(raw[i]);
        std::memcpy(out + i, &bits, sizeof bits);
    }
}

/// sums[cell][row] = sum over nodes of weights[group][node][row in group] x spectra[cell][node].
HOT void products(const float* __restrict weights,
                  std::size_t rows,
                  const float* __restrict spectra,
                  std::size_t cells,
                  std::size_t nodes,
                  float* __restrict sums) {
    for (std::size_t group = 0; group < rows / row_group; ++group) {
        const float* weight = weights + group * nodes * row_group;
        std::size_t cell = 0;
        for (; cell + cell_group <= cells; cell += cell_group) {
            const float* s = spectra + cell * nodes;
            Lanes a0{}, a1{}, a2{}, a3{}, a4{}, a5{};
            for (std::size_t i = 0; i < nodes; ++i) {
                const Lanes w = *reinterpret_cast<const Lanes*>(weight + i * row_group);
                a0 += w * s[i];
                a1 += w * s[nodes + i];
                a2 += w * s[2 * nodes + i];
                a3 += w * s[3 * nodes + i];
                a4 += w * s[4 * nodes + i];
                a5 += w * s[5 * nodes + i];
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
            Lanes a{};
            for (std::size_t i = 0; i < nodes; ++i) {
                a += *reinterpret_cast<const Lanes*>(weight + i * row_group) * spectra[cell * nodes + i];
            }
            *reinterpret_cast<Lanes*>(sums + cell * rows + group * row_group) = a;
        }
    }
}

/// One HDU with its rows, padded to whole groups; returns the sum of some results, so that none is left out.
double run(int file, const Spectra& spectra, std::size_t rows) {
    const std::size_t padded = (rows + row_group - 1) / row_group * row_group;
    std::vector<float> weights(padded * spectra.nodes);
    for (std::size_t i = 0; i < weights.size(); ++i) {
        weights[i] = 1.0F + static_cast<float>(i % 7);
    }
    const auto blocks = static_cast<long>((spectra.cells + block - 1) / block);
    double kept = 0;
#pragma omp parallel reduction(+ : kept)
    {
        std::vector<std::uint32_t> raw(block * spectra.nodes);
        std::vector<float> values(block * spectra.nodes);
        std::vector<float> sums(block * padded);
#pragma omp for schedule(dynamic, 16)
        for (long b = 0; b < blocks; ++b) {
            const std::size_t first = static_cast<std::size_t>(b) * block;
            const std::size_t cells = std::min(block, spectra.cells - first);
            const std::size_t count = cells * spectra.nodes;
            const auto place = static_cast<off_t>(spectra.offset + first * spectra.nodes * sizeof(float));
            if (pread(file, raw.data(), count * sizeof(float), place) !=
                static_cast<ssize_t>(count * sizeof(float))) {
                std::fprintf(stderr, "bare_loop: the file is cut short\n");
                std::exit(1);
            }
            swap_bytes(raw.data(), count, values.data());
            products(weights.data(), padded, values.data(), cells, spectra.nodes, sums.data());
            kept += static_cast<double>(sums[cells * padded - 1]);
        }
    }
    return kept;
}

} // namespace

int main(int argc, char** argv) {
    if (argc < 2) {
        std::fprintf(stderr, "usage: bare_loop GRID.fits [THREADS [REPEATS]]\n");
        return 2;
    }
    omp_set_num_threads(argc > 2 ? std::atoi(argv[2]) : 2);
    const int repeats = argc > 3 ? std::atoi(argv[3]) : 5;
    const int file = open(argv[1], O_RDONLY);
    if (file < 0) {
        std::fprintf(stderr, "bare_loop: cannot open %s\n", argv[1]);
        return 1;
    }
    const Spectra electrons = find_spectra(file, "CR_ELECTRON");
    const Spectra protons = find_spectra(file, "CR_PROTON");
    constexpr std::size_t channels = 16;
    constexpr std::size_t synchrotron_rows = 4 * 8;
    for (int repeat = 0; repeat < repeats; ++repeat) {
        const auto start = std::chrono::steady_clock::now();
        const double kept =
            run(file, electrons, 3 * channels + synchrotron_rows) + run(file, protons, channels);
        const std::chrono::duration<double> seconds = std::chrono::steady_clock::now() - start;
        std::printf("%.4f s (%g)\n", seconds.count(), kept);
    }
    close(file);
}
