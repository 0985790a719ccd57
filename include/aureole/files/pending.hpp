#pragma once

#include <filesystem>
#include <string>
#include <string_view>

namespace aureole::files {

/// A file under a temporary name beside its target, `name.tmpPID`. commit() moves it to the target; without
/// it the temporary file is removed. Readers never see half a file.
class PendingFile {
  public:
    /// Throws Error(output) if the target exists and `replace` is false, or the folder cannot be written to.
    PendingFile(std::filesystem::path target, bool replace);
    ~PendingFile();
    PendingFile(PendingFile&& other) noexcept;
    PendingFile& operator=(PendingFile&&) = delete;

    const std::filesystem::path& path() const { return temporary_; } ///< write here
    const std::filesystem::path& target() const { return target_; }
    /// Flushes the file to the disc and renames it. Throws Error(output).
    void commit();

  private:
    std::filesystem::path target_, temporary_;
};

/// Writes a text file whole, or not at all.
void write_text(const std::filesystem::path& target, std::string_view text, bool replace);

} // namespace aureole::files
