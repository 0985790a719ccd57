#pragma once

#include "aureole/files/pending.hpp"

#include <cstddef>
#include <filesystem>
#include <memory>
#include <string>
#include <variant>
#include <vector>

namespace aureole::files {

/// One header card. Doubles are written so that they read back exactly; one that is not finite is left out.
/// Texts over 68 characters use CONTINUE.
struct Card {
    std::string keyword; ///< at most 8 characters of A-Z, 0-9, - and _
    std::variant<std::string, double, long, bool> value;
    std::string comment;
};

struct Header {
    std::vector<Card> cards;
    std::vector<std::string> history;
};

/// A column of a binary table: numbers or texts.
struct TableColumn {
    std::string name, unit;
    std::variant<std::vector<double>, std::vector<long>, std::vector<std::string>> values;
};

/// Writes a FITS file under a temporary name; commit() gives it its own. Every HDU gets CHECKSUM, DATASUM and
/// DATE, whose comments and value do not depend on the time of writing when SOURCE_DATE_EPOCH is set: equal
/// input then gives equal bytes. Errors are Error(output) naming the file.
class FitsWriter {
  public:
    FitsWriter(const std::filesystem::path& target, bool replace);
    ~FitsWriter();

    /// shape: first axis (fastest) first; empty: a header without data. The first image is the primary HDU
    /// and has no EXTNAME unless given.
    void image(const std::string& name,
               const std::vector<std::size_t>& shape,
               const std::vector<float>& values,
               const Header& header);
    void image(const std::string& name,
               const std::vector<std::size_t>& shape,
               const std::vector<double>& values,
               const Header& header);
    void table(const std::string& name, const std::vector<TableColumn>& columns, const Header& header);
    void commit();

  private:
    struct Handle;
    void write_image(const std::string& name,
                     int bitpix,
                     const std::vector<std::size_t>& shape,
                     int type,
                     const void* values,
                     std::size_t count,
                     const Header& header);
    void finish_hdu(const std::string& name, const Header& header);
    PendingFile pending_;
    std::unique_ptr<Handle> handle_;
};

/// UTC, ISO 8601, seconds; from SOURCE_DATE_EPOCH where that is set.
std::string date_text();

} // namespace aureole::files
