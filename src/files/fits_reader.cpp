#include "aureole/files/fits_reader.hpp"

#include "aureole/base/error.hpp"

#include <fitsio.h>
#include <fmt/format.h>

#include <algorithm>
#include <cmath>
#include <cstring>
#include <filesystem>
#include <limits>

namespace aureole::files {

struct FitsReader::Handle {
    fitsfile* file = nullptr;
    ~Handle() {
        if (file != nullptr) {
            int status = 0;
            fits_close_file(file, &status);
            fits_clear_errmsg();
        }
    }
};

namespace {

/// CFITSIO's message for a status, with its stack, which is emptied so that nothing stale turns up later.
std::string cfitsio_text(int status) {
    char text[FLEN_STATUS];
    fits_get_errstatus(status, text);
    std::string all = text;
    char line[FLEN_ERRMSG];
    while (fits_read_errmsg(line) != 0) {
        all += std::string("; ") + line;
    }
    fits_clear_errmsg();
    return all;
}

std::string place_of(const HduInfo& hdu) {
    return fmt::format("HDU {}", hdu.name);
}

} // namespace

std::size_t HduInfo::values() const {
    std::size_t n = shape.empty() ? 0 : 1;
    for (const std::size_t axis : shape) {
        n *= axis;
    }
    return n;
}

std::uint32_t fold_checksum(std::uint64_t word_sum) {
    while ((word_sum >> 32) != 0) {
        word_sum = (word_sum & 0xffffffffU) + (word_sum >> 32);
    }
    return static_cast<std::uint32_t>(word_sum);
}

void FitsReader::check(int status, const std::string& place) const {
    if (status != 0) {
        throw Error(ErrorKind::input,
                    fmt::format("{}: {}: {} (status {})", path_, place, cfitsio_text(status), status));
    }
}

FitsReader::FitsReader(const std::string& path) : path_(path), handle_(std::make_unique<Handle>()) {
    std::error_code failure;
    const auto kind = std::filesystem::status(path, failure);
    if (failure || !std::filesystem::exists(kind)) {
        throw Error(ErrorKind::input, fmt::format("{}: not found, expected a FITS file", path));
    }
    if (std::filesystem::is_directory(kind)) {
        throw Error(ErrorKind::input, fmt::format("{}: found a folder, expected a FITS file", path));
    }
    int status = 0;
    fits_open_diskfile(&handle_->file, path.c_str(), READONLY, &status);
    if (status != 0) {
        throw Error(ErrorKind::input, fmt::format("{}: cannot be read as FITS: {} (status {})", path,
                                                  cfitsio_text(status), status));
    }
    const auto file_bytes = static_cast<std::size_t>(std::filesystem::file_size(path));
    int count = 0;
    fits_get_num_hdus(handle_->file, &count, &status);
    if (status != 0) {
        throw Error(ErrorKind::input,
                    fmt::format("{}: HDU {} cannot be read, the file may be cut short: {} (status {})", path,
                                count + 1, cfitsio_text(status), status));
    }
    for (int n = 1; n <= count; ++n) {
        HduInfo hdu;
        hdu.number = n;
        int type = 0;
        fits_movabs_hdu(handle_->file, n, &type, &status);
        check(status, fmt::format("HDU {}", n));
        char name[FLEN_VALUE] = "";
        fits_read_key(handle_->file, TSTRING, "EXTNAME", name, nullptr, &status);
        if (status == KEY_NO_EXIST) {
            status = 0;
            fits_clear_errmsg();
            std::strcpy(name, n == 1 ? "PRIMARY" : "");
        }
        hdu.name = name[0] != '\0' ? name : fmt::format("number {}", n);
        hdu.is_image = type == IMAGE_HDU;
        hdu.compressed = fits_is_compressed_image(handle_->file, &status) != 0;
        if (hdu.is_image || hdu.compressed) {
            hdu.is_image = true;
            int axes = 0;
            fits_get_img_type(handle_->file, &hdu.bitpix, &status);
            fits_get_img_dim(handle_->file, &axes, &status);
            check(status, place_of(hdu));
            std::vector<LONGLONG> shape(static_cast<std::size_t>(axes));
            fits_get_img_sizell(handle_->file, axes, shape.data(), &status);
            check(status, place_of(hdu));
            hdu.shape.assign(shape.begin(), shape.end());
            double scale = 1;
            double zero = 0;
            if (fits_read_key(handle_->file, TDOUBLE, "BSCALE", &scale, nullptr, &status) != 0) {
                status = 0;
            }
            if (fits_read_key(handle_->file, TDOUBLE, "BZERO", &zero, nullptr, &status) != 0) {
                status = 0;
            }
            hdu.scaled = scale != 1 || zero != 0;
            // Quantised floats carry scale columns or keywords; integers and unquantised floats are kept
            // exactly.
            int column = 0;
            char quantised[FLEN_VALUE] = "";
            if (hdu.compressed && hdu.bitpix < 0) {
                fits_get_colnum(handle_->file, CASEINSEN, const_cast<char*>("ZSCALE"), &column, &status);
                hdu.lossy = status == 0;
                status = 0;
                if (fits_read_key(handle_->file, TSTRING, "ZQUANTIZ", quantised, nullptr, &status) == 0 &&
                    std::strcmp(quantised, "NONE") == 0) {
                    hdu.lossy = false;
                }
                status = 0;
            }
            fits_clear_errmsg();
        }
        LONGLONG header = 0;
        LONGLONG start = 0;
        LONGLONG end = 0;
        fits_get_hduaddrll(handle_->file, &header, &start, &end, &status);
        check(status, place_of(hdu));
        hdu.data_offset = static_cast<std::size_t>(start);
        hdu.data_bytes =
            hdu.compressed ? 0 : hdu.values() * static_cast<std::size_t>(std::abs(hdu.bitpix) / 8);
        if (static_cast<std::size_t>(end) > file_bytes) {
            throw Error(
                ErrorKind::input,
                fmt::format("{}: {}: cut short: found {} bytes in the file, expected {} by its header", path,
                            place_of(hdu), file_bytes, end));
        }
        hdus_.push_back(std::move(hdu));
    }
}

FitsReader::~FitsReader() = default;
FitsReader::FitsReader(FitsReader&&) noexcept = default;
FitsReader& FitsReader::operator=(FitsReader&&) noexcept = default;

const HduInfo* FitsReader::find(const std::string& name) const {
    const HduInfo* found = nullptr;
    for (const HduInfo& hdu : hdus_) {
        if (hdu.name == name) {
            if (found != nullptr) {
                throw Error(ErrorKind::input,
                            fmt::format("{}: found HDU {} twice (numbers {} and {}), expected it once", path_,
                                        name, found->number, hdu.number));
            }
            found = &hdu;
        }
    }
    return found;
}

void FitsReader::move_to(const HduInfo& hdu) {
    int status = 0;
    fits_movabs_hdu(handle_->file, hdu.number, nullptr, &status);
    check(status, place_of(hdu));
}

std::optional<std::string> FitsReader::text(const HduInfo& hdu, const std::string& keyword) {
    move_to(hdu);
    int status = 0;
    char* value = nullptr;
    fits_read_key_longstr(handle_->file, keyword.c_str(), &value, nullptr, &status);
    std::optional<std::string> result;
    if (status == 0) {
        result = value;
        result->erase(result->find_last_not_of(' ') + 1);
    }
    if (value != nullptr) {
        int ignored = 0;
        fits_free_memory(value, &ignored);
    }
    if (status == KEY_NO_EXIST || status == VALUE_UNDEFINED) {
        fits_clear_errmsg();
        return std::nullopt;
    }
    check(status, fmt::format("{}: {}", place_of(hdu), keyword));
    return result;
}

std::optional<double> FitsReader::number(const HduInfo& hdu, const std::string& keyword) {
    move_to(hdu);
    int status = 0;
    double value = 0;
    fits_read_key(handle_->file, TDOUBLE, keyword.c_str(), &value, nullptr, &status);
    if (status == KEY_NO_EXIST || status == VALUE_UNDEFINED) {
        fits_clear_errmsg();
        return std::nullopt;
    }
    if (status != 0 || !std::isfinite(value)) {
        fits_clear_errmsg();
        const auto found = text(hdu, keyword);
        throw Error(ErrorKind::input, fmt::format("{}: {}: {}: found \"{}\", expected a finite number", path_,
                                                  place_of(hdu), keyword, found.value_or("")));
    }
    return value;
}

std::optional<bool> FitsReader::flag(const HduInfo& hdu, const std::string& keyword) {
    move_to(hdu);
    int status = 0;
    int value = 0;
    fits_read_key(handle_->file, TLOGICAL, keyword.c_str(), &value, nullptr, &status);
    if (status == KEY_NO_EXIST || status == VALUE_UNDEFINED) {
        fits_clear_errmsg();
        return std::nullopt;
    }
    if (status != 0) {
        fits_clear_errmsg();
        throw Error(ErrorKind::input, fmt::format("{}: {}: {}: found \"{}\", expected T or F", path_,
                                                  place_of(hdu), keyword, text(hdu, keyword).value_or("")));
    }
    return value != 0;
}

std::vector<std::string> FitsReader::cards(const HduInfo& hdu) {
    move_to(hdu);
    int status = 0;
    int count = 0;
    fits_get_hdrspace(handle_->file, &count, nullptr, &status);
    std::vector<std::string> result;
    for (int n = 1; n <= count && status == 0; ++n) {
        char card[FLEN_CARD];
        fits_read_record(handle_->file, n, card, &status);
        result.emplace_back(card);
    }
    check(status, place_of(hdu));
    return result;
}

namespace {

template <class T> int fits_type();
template <> int fits_type<float>() {
    return TFLOAT;
}
template <> int fits_type<double>() {
    return TDOUBLE;
}

template <class T> int read_values(fitsfile* file, std::size_t first, std::size_t count, T* values) {
    int status = 0;
    T blank = std::numeric_limits<T>::quiet_NaN();
    fits_read_img(file, fits_type<T>(), static_cast<LONGLONG>(first) + 1, static_cast<LONGLONG>(count),
                  &blank, values, nullptr, &status);
    return status;
}

} // namespace

void FitsReader::read(const HduInfo& hdu, std::size_t first, std::size_t count, float* values) {
    move_to(hdu);
    check(read_values(handle_->file, first, count, values), place_of(hdu));
}

void FitsReader::read(const HduInfo& hdu, std::size_t first, std::size_t count, double* values) {
    move_to(hdu);
    check(read_values(handle_->file, first, count, values), place_of(hdu));
}

std::vector<double> FitsReader::read_all(const HduInfo& hdu) {
    std::vector<double> values(hdu.values());
    if (!values.empty()) {
        read(hdu, 0, values.size(), values.data());
    }
    return values;
}

std::optional<std::uint32_t> FitsReader::datasum(const HduInfo& hdu) {
    const auto found = text(hdu, "DATASUM");
    if (!found) {
        return std::nullopt;
    }
    return static_cast<std::uint32_t>(std::strtoul(found->c_str(), nullptr, 10));
}

std::optional<bool> FitsReader::verify_checksum(const HduInfo& hdu) {
    move_to(hdu);
    int status = 0;
    int data = 0;
    int whole = 0;
    fits_verify_chksum(handle_->file, &data, &whole, &status);
    check(status, place_of(hdu));
    if (data == 0 && whole == 0) {
        return std::nullopt;
    }
    return data >= 0 && whole >= 0;
}

} // namespace aureole::files
