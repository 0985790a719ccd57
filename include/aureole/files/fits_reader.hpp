#pragma once

#include <cstddef>
#include <cstdint>
#include <memory>
#include <optional>
#include <string>
#include <vector>

namespace aureole::files {

/// What the header of an HDU says about its data.
struct HduInfo {
    std::string name; ///< EXTNAME; "PRIMARY" for an unnamed primary HDU
    int number = 1;   ///< counted from 1
    bool is_image = true;
    int bitpix = 0;                 ///< of the stored image, 0 where there are no data
    std::vector<std::size_t> shape; ///< NAXISn, first axis (fastest) first
    bool compressed = false;        ///< tile-compressed, or in a file packed as a whole: no place in the file
    bool lossy = false;             ///< compressed with quantisation
    bool scaled = false;            ///< BSCALE or BZERO other than 1 and 0
    std::size_t data_offset = 0, data_bytes = 0; ///< place in the file; without padding
    std::size_t values() const;
};

/// A FITS file open for reading. One object per thread; several objects on one file are fine. All errors are
/// Error(input) that name the file (and HDU), with CFITSIO's own message behind. File names are taken as they
/// are, brackets and all.
class FitsReader {
  public:
    explicit FitsReader(const std::string& path);
    ~FitsReader();
    FitsReader(FitsReader&&) noexcept;
    FitsReader& operator=(FitsReader&&) noexcept;

    const std::string& path() const { return path_; }
    const std::vector<HduInfo>& hdus() const { return hdus_; }
    /// The only HDU of that name; nothing if there is none; Error(input) if there are several.
    const HduInfo* find(const std::string& name) const;

    // Keywords of an HDU; nothing where absent. Error(input) where the value has another type.
    std::optional<std::string> text(const HduInfo& hdu, const std::string& keyword);
    std::optional<double> number(const HduInfo& hdu, const std::string& keyword);
    std::optional<bool> flag(const HduInfo& hdu, const std::string& keyword);
    /// All cards of the header.
    std::vector<std::string> cards(const HduInfo& hdu);

    /// `count` values from `first` (counted from 0) as stored after BSCALE and BZERO; blanks are NaN.
    void read(const HduInfo& hdu, std::size_t first, std::size_t count, float* values);
    void read(const HduInfo& hdu, std::size_t first, std::size_t count, double* values);
    std::vector<double> read_all(const HduInfo& hdu);

    /// DATASUM as the header gives it. Nothing where it has none.
    std::optional<std::uint32_t> datasum(const HduInfo& hdu);
    /// Reads the HDU and compares CHECKSUM and DATASUM: true, false, or nothing where it has none.
    std::optional<bool> verify_checksum(const HduInfo& hdu);

  private:
    struct Handle;
    HduInfo describe_current(int number, bool packed) const;
    void move_to(const HduInfo& hdu);
    void check(int status, const std::string& place) const;
    std::string path_;
    std::vector<HduInfo> hdus_;
    std::unique_ptr<Handle> handle_;
};

/// The 32-bit ones' complement sum of FITS from the plain 64-bit sum of its words (Seaman & Pence 1995, the
/// FITS checksum proposal; FITS Standard 4.0, appendix J).
std::uint32_t fold_checksum(std::uint64_t word_sum);

} // namespace aureole::files
