#pragma once

#include "aureole/base/run_context.hpp"

#include <cstddef>
#include <filesystem>
#include <string>
#include <string_view>
#include <vector>

namespace aureole::files {

/// The folder of one run's results. A manifest (manifest.json), written last, lists the files; what is not in
/// it is not ours and is never touched. A lock file names the process that writes there and what it has begun
/// to write, so that the rests of a killed run are known too.
class RunFolder {
  public:
    /// Makes the folder and takes its lock; the lock of a process that no longer lives is taken over.
    /// Throws Error(output) if the folder holds the results of another run and `force` is false, if it holds
    /// a manifest of another program, if another run is writing there, or if it cannot be written to.
    RunFolder(std::filesystem::path folder, bool force);
    /// Without finish() the results of this run that were not there before it are removed, and the folder if
    /// it was made and is empty.
    ~RunFolder();
    RunFolder(const RunFolder&) = delete;
    RunFolder& operator=(const RunFolder&) = delete;

    /// Names a file that this run reads. Throws Error(output) if it is a result of the earlier run, which
    /// would be removed; place() throws if it would be overwritten.
    void protect(const std::filesystem::path& input);
    /// Removes the results of the earlier run and the rests of a killed one. Call once everything is
    /// computed, so that a failing run leaves the old results.
    void begin_writing();
    /// Full path for a result, whose folder is made; it goes into the manifest. Throws Error(output) if it is
    /// protected, or exists and `force` is false.
    std::filesystem::path place(const std::string& relative);
    void write_text(const std::string& relative, std::string_view text);
    /// Whether files may be replaced that no manifest names: `force`.
    bool replaces() const { return force_; }
    /// Writes the manifest (path, size and FNV-1a of every file): the run is complete.
    void finish(const std::string& command, const RunContext& context = {});

    const std::vector<std::string>& files() const { return files_; }
    const std::filesystem::path& path() const { return folder_; }

  private:
    void refuse_results(bool force) const;
    void take_lock();
    void leave_lock() const;
    void remove_results(const std::vector<std::string>& results) const;
    std::filesystem::path folder_, lock_;
    std::vector<std::string> old_files_, leftovers_, files_, new_files_;
    std::vector<std::filesystem::path> inputs_;
    bool force_ = false, made_ = false, finished_ = false;
};

} // namespace aureole::files
