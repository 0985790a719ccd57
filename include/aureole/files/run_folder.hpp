#pragma once

#include <cstddef>
#include <filesystem>
#include <string>
#include <string_view>
#include <vector>

namespace aureole::files {

/// The folder of one run's results. A manifest (manifest.json), written last, lists the files; what is not in
/// it is not ours and is never touched.
class RunFolder {
  public:
    /// Makes the folder and takes its lock. Throws Error(output) if it holds the results of another run and
    /// `force` is false, if another run is writing there, or if it cannot be written to. With `force`,
    /// begin_writing() removes the files of the old manifest.
    RunFolder(std::filesystem::path folder, bool force);
    ~RunFolder();
    RunFolder(const RunFolder&) = delete;
    RunFolder& operator=(const RunFolder&) = delete;

    /// Throws Error(output) if `input` lies at a place that would be written to.
    void protect(const std::filesystem::path& input) const;
    /// Removes the results of the earlier run. Call once everything is computed, so that a failing run leaves
    /// the old results.
    void begin_writing();
    /// Full path for a result, whose folder is made; it goes into the manifest.
    std::filesystem::path place(const std::string& relative);
    void write_text(const std::string& relative, std::string_view text);
    /// Writes the manifest: the run is complete.
    void finish(const std::string& command);

    const std::vector<std::string>& files() const { return files_; }
    const std::filesystem::path& path() const { return folder_; }

  private:
    std::filesystem::path folder_, lock_;
    std::vector<std::string> old_files_, files_;
    bool made_ = false;
};

} // namespace aureole::files
