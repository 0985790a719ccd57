#include "aureole/files/fits_writer.hpp"

#include "aureole/base/error.hpp"
#include "aureole/version.hpp"

#include <fitsio.h>
#include <fmt/format.h>

#include <algorithm>
#include <charconv>
#include <cmath>
#include <cstdlib>
#include <cstring>
#include <ctime>
#include <utility>

namespace aureole::files {

struct FitsWriter::Handle {
    fitsfile* file = nullptr;
    std::string name;
    int hdus = 0;

    ~Handle() {
        if (file != nullptr) {
            int status = 0;
            fits_close_file(file, &status);
            fits_clear_errmsg();
        }
    }
    void check(int status) const {
        if (status == 0) {
            return;
        }
        char text[FLEN_STATUS];
        fits_get_errstatus(status, text);
        std::string all = text;
        char line[FLEN_ERRMSG];
        while (fits_read_errmsg(line) != 0) {
            all += std::string("; ") + line;
        }
        fits_clear_errmsg();
        throw Error(ErrorKind::output,
                    fmt::format("{}: cannot be written: {} (status {})", name, all, status));
    }
};

std::string date_text() {
    std::time_t now = std::time(nullptr);
    if (const char* epoch = std::getenv("SOURCE_DATE_EPOCH")) {
        long long seconds = 0;
        const auto [end, failure] = std::from_chars(epoch, epoch + std::strlen(epoch), seconds);
        if (failure == std::errc() && *end == '\0') {
            now = static_cast<std::time_t>(seconds);
        }
    }
    std::tm utc{};
    gmtime_r(&now, &utc);
    char text[32];
    std::strftime(text, sizeof text, "%Y-%m-%dT%H:%M:%S", &utc);
    return text;
}

namespace {

/// FITS headers and tables hold printable ASCII only: everything else becomes '?', a UTF-8 character one of
/// them.
std::string ascii(const std::string& text) {
    std::string plain;
    for (const char c : text) {
        const auto byte = static_cast<unsigned char>(c);
        if (byte >= 0x20 && byte < 0x7f) {
            plain += c;
        } else if ((byte >> 6) != 2) {
            plain += byte < 0x20 ? ' ' : '?';
        }
    }
    return plain;
}

void check_keyword(const std::string& keyword) {
    const bool known = std::all_of(keyword.begin(), keyword.end(), [](char c) {
        return (c >= 'A' && c <= 'Z') || (c >= '0' && c <= '9') || c == '-' || c == '_';
    });
    if (keyword.empty() || keyword.size() > 8 || !known) {
        throw Error(ErrorKind::runtime,
                    fmt::format("FITS keyword: found \"{}\", expected 1 to 8 of A-Z, 0-9, - and _", keyword));
    }
}

void write_card(fitsfile* file, const Card& card, int* status) {
    check_keyword(card.keyword);
    const char* key = card.keyword.c_str();
    const std::string plain_comment = ascii(card.comment);
    const char* comment = plain_comment.empty() ? nullptr : plain_comment.c_str();
    if (const auto* given = std::get_if<std::string>(&card.value)) {
        const std::string plain = ascii(*given);
        const std::string* text = &plain;
        if (text->size() + static_cast<std::size_t>(std::count(text->begin(), text->end(), '\'')) > 68) {
            fits_update_key_str(file, "LONGSTRN", "OGIP 1.0", "some texts go on in CONTINUE cards", status);
            fits_update_key_longstr(file, key, text->c_str(), comment, status);
        } else {
            fits_update_key_str(file, key, text->c_str(), comment, status);
        }
    } else if (const auto* real = std::get_if<double>(&card.value)) {
        if (std::isfinite(*real)) {
            // The fewest digits that read back to the same number.
            int digits = 17;
            for (int d = 1; d < 17; ++d) {
                const std::string shorter = fmt::format("{:.{}e}", *real, d - 1);
                double back = 0;
                std::from_chars(shorter.data(), shorter.data() + shorter.size(), back);
                if (back == *real) {
                    digits = d;
                    break;
                }
            }
            // All digits in front of the point: 180. and not 1.8E+02.
            if (std::abs(*real) < 1e15) {
                digits = std::max(digits,
                                  static_cast<int>(std::to_string(std::llabs(std::llround(*real))).size()));
            }
            fits_update_key_dbl(file, key, *real, -std::max(digits, 2), comment, status);
        }
    } else if (const auto* whole = std::get_if<long>(&card.value)) {
        fits_update_key_lng(file, key, *whole, comment, status);
    } else {
        fits_update_key_log(file, key, std::get<bool>(card.value) ? 1 : 0, comment, status);
    }
}

/// CHECKSUM and DATASUM without the time stamps in their comments.
void write_checksums(fitsfile* file, int* status) {
    fits_write_chksum(file, status);
    fits_modify_comment(file, "DATASUM", "data unit checksum", status);
    fits_modify_comment(file, "CHECKSUM", "HDU checksum", status);
    char zero[] = "0000000000000000";
    fits_update_key_str(file, "CHECKSUM", zero, "HDU checksum", status);
    fits_flush_file(file, status);
    unsigned long data_sum = 0;
    unsigned long hdu_sum = 0;
    fits_get_chksum(file, &data_sum, &hdu_sum, status);
    char encoded[FLEN_VALUE];
    fits_encode_chksum(hdu_sum, 1, encoded);
    fits_update_key_str(file, "CHECKSUM", encoded, "HDU checksum", status);
}

} // namespace

FitsWriter::FitsWriter(const std::filesystem::path& target, bool replace)
    : pending_(target, replace), handle_(std::make_unique<Handle>()) {
    handle_->name = target.string();
    std::error_code ignored;
    std::filesystem::remove(pending_.path(), ignored); // CFITSIO wants to make the file itself
    int status = 0;
    fits_create_diskfile(&handle_->file, pending_.path().c_str(), &status);
    handle_->check(status);
}

FitsWriter::~FitsWriter() = default;

void FitsWriter::write_image(const std::string& name,
                             int bitpix,
                             const std::vector<std::size_t>& shape,
                             int type,
                             const void* values,
                             std::size_t count,
                             const Header& header) {
    std::size_t expected = shape.empty() ? 0 : 1;
    for (const std::size_t axis : shape) {
        expected *= axis;
    }
    if (count != expected) {
        throw Error(ErrorKind::runtime, fmt::format("image {}: found {} values, expected {} by its shape",
                                                    name, count, expected));
    }
    int status = 0;
    std::vector<LONGLONG> axes(shape.begin(), shape.end());
    fits_create_imgll(handle_->file, shape.empty() ? 8 : bitpix, static_cast<int>(axes.size()), axes.data(),
                      &status);
    handle_->check(status);
    ++handle_->hdus;
    finish_hdu(name, header);
    if (count > 0) {
        fits_write_img(handle_->file, type, 1, static_cast<LONGLONG>(count), const_cast<void*>(values),
                       &status);
    }
    write_checksums(handle_->file, &status);
    handle_->check(status);
}

void FitsWriter::finish_hdu(const std::string& name, const Header& header) {
    int status = 0;
    if (handle_->hdus == 1) {
        // CFITSIO adds two lines of comment about the FITS format.
        while (fits_delete_key(handle_->file, "COMMENT", &status) == 0) {
        }
        status = 0;
        fits_clear_errmsg();
        write_card(handle_->file, {"ORIGIN", std::string("aureole"), "program that wrote this file"},
                   &status);
        write_card(handle_->file, {"CREATOR", std::string("aureole ") + version, ""}, &status);
    }
    if (!name.empty()) {
        write_card(handle_->file, {"EXTNAME", name, ""}, &status);
    }
    write_card(handle_->file, {"DATE", date_text(), "UTC"}, &status);
    for (const Card& card : header.cards) {
        write_card(handle_->file, card, &status);
    }
    for (const std::string& line : header.history) {
        fits_write_history(handle_->file, ascii(line).c_str(), &status);
    }
    handle_->check(status);
}

void FitsWriter::image(const std::string& name,
                       const std::vector<std::size_t>& shape,
                       const std::vector<float>& values,
                       const Header& header) {
    write_image(name, FLOAT_IMG, shape, TFLOAT, values.data(), values.size(), header);
}

void FitsWriter::image(const std::string& name,
                       const std::vector<std::size_t>& shape,
                       const std::vector<double>& values,
                       const Header& header) {
    write_image(name, DOUBLE_IMG, shape, TDOUBLE, values.data(), values.size(), header);
}

void FitsWriter::table(const std::string& name,
                       const std::vector<TableColumn>& columns,
                       const Header& header) {
    std::vector<std::string> formats;
    std::vector<std::vector<std::string>> plain(columns.size());
    std::size_t rows = 0;
    for (std::size_t c = 0; c < columns.size(); ++c) {
        const TableColumn& column = columns[c];
        const std::size_t length =
            std::visit([](const auto& values) { return values.size(); }, column.values);
        if (c > 0 && length != rows) {
            throw Error(ErrorKind::runtime, fmt::format("table {}: column {}: found {} rows, expected {}",
                                                        name, column.name, length, rows));
        }
        rows = length;
        if (const auto* texts = std::get_if<std::vector<std::string>>(&column.values)) {
            std::size_t longest = 1;
            for (const std::string& text : *texts) {
                plain[c].push_back(ascii(text));
                longest = std::max(longest, plain[c].back().size());
            }
            formats.push_back(fmt::format("{}A", longest));
        } else {
            formats.emplace_back(std::holds_alternative<std::vector<double>>(column.values) ? "1D" : "1K");
        }
    }
    std::vector<char*> names;
    std::vector<char*> format_pointers;
    std::vector<char*> units;
    for (std::size_t c = 0; c < columns.size(); ++c) {
        names.push_back(const_cast<char*>(columns[c].name.c_str()));
        format_pointers.push_back(formats[c].data());
        units.push_back(const_cast<char*>(columns[c].unit.c_str()));
    }
    int status = 0;
    fits_create_tbl(handle_->file, BINARY_TBL, 0, static_cast<int>(columns.size()), names.data(),
                    format_pointers.data(), units.data(), nullptr, &status);
    handle_->check(status);
    ++handle_->hdus;
    finish_hdu(name, header);
    for (std::size_t c = 0; c < columns.size(); ++c) {
        const int number = static_cast<int>(c) + 1;
        const auto n = static_cast<LONGLONG>(rows);
        if (std::holds_alternative<std::vector<std::string>>(columns[c].values)) {
            std::vector<char*> pointers;
            for (const std::string& text : plain[c]) {
                pointers.push_back(const_cast<char*>(text.c_str()));
            }
            fits_write_col(handle_->file, TSTRING, number, 1, 1, n, pointers.data(), &status);
        } else if (const auto* reals = std::get_if<std::vector<double>>(&columns[c].values)) {
            fits_write_col(handle_->file, TDOUBLE, number, 1, 1, n, const_cast<double*>(reals->data()),
                           &status);
        } else {
            fits_write_col(handle_->file, TLONG, number, 1, 1, n,
                           const_cast<long*>(std::get<std::vector<long>>(columns[c].values).data()), &status);
        }
    }
    write_checksums(handle_->file, &status);
    handle_->check(status);
}

void FitsWriter::commit() {
    int status = 0;
    fitsfile* file = std::exchange(handle_->file, nullptr);
    fits_close_file(file, &status);
    handle_->check(status);
    pending_.commit();
}

} // namespace aureole::files
