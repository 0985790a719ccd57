#include "aureole/files/run_folder.hpp"

#include "aureole/base/error.hpp"
#include "aureole/base/parallel.hpp"
#include "aureole/files/hash.hpp"
#include "aureole/files/json.hpp"
#include "aureole/files/pending.hpp"
#include "aureole/version.hpp"

#include <fmt/format.h>
#include <fmt/ranges.h>

#include <algorithm>
#include <cerrno>
#include <cstring>
#include <fcntl.h>
#include <fstream>
#include <set>
#include <signal.h>
#include <sstream>
#include <unistd.h>

namespace aureole::files {

namespace {

namespace fs = std::filesystem;
constexpr const char* manifest_name = "manifest.json";
constexpr const char* lock_name = ".aureole.lock";

std::string file_text(const fs::path& path) {
    std::ifstream stream(path, std::ios::binary);
    std::ostringstream text;
    text << stream.rdbuf();
    return text.str();
}

/// Nothing outside the folder is ever touched, whatever a list says.
void keep_if_inside(const std::string& relative, std::vector<std::string>& files) {
    const fs::path path(relative);
    const bool climbs =
        std::any_of(path.begin(), path.end(), [](const fs::path& part) { return part == ".."; });
    if (!relative.empty() && path.is_relative() && !climbs) {
        files.push_back(relative);
    }
}

/// The relative paths of a manifest: lines of the form "path": "...".
std::vector<std::string> listed_files(const fs::path& manifest) {
    std::vector<std::string> files;
    std::istringstream lines(file_text(manifest));
    std::string line;
    const std::string mark = "\"path\": \"";
    while (std::getline(lines, line)) {
        const auto start = line.find(mark);
        if (start != std::string::npos) {
            const auto end = line.find('"', start + mark.size());
            keep_if_inside(line.substr(start + mark.size(), end - start - mark.size()), files);
        }
    }
    return files;
}

/// Who holds a lock, and what he has begun to write: a process number, then one relative path a line.
struct LockText {
    long owner = 0;
    std::vector<std::string> files;
};

LockText read_lock(const fs::path& lock) {
    LockText result;
    std::istringstream lines(file_text(lock));
    std::string line;
    if (std::getline(lines, line)) {
        result.owner = std::strtol(line.c_str(), nullptr, 10);
    }
    while (std::getline(lines, line)) {
        keep_if_inside(line, result.files);
    }
    return result;
}

/// Adds to a file that exists, or is made anew. Gives errno, 0 if all is well.
int append_line(const fs::path& path, int flags, const std::string& line) {
    const int descriptor = open(path.c_str(), O_WRONLY | O_CLOEXEC | flags, 0644);
    if (descriptor < 0) {
        return errno;
    }
    const std::string text = line + '\n';
    const bool written = write(descriptor, text.data(), text.size()) == static_cast<ssize_t>(text.size());
    const int number = written ? 0 : errno;
    close(descriptor);
    return number;
}

bool is_alive(long pid) {
    return pid > 0 && (kill(static_cast<pid_t>(pid), 0) == 0 || errno == EPERM);
}

} // namespace

RunFolder::RunFolder(fs::path folder, bool force) : folder_(std::move(folder)), force_(force) {
    std::error_code failure;
    if (fs::exists(folder_, failure) && !fs::is_directory(folder_, failure)) {
        throw Error(ErrorKind::output,
                    fmt::format("{}: found a file, expected a folder for the results", folder_.string()));
    }
    made_ = fs::create_directories(folder_, failure);
    if (failure) {
        throw Error(ErrorKind::output,
                    fmt::format("{}: cannot be made: {}", folder_.string(), failure.message()));
    }
    refuse_results(force);
    take_lock();
    try {
        refuse_results(force); // of a run that ended meanwhile
    } catch (...) {
        leave_lock();
        throw;
    }
    for (std::string& old : listed_files(folder_ / manifest_name)) {
        old_files_.push_back(std::move(old));
    }
}

void RunFolder::refuse_results(bool force) const {
    std::error_code failure;
    const fs::path manifest = folder_ / manifest_name;
    if (fs::exists(manifest, failure) &&
        file_text(manifest).find("\"program\": \"aureole ") == std::string::npos) {
        throw Error(ErrorKind::output,
                    fmt::format("{}: found a manifest that aureole did not write, expected another "
                                "folder for the results",
                                manifest.string()));
    }
    if (!force && fs::exists(manifest, failure)) {
        throw Error(ErrorKind::output,
                    fmt::format("{}: holds the results of an earlier run ({}), expected an empty folder, or "
                                "--force to replace them",
                                folder_.string(), manifest.string()));
    }
}

void RunFolder::take_lock() {
    const fs::path lock = folder_ / lock_name;
    std::error_code failure;
    for (int attempt = 0;; ++attempt) {
        const int number = append_line(lock, O_CREAT | O_EXCL, fmt::format("{}", getpid()));
        if (number == 0) {
            lock_ = lock;
            return;
        }
        if (number != EEXIST || attempt > 3) {
            if (number != EEXIST) {
                fs::remove(lock, failure);
            }
            if (made_) {
                fs::remove(folder_, failure);
            }
            throw Error(ErrorKind::output,
                        fmt::format("{}: cannot be written to: {}", folder_.string(), std::strerror(number)));
        }
        const LockText found = read_lock(lock);
        if (is_alive(found.owner)) {
            throw Error(ErrorKind::output, fmt::format("{}: another run (process {}) is writing there",
                                                       folder_.string(), found.owner));
        }
        // Of a run that was killed. What it left behind goes when this run writes.
        leftovers_ = found.files;
        old_files_ = found.files;
        fs::remove(lock, failure);
    }
}

void RunFolder::leave_lock() const {
    std::error_code ignored;
    fs::remove(lock_, ignored);
    if (!leftovers_.empty()) {
        // Not removed yet: the next run shall know of them.
        append_line(lock_, O_CREAT | O_EXCL, fmt::format("0\n{}", fmt::join(leftovers_, "\n")));
    }
}

RunFolder::~RunFolder() {
    std::error_code ignored;
    if (!finished_) {
        remove_results(new_files_);
    }
    leave_lock();
    if (made_ && !finished_) {
        fs::remove(folder_, ignored); // only if empty
    }
}

void RunFolder::remove_results(const std::vector<std::string>& results) const {
    std::error_code ignored;
    std::set<fs::path> folders;
    for (const std::string& result : results) {
        fs::remove(folder_ / result, ignored);
        folders.insert((folder_ / result).parent_path());
    }
    for (const fs::path& inner : folders) {
        if (inner != folder_) {
            fs::remove(inner, ignored); // only if empty
        }
    }
}

void RunFolder::protect(const fs::path& input) {
    std::error_code failure;
    const fs::path real = fs::weakly_canonical(input, failure);
    for (const std::string& old : old_files_) {
        if (fs::weakly_canonical(folder_ / old, failure) == real) {
            throw Error(
                ErrorKind::output,
                fmt::format("{}: is an input of this run and a result of the earlier run in {}, expected "
                            "another folder for the results",
                            input.string(), folder_.string()));
        }
    }
    inputs_.push_back(real);
}

void RunFolder::begin_writing() {
    std::error_code failure;
    fs::remove(folder_ / manifest_name, failure);
    remove_results(old_files_);
    old_files_.clear();
    leftovers_.clear();
}

fs::path RunFolder::place(const std::string& relative) {
    const fs::path path = folder_ / relative;
    std::error_code failure;
    fs::create_directories(path.parent_path(), failure);
    if (failure) {
        throw Error(ErrorKind::output,
                    fmt::format("{}: cannot be made: {}", path.parent_path().string(), failure.message()));
    }
    const fs::path real = fs::weakly_canonical(path, failure);
    if (std::find(inputs_.begin(), inputs_.end(), real) != inputs_.end()) {
        throw Error(ErrorKind::output,
                    fmt::format("{}: is an input of this run, expected another folder for the results",
                                path.string()));
    }
    const bool was_there = fs::exists(path, failure);
    if (was_there && !force_) {
        throw Error(ErrorKind::output, fmt::format("{}: exists already, expected a new name, or --force to "
                                                   "replace it",
                                                   path.string()));
    }
    if (!was_there) { // what was there is not ours to remove if this run fails
        if (const int number = append_line(lock_, O_APPEND, relative); number != 0) {
            throw Error(ErrorKind::output,
                        fmt::format("{}: cannot be written: {}", lock_.string(), std::strerror(number)));
        }
        new_files_.push_back(relative);
    }
    files_.push_back(relative);
    return path;
}

void RunFolder::write_text(const std::string& relative, std::string_view text) {
    files::write_text(place(relative), text, force_);
}

void RunFolder::finish(const std::string& command, const RunContext& context) {
    Json::Array list(files_.size());
    for_each_block(context, files_.size(), [&](std::size_t file) {
        const std::string& relative = files_[file];
        std::size_t bytes = 0;
        std::uint64_t hash = fnv1a("");
        std::ifstream stream(folder_ / relative, std::ios::binary);
        if (!stream) {
            throw Error(ErrorKind::output,
                        fmt::format("{}: announced, but not written", (folder_ / relative).string()));
        }
        std::vector<char> buffer(std::size_t{1} << 16);
        while (stream.read(buffer.data(), static_cast<std::streamsize>(buffer.size())) ||
               stream.gcount() > 0) {
            const std::string_view part(buffer.data(), static_cast<std::size_t>(stream.gcount()));
            hash = fnv1a(part, hash);
            bytes += part.size();
        }
        list[file] = Json::Object{{"path", relative}, {"bytes", bytes}, {"fnv1a", hex(hash)}};
    });
    const Json manifest =
        Json::Object{{"program", std::string("aureole ") + version}, {"command", command}, {"files", list}};
    files::write_text(folder_ / manifest_name, manifest.text(), true);
    finished_ = true;
}

} // namespace aureole::files
