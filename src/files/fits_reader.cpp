#include "aureole/files/fits_reader.hpp"

#include "aureole/base/error.hpp"

#include <fitsio.h>
#include <fmt/format.h>
#include <fmt/ranges.h>

#include <algorithm>
#include <cerrno>
#include <cmath>
#include <cstdlib>
#include <cstring>
#include <filesystem>
#include <fstream>
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

namespace {

void check_place(const std::string& path) {
    std::error_code failure;
    const auto kind = std::filesystem::status(path, failure);
    if (!std::filesystem::exists(kind)) {
        throw Error(ErrorKind::input, fmt::format("{}: not found, expected a FITS file{}", path,
                                                  failure.value() != 0 && failure.value() != ENOENT
                                                      ? " (" + failure.message() + ")"
                                                      : ""));
    }
    if (std::filesystem::is_directory(kind)) {
        throw Error(ErrorKind::input, fmt::format("{}: found a folder, expected a FITS file", path));
    }
    if (!std::filesystem::is_regular_file(kind)) {
        throw Error(ErrorKind::input, fmt::format("{}: found a device or pipe, expected a FITS file", path));
    }
}

/// The first bytes of what follows in a file; fewer at its end.
std::string bytes_at(const std::string& path, std::size_t offset, std::size_t count) {
    std::ifstream stream(path, std::ios::binary);
    stream.seekg(static_cast<std::streamoff>(offset));
    std::string bytes(count, '\0');
    stream.read(bytes.data(), static_cast<std::streamsize>(count));
    bytes.resize(static_cast<std::size_t>(std::max<std::streamsize>(stream.gcount(), 0)));
    return bytes;
}

/// Packed as a whole (gzip, compress, PKZIP): CFITSIO unpacks such a file into memory.
bool is_packed(const std::string& path) {
    const std::string start = bytes_at(path, 0, 2);
    return start == "\x1f\x8b" || start == "\x1f\x9d" || start == "PK";
}

/// A keyword that may be missing.
template <class T> T keyword_or(fitsfile* file, int type, const char* keyword, T otherwise, int* status) {
    T value = otherwise;
    fits_read_key(file, type, keyword, &value, nullptr, status);
    if (*status == KEY_NO_EXIST || *status == VALUE_UNDEFINED) {
        *status = 0;
        fits_clear_errmsg();
        return otherwise;
    }
    return value;
}

std::string text_or(fitsfile* file, const char* keyword, const char* otherwise, int* status) {
    char value[FLEN_VALUE] = "";
    fits_read_key(file, TSTRING, keyword, value, nullptr, status);
    if (*status == KEY_NO_EXIST || *status == VALUE_UNDEFINED) {
        *status = 0;
        fits_clear_errmsg();
        return otherwise;
    }
    return value;
}

/// Quantised floats carry scale columns or keywords, and HCOMPRESS may round; other tile compression is
/// exact.
bool is_lossy(fitsfile* file, int bitpix, int* status) {
    if (bitpix < 0) {
        if (text_or(file, "ZQUANTIZ", "", status) == "NONE") {
            return false;
        }
        int column = 0;
        char name[] = "ZSCALE";
        fits_get_colnum(file, CASEINSEN, name, &column, status);
        const bool found = *status == 0;
        *status = 0;
        fits_clear_errmsg();
        return found || keyword_or(file, TDOUBLE, "ZSCALE", 0.0, status) != 0;
    }
    if (!text_or(file, "ZCMPTYPE", "", status).starts_with("HCOMPRESS")) {
        return false;
    }
    for (int n = 1; n <= 9; ++n) {
        const std::string number = std::to_string(n);
        if (text_or(file, ("ZNAME" + number).c_str(), "", status) == "SCALE") {
            return keyword_or(file, TDOUBLE, ("ZVAL" + number).c_str(), 0.0, status) > 1;
        }
    }
    return false;
}

std::vector<std::size_t> image_shape(fitsfile* file, int* status) {
    int axes = 0;
    fits_get_img_dim(file, &axes, status);
    if (*status != 0) {
        return {};
    }
    std::vector<LONGLONG> shape(static_cast<std::size_t>(axes));
    fits_get_img_sizell(file, axes, shape.data(), status);
    return {shape.begin(), shape.end()};
}

/// Bytes of an image; nothing if they are more than 2^62.
std::optional<std::size_t> image_bytes(const HduInfo& hdu) {
    std::size_t bytes = hdu.shape.empty() ? 0 : static_cast<std::size_t>(std::abs(hdu.bitpix) / 8);
    for (const std::size_t axis : hdu.shape) {
        if (axis != 0 && bytes > (std::size_t{1} << 62) / axis) {
            return std::nullopt;
        }
        bytes *= axis;
    }
    return bytes;
}

} // namespace

FitsReader::FitsReader(const std::string& path) : path_(path), handle_(std::make_unique<Handle>()) {
    check_place(path);
    int status = 0;
    fits_open_diskfile(&handle_->file, path.c_str(), READONLY, &status);
    if (status != 0) {
        throw Error(ErrorKind::input, fmt::format("{}: cannot be read as FITS: {} (status {})", path,
                                                  cfitsio_text(status), status));
    }
    const bool packed = is_packed(path);
    const auto file_bytes = static_cast<std::size_t>(std::filesystem::file_size(path));
    std::size_t end = 0;
    for (int n = 1;; ++n) {
        fits_movabs_hdu(handle_->file, n, nullptr, &status);
        if (status != 0 && n > 1 && !packed && !bytes_at(path, end, 8).starts_with("XTENSION")) {
            break; // the end, or records that are no HDU
        }
        if (packed && status == END_OF_FILE) {
            break;
        }
        if (status != 0) {
            throw Error(
                ErrorKind::input,
                fmt::format("{}: HDU number {}: header cut short or damaged, found {} bytes from its start "
                            "at byte {}: {} (status {})",
                            path, n, file_bytes > end ? file_bytes - end : 0, end, cfitsio_text(status),
                            status));
        }
        hdus_.push_back(describe_current(n, packed));
        LONGLONG header = 0;
        LONGLONG start = 0;
        LONGLONG stop = 0;
        fits_get_hduaddrll(handle_->file, &header, &start, &stop, &status);
        check(status, place_of(hdus_.back()));
        end = static_cast<std::size_t>(stop);
        if (!packed && end > file_bytes) {
            throw Error(
                ErrorKind::input,
                fmt::format("{}: {}: cut short: found {} bytes in the file, expected {} by its header", path,
                            place_of(hdus_.back()), file_bytes, end));
        }
    }
    fits_clear_errmsg();
}

HduInfo FitsReader::describe_current(int number, bool packed) const {
    fitsfile* file = handle_->file;
    int status = 0;
    HduInfo hdu;
    hdu.number = number;
    hdu.name = text_or(file, "EXTNAME", number == 1 ? "PRIMARY" : "", &status);
    if (hdu.name.empty()) {
        hdu.name = fmt::format("number {}", number);
    }
    check(status, fmt::format("HDU number {}: EXTNAME", number));
    int type = 0;
    fits_get_hdu_type(file, &type, &status);
    const bool tiled = fits_is_compressed_image(file, &status) != 0;
    check(status, place_of(hdu));
    hdu.is_image = type == IMAGE_HDU || tiled;
    hdu.compressed = tiled || packed;
    if (!hdu.is_image) {
        return hdu;
    }
    fits_get_img_type(file, &hdu.bitpix, &status);
    hdu.shape = image_shape(file, &status);
    check(status, place_of(hdu));
    const auto bytes = image_bytes(hdu);
    if (!bytes) {
        throw Error(ErrorKind::input, fmt::format("{}: {}: NAXISn: found {}, expected sizes a file can have",
                                                  path_, place_of(hdu), fmt::join(hdu.shape, " x ")));
    }
    const double scale = keyword_or(file, TDOUBLE, "BSCALE", 1.0, &status);
    check(status, place_of(hdu) + ": BSCALE");
    const double zero = keyword_or(file, TDOUBLE, "BZERO", 0.0, &status);
    check(status, place_of(hdu) + ": BZERO");
    if (!std::isfinite(scale) || !std::isfinite(zero) || scale == 0) {
        throw Error(ErrorKind::input,
                    fmt::format("{}: {}: found BSCALE {} and BZERO {}, expected finite numbers, BSCALE not 0",
                                path_, place_of(hdu), scale, zero));
    }
    hdu.scaled = scale != 1 || zero != 0;
    if (tiled) {
        hdu.lossy = is_lossy(file, hdu.bitpix, &status);
        check(status, place_of(hdu));
    }
    if (!hdu.compressed) {
        LONGLONG start = 0;
        fits_get_hduaddrll(file, nullptr, &start, nullptr, &status);
        check(status, place_of(hdu));
        hdu.data_offset = static_cast<std::size_t>(start);
        hdu.data_bytes = *bytes;
    }
    return hdu;
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

template <class T>
int read_values(fitsfile* file, const HduInfo& hdu, std::size_t first, std::size_t count, T* values) {
    int status = 0;
    T blank = std::numeric_limits<T>::quiet_NaN();
    // Floats carry their own NaN; asked for blanks, CFITSIO would turn infinities into them too.
    const bool has_blanks = hdu.bitpix > 0 || hdu.lossy;
    int any_blank = 0; // CFITSIO writes to it without asking
    fits_read_img(file, fits_type<T>(), static_cast<LONGLONG>(first) + 1, static_cast<LONGLONG>(count),
                  has_blanks ? &blank : nullptr, values, &any_blank, &status);
    return status;
}

} // namespace

void FitsReader::read(const HduInfo& hdu, std::size_t first, std::size_t count, float* values) {
    move_to(hdu);
    check(read_values(handle_->file, hdu, first, count, values), place_of(hdu));
}

void FitsReader::read(const HduInfo& hdu, std::size_t first, std::size_t count, double* values) {
    move_to(hdu);
    check(read_values(handle_->file, hdu, first, count, values), place_of(hdu));
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
