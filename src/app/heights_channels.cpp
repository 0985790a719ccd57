#include "heights_channels.hpp"

#include "aureole/base/error.hpp"
#include "aureole/base/units.hpp"
#include "aureole/files/fits_reader.hpp"

#include <fmt/format.h>

#include <algorithm>
#include <bit>
#include <cctype>
#include <charconv>
#include <cmath>
#include <cstdint>
#include <cstdlib>
#include <fstream>
#include <optional>

namespace aureole::app {

namespace {

using emission::Band;
using emission::Channel;
using files::FitsReader;
using files::HduInfo;

constexpr std::size_t block = 2880;

/// Bytes of a file from `offset`; nothing where it ends before.
std::optional<std::string> bytes_of(std::ifstream& stream, std::size_t offset, std::size_t count) {
    std::string bytes(count, '\0');
    stream.clear();
    stream.seekg(static_cast<std::streamoff>(offset));
    stream.read(bytes.data(), static_cast<std::streamsize>(count));
    return stream.gcount() == static_cast<std::streamsize>(count) ? std::optional(bytes) : std::nullopt;
}

/// First byte after the header that starts at `offset`.
std::optional<std::size_t> header_end(std::ifstream& stream, std::size_t offset) {
    while (const auto cards = bytes_of(stream, offset, block)) {
        offset += block;
        for (std::size_t card = 0; card < block; card += 80) {
            if (cards->compare(card, 8, "END     ") == 0) {
                return offset;
            }
        }
    }
    return std::nullopt;
}

/// Bytes of the data of an HDU, by its header.
std::size_t data_size(FitsReader& reader, const HduInfo& hdu) {
    const auto whole = [&](const std::string& keyword, double otherwise) {
        return static_cast<std::size_t>(std::max(0.0, reader.number(hdu, keyword).value_or(otherwise)));
    };
    const std::size_t axes = whole("NAXIS", 0);
    std::size_t values = axes > 0 ? 1 : 0;
    for (std::size_t axis = 1; axis <= axes; ++axis) {
        values *= whole(fmt::format("NAXIS{}", axis), 0);
    }
    const auto bits = std::abs(reader.number(hdu, "BITPIX").value_or(8));
    return static_cast<std::size_t>(bits / 8) * whole("GCOUNT", 1) * (whole("PCOUNT", 0) + values);
}

/// A binary table by its rows.
struct Table {
    std::size_t row_bytes = 0, rows = 0;
    std::string data;
};

std::optional<Table> table_data(FitsReader& reader, const HduInfo& wanted) {
    std::ifstream stream(reader.path(), std::ios::binary);
    std::size_t offset = 0;
    for (const HduInfo& hdu : reader.hdus()) {
        const auto start = header_end(stream, offset);
        if (!start) {
            return std::nullopt;
        }
        if (hdu.number == wanted.number) {
            Table table;
            table.row_bytes = static_cast<std::size_t>(reader.number(hdu, "NAXIS1").value_or(0));
            table.rows = static_cast<std::size_t>(reader.number(hdu, "NAXIS2").value_or(0));
            auto data = bytes_of(stream, *start, table.row_bytes * table.rows);
            if (!data) {
                return std::nullopt;
            }
            table.data = std::move(*data);
            return table;
        }
        offset = *start + (data_size(reader, hdu) + block - 1) / block * block;
    }
    return std::nullopt;
}

/// TFORM: a count and a letter, "1D", "E", "16A".
struct Form {
    std::size_t count = 1, bytes = 0;
    char letter = ' ';
};

Form form_of(const std::string& text) {
    Form form;
    const auto [end, failure] = std::from_chars(text.data(), text.data() + text.size(), form.count);
    form.letter = end != text.data() + text.size() ? *end : ' ';
    switch (form.letter) {
    case 'L':
    case 'B':
    case 'A':
        form.bytes = form.count;
        break;
    case 'X':
        form.bytes = (form.count + 7) / 8;
        break;
    case 'I':
        form.bytes = 2 * form.count;
        break;
    case 'J':
    case 'E':
        form.bytes = 4 * form.count;
        break;
    case 'K':
    case 'D':
    case 'C':
    case 'P':
        form.bytes = 8 * form.count;
        break;
    default: // M, Q
        form.bytes = 16 * form.count;
    }
    return form;
}

/// A big-endian floating-point number.
template <class Bits, class Value> double number_at(const std::string& data, std::size_t place) {
    Bits bits = 0;
    for (std::size_t byte = 0; byte < sizeof(Bits); ++byte) {
        bits = static_cast<Bits>(bits << 8 | static_cast<unsigned char>(data[place + byte]));
    }
    return static_cast<double>(std::bit_cast<Value>(bits));
}

std::optional<double> energy_factor(const std::optional<std::string>& unit) {
    if (!unit || unit->empty()) {
        return std::nullopt;
    }
    try {
        return unit_factor(*unit, dimension::energy);
    } catch (const Error&) {
        return std::nullopt;
    }
}

/// A column of energies in erg; empty where there is none of that name, in reals and with a unit.
std::vector<double>
energy_column(FitsReader& reader, const HduInfo& hdu, const Table& table, const std::string& name) {
    const auto fields = static_cast<int>(reader.number(hdu, "TFIELDS").value_or(0));
    std::size_t offset = 0;
    for (int field = 1; field <= fields; ++field) {
        const Form form = form_of(reader.text(hdu, fmt::format("TFORM{}", field)).value_or(""));
        if (form.bytes > table.row_bytes - offset) {
            return {};
        }
        if (reader.text(hdu, fmt::format("TTYPE{}", field)) != name) {
            offset += form.bytes;
            continue;
        }
        const auto factor = energy_factor(reader.text(hdu, fmt::format("TUNIT{}", field)));
        const bool real = form.letter == 'D' || form.letter == 'E';
        if (!factor || !real || form.count != 1) {
            return {};
        }
        std::vector<double> values;
        for (std::size_t row = 0; row < table.rows; ++row) {
            const std::size_t place = row * table.row_bytes + offset;
            values.push_back(*factor * (form.letter == 'D'
                                            ? number_at<std::uint64_t, double>(table.data, place)
                                            : number_at<std::uint32_t, float>(table.data, place)));
        }
        return values;
    }
    return {};
}

std::vector<Channel> energies_of_table(FitsReader& reader, const HduInfo& image) {
    const auto& hdus = reader.hdus();
    auto hdu = hdus.end();
    for (const std::string& name :
         {reader.text(image, "BANDSHDU").value_or(""), std::string("EBOUNDS"), std::string("ENERGIES")}) {
        if (hdu == hdus.end() && !name.empty()) {
            hdu =
                std::find_if(hdus.begin(), hdus.end(), [&](const HduInfo& one) { return one.name == name; });
        }
    }
    if (hdu == hdus.end() || hdu->is_image || image.compressed) {
        return {};
    }
    const auto table = table_data(reader, *hdu);
    if (!table) {
        return {};
    }
    std::vector<double> from = energy_column(reader, *hdu, *table, "E_MIN");
    std::vector<double> to = energy_column(reader, *hdu, *table, "E_MAX");
    if (from.empty() || to.empty()) {
        from = to = energy_column(reader, *hdu, *table, "ENERGY");
    }
    std::vector<Channel> channels;
    for (std::size_t k = 0; k < from.size(); ++k) {
        channels.push_back({Band::gamma, from[k], to[k]});
    }
    return channels;
}

std::vector<Channel>
energies_of_axis(FitsReader& reader, const HduInfo& image, std::size_t axis, const std::string& type) {
    const auto key = [&](const char* keyword) {
        return reader.number(image, fmt::format("{}{}", keyword, axis + 1));
    };
    const auto factor = energy_factor(reader.text(image, fmt::format("CUNIT{}", axis + 1)));
    const auto matrix = reader.number(image, fmt::format("CD{0}_{0}", axis + 1));
    const double pc = reader.number(image, fmt::format("PC{0}_{0}", axis + 1)).value_or(1);
    const double step = matrix ? *matrix : pc * key("CDELT").value_or(1);
    const auto reference = key("CRVAL");
    if (!factor || !reference || type == "ENERBAND") {
        return {};
    }
    std::vector<Channel> channels;
    for (std::size_t plane = 0; plane < image.shape[axis]; ++plane) {
        const double away = step * (static_cast<double>(plane + 1) - key("CRPIX").value_or(1));
        const double value =
            type == "ENER-LOG" ? *reference * std::exp(away / *reference) : *reference + away;
        channels.push_back({Band::gamma, *factor * value, *factor * value});
    }
    return channels;
}

/// As many as there are planes, positive, bands not turned round.
bool make_sense(const std::vector<Channel>& channels, std::size_t planes) {
    return channels.size() == planes && std::all_of(channels.begin(), channels.end(), [](const Channel& c) {
               return c.from > 0 && c.to >= c.from && std::isfinite(c.to);
           });
}

} // namespace

std::vector<Channel> channel_energies(const std::string& path) {
    FitsReader reader(path);
    const auto image = std::find_if(reader.hdus().begin(), reader.hdus().end(), [](const HduInfo& hdu) {
        return hdu.is_image && hdu.shape.size() >= 2 && hdu.values() > 0;
    });
    if (image == reader.hdus().end()) {
        return {};
    }
    for (std::size_t axis = 0; axis < image->shape.size(); ++axis) {
        std::string type = reader.text(*image, fmt::format("CTYPE{}", axis + 1)).value_or("");
        std::transform(type.begin(), type.end(), type.begin(),
                       [](unsigned char c) { return static_cast<char>(std::toupper(c)); });
        if (!type.starts_with("ENER")) {
            continue;
        }
        const std::size_t planes = image->shape[axis];
        const auto of_table = energies_of_table(reader, *image);
        if (make_sense(of_table, planes)) {
            return of_table;
        }
        const auto of_axis = energies_of_axis(reader, *image, axis, type);
        return make_sense(of_axis, planes) ? of_axis : std::vector<Channel>{};
    }
    return {};
}

} // namespace aureole::app
