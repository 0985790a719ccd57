#include "aureole/spectra/file_source.hpp"

#include "aureole/base/constants.hpp"
#include "aureole/base/error.hpp"
#include "aureole/files/fits_reader.hpp"
#include "aureole/media/cell_average.hpp"
#include "aureole/spectra/closed_form.hpp"
#include "aureole/spectra/unpack.hpp"

#include <fmt/format.h>

#include <atomic>
#include <bit>
#include <cerrno>
#include <cmath>
#include <cstring>
#include <fcntl.h>
#include <optional>
#include <unistd.h>

namespace aureole::spectra {

namespace {

using files::FitsReader;
using files::HduInfo;
using grid::GridFile;

/// What the readers of one HDU share: the sum of all words read, for the checksum.
struct Shared {
    std::string path, hdu;
    grid::Grid grid;
    std::size_t offset = 0, nodes = 0;
    std::vector<float> scale;
    std::atomic<std::uint64_t> word_sum{0}, cells_read{0};
    std::atomic<bool> checked{false};
    std::optional<std::uint32_t> datasum;
};

class Descriptor {
  public:
    explicit Descriptor(const std::string& path) : value_(open(path.c_str(), O_RDONLY | O_CLOEXEC)) {
        if (value_ < 0) {
            throw Error(ErrorKind::input,
                        fmt::format("{}: cannot be opened: {}", path, std::strerror(errno)));
        }
    }
    ~Descriptor() { close(value_); }
    Descriptor(const Descriptor&) = delete;
    Descriptor& operator=(const Descriptor&) = delete;
    int get() const { return value_; }

  private:
    int value_;
};

[[noreturn]] void refuse_value(const Shared& shared, std::size_t cell, std::size_t node, double value) {
    throw Error(
        ErrorKind::input,
        fmt::format(
            "{}: HDU {}: {}, energy node {}: found {:g}, expected a finite density that is not negative",
            shared.path, shared.hdu, grid::cell_text(shared.grid, cell), node + 1, value));
}

void read_exactly(const Shared& shared, int descriptor, void* to, std::size_t bytes, std::size_t offset) {
    auto* place = static_cast<char*>(to);
    while (bytes > 0) {
        const ssize_t got = pread(descriptor, place, bytes, static_cast<off_t>(offset));
        if (got < 0 && errno == EINTR) {
            continue;
        }
        if (got <= 0) {
            throw Error(ErrorKind::input,
                        fmt::format("{}: HDU {}: {}", shared.path, shared.hdu,
                                    got == 0 ? "cut short while it was read" : std::strerror(errno)));
        }
        place += got;
        bytes -= static_cast<std::size_t>(got);
        offset += static_cast<std::size_t>(got);
    }
}

Source::Reader raw_reader(const std::shared_ptr<Shared>& shared) {
    const auto descriptor = std::make_shared<Descriptor>(shared->path);
    const auto buffer = std::make_shared<std::vector<std::uint32_t>>();
    return [shared, descriptor, buffer](std::size_t first, std::size_t count, float* weighted,
                                        std::size_t stride) {
        const std::size_t nodes = shared->nodes;
        buffer->resize(count * nodes);
        read_exactly(*shared, descriptor->get(), buffer->data(), count * nodes * 4,
                     shared->offset + first * nodes * 4);
        std::uint64_t sum = 0;
        if (!unpack(buffer->data(), count, nodes, shared->scale.data(), weighted, stride, &sum)) {
            for (std::size_t v = 0; v < count * nodes; ++v) {
                const auto value = std::bit_cast<float>(__builtin_bswap32((*buffer)[v]));
                if (!std::isfinite(value) || value < 0) {
                    refuse_value(*shared, first + v / nodes, v % nodes, static_cast<double>(value));
                }
            }
        }
        shared->word_sum += files::fold_checksum(sum);
        shared->cells_read += count;
    };
}

Source::Reader cfitsio_reader(const std::shared_ptr<Shared>& shared) {
    const auto reader = std::make_shared<FitsReader>(shared->path);
    const auto buffer =
        std::make_shared<std::vector<double>>(); // 64-bit data may lie below the range of floats
    return
        [shared, reader, buffer](std::size_t first, std::size_t count, float* weighted, std::size_t stride) {
            const std::size_t nodes = shared->nodes;
            buffer->resize(count * nodes);
            reader->read(*reader->find(shared->hdu), first * nodes, count * nodes, buffer->data());
            for (std::size_t v = 0; v < count * nodes; ++v) {
                const double value = (*buffer)[v];
                const auto scaled = static_cast<float>(value * static_cast<double>(shared->scale[v % nodes]));
                if (!std::isfinite(scaled) || value < 0) {
                    refuse_value(*shared, first + v / nodes, v % nodes, value);
                }
                weighted[v / nodes * stride + v % nodes] = scaled;
            }
        };
}

Source one_hdu(const GridFile& file, const std::string& name, Species species) {
    const grid::DataHdu& data = file.hdu(name);
    const auto& energy = file.axes.at(data.axes.front());
    const auto shared = std::make_shared<Shared>();
    shared->path = file.path;
    shared->hdu = name;
    shared->grid = file.grid;
    shared->nodes = energy.size();
    const double factor = unit_factor(data.unit, dimension::spectral_density);
    for (const double t : energy) {
        shared->scale.push_back(static_cast<float>(factor * std::pow(t, weighting)));
    }
    FitsReader reader(file.path);
    const HduInfo& hdu = *reader.find(name);
    shared->offset = hdu.data_offset;
    const bool raw = hdu.bitpix == -32 && !hdu.compressed && !hdu.scaled && shared->nodes < 65536;
    if (raw) {
        shared->datasum = reader.datasum(hdu);
    }
    Source source;
    source.species = species;
    source.basis = std::make_shared<const Basis>(energy);
    source.cells = file.grid.stored_cells();
    source.name = name;
    source.open = [shared, raw] { return raw ? raw_reader(shared) : cfitsio_reader(shared); };
    source.finish = [shared, raw] {
        if (shared->checked.exchange(true)) {
            return;
        }
        bool intact = true;
        if (raw && shared->cells_read == shared->grid.stored_cells()) {
            intact = !shared->datasum || *shared->datasum == files::fold_checksum(shared->word_sum);
        } else { // compressed, or not read exactly once: read again for the checksum
            FitsReader again(shared->path);
            intact = again.verify_checksum(*again.find(shared->hdu)) != false;
        }
        if (!intact) {
            throw Error(
                ErrorKind::input,
                fmt::format("{}: HDU {}: the checksum does not match the data, expected an intact file",
                            shared->path, shared->hdu));
        }
    };
    return source;
}

/// Two sources on the same nodes, added.
Source sum(const Source& a, const Source& b) {
    Source both = a;
    both.name = a.name + " + " + b.name;
    both.open = [open_a = a.open, open_b = b.open, nodes = a.basis->nodes()]() -> Source::Reader {
        const auto buffer = std::make_shared<std::vector<float>>();
        return [read_a = open_a(), read_b = open_b(), buffer, nodes](std::size_t first, std::size_t count,
                                                                     float* weighted, std::size_t stride) {
            buffer->resize(count * nodes);
            read_a(first, count, weighted, stride);
            read_b(first, count, buffer->data(), nodes);
            for (std::size_t c = 0; c < count; ++c) {
                for (std::size_t i = 0; i < nodes; ++i) {
                    weighted[c * stride + i] += (*buffer)[c * nodes + i];
                }
            }
        };
    };
    both.finish = [finish_a = a.finish, finish_b = b.finish] {
        finish_a();
        finish_b();
    };
    return both;
}

} // namespace

Source file_source(const GridFile& file, Species species) {
    std::vector<std::string> present;
    const std::vector<std::string> wanted =
        species == Species::electrons ? std::vector<std::string>{"CR_LEPTON", "CR_ELECTRON", "CR_POSITRON"}
                                      : std::vector<std::string>{"CR_PROTON"};
    for (const std::string& name : wanted) {
        if (file.has(name)) {
            present.push_back(name);
        }
    }
    if (present.empty()) {
        throw Error(ErrorKind::input,
                    fmt::format("{}: HDU {}: missing, but {}.source = \"file\"", file.path,
                                species == Species::electrons ? "CR_ELECTRON (or CR_LEPTON)" : "CR_PROTON",
                                key_of(species)));
    }
    Source source = one_hdu(file, present.front(), species);
    for (std::size_t i = 1; i < present.size(); ++i) {
        source = sum(source, one_hdu(file, present[i], species));
    }
    return source;
}

std::vector<Source> open_sources(const scenario::Scenario& scenario,
                                 const grid::Grid& grid,
                                 const GridFile* file,
                                 const RunContext& context) {
    std::vector<Source> sources;
    for (const Species species : {Species::electrons, Species::protons}) {
        const std::string key = key_of(species);
        std::string kind = scenario.text(key + ".source");
        if (kind == "transport") { // solved for, not read
            continue;
        }
        const bool in_file = file != nullptr && (species == Species::electrons
                                                     ? file->has("CR_LEPTON") || file->has("CR_ELECTRON") ||
                                                           file->has("CR_POSITRON")
                                                     : file->has("CR_PROTON"));
        if (!scenario.is_set(key + ".source") && file != nullptr) {
            kind = in_file ? "file" : "none";
        }
        if (kind == "none") {
            continue;
        }
        if (kind == "file") {
            if (file == nullptr) {
                throw Error(ErrorKind::scenario,
                            fmt::format("{}.source = \"file\", but the scenario names no input.grid", key));
            }
            sources.push_back(file_source(*file, species));
        } else if (kind == "closed_form") {
            sources.push_back(closed_form(scenario, grid, species, context));
        } else {
            std::string hdu = species == Species::electrons ? "CR_ENERGY_ELECTRON" : "CR_ENERGY_PROTON";
            if (species == Species::electrons && file != nullptr && file->has("CR_ENERGY_LEPTON")) {
                hdu = "CR_ENERGY_LEPTON";
            }
            const auto profile = scenario.profile(key + ".energy_density");
            std::vector<float> density;
            if (file != nullptr && file->has(hdu) && !scenario.is_set(key + ".energy_density.profile")) {
                density = grid::read_scalar(*file, hdu, dimension::energy_density, context);
            } else if (profile.kind == scenario::ProfileKind::none ||
                       profile.kind == scenario::ProfileKind::file) {
                throw Error(
                    ErrorKind::scenario,
                    fmt::format("{}.energy_density.profile: found none and no HDU {}, expected a profile",
                                key, hdu));
            } else {
                density = media::cell_averages(profile, grid, false, context);
            }
            sources.push_back(from_energy_density(std::move(density), spectral_shape(scenario, species),
                                                  scenario_basis(scenario, species), species));
        }
    }
    return sources;
}

} // namespace aureole::spectra
