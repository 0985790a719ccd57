#include "aureole/files/run_folder.hpp"

#include "aureole/base/error.hpp"
#include "aureole/files/hash.hpp"
#include "aureole/files/json.hpp"
#include "aureole/files/pending.hpp"
#include "aureole/version.hpp"

#include <fmt/format.h>

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

/// The relative paths of a manifest: lines of the form "path": "...".
std::vector<std::string> listed_files(const fs::path& manifest) {
    std::vector<std::string> files;
    std::istringstream lines(file_text(manifest));
    std::string line;
    const std::string mark = "\"path\": \"";
    while (std::getline(lines, line)) {
        const auto start = line.find(mark);
        if (start == std::string::npos) {
            continue;
        }
        const auto end = line.find('"', start + mark.size());
        const std::string relative = line.substr(start + mark.size(), end - start - mark.size());
        const fs::path path(relative);
        const bool inside =
            path.is_relative() &&
            std::none_of(path.begin(), path.end(), [](const fs::path& part) { return part == ".."; });
        if (inside && !relative.empty()) {
            files.push_back(relative);
        }
    }
    return files;
}

bool is_alive(long pid) {
    return pid > 0 && (kill(static_cast<pid_t>(pid), 0) == 0 || errno == EPERM);
}

} // namespace

RunFolder::RunFolder(fs::path folder, bool force) : folder_(std::move(folder)) {
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
    const fs::path manifest = folder_ / manifest_name;
    if (fs::exists(manifest)) {
        if (!force) {
            throw Error(
                ErrorKind::output,
                fmt::format(
                    "{}: holds the results of an earlier run ({}), expected an empty folder, or --force to "
                    "replace them",
                    folder_.string(), manifest.string()));
        }
        old_files_ = listed_files(manifest);
    }
    const fs::path lock = folder_ / lock_name;
    for (int attempt = 0;; ++attempt) {
        const int descriptor = open(lock.c_str(), O_WRONLY | O_CREAT | O_EXCL | O_CLOEXEC, 0644);
        if (descriptor >= 0) {
            const std::string pid = fmt::format("{}\n", getpid());
            const bool written =
                write(descriptor, pid.data(), pid.size()) == static_cast<ssize_t>(pid.size());
            close(descriptor);
            if (!written) {
                fs::remove(lock, failure);
                throw Error(ErrorKind::output,
                            fmt::format("{}: cannot be written: {}", lock.string(), std::strerror(errno)));
            }
            lock_ = lock;
            return;
        }
        if (errno != EEXIST || attempt > 3) {
            throw Error(ErrorKind::output,
                        fmt::format("{}: cannot be written to: {}", folder_.string(), std::strerror(errno)));
        }
        const long owner = std::strtol(file_text(lock).c_str(), nullptr, 10);
        if (is_alive(owner)) {
            throw Error(ErrorKind::output, fmt::format("{}: another run (process {}) is writing there",
                                                       folder_.string(), owner));
        }
        fs::remove(lock, failure); // of a run that was killed
    }
}

RunFolder::~RunFolder() {
    std::error_code ignored;
    if (!lock_.empty()) {
        fs::remove(lock_, ignored);
    }
    if (made_ && files_.empty()) {
        fs::remove(folder_, ignored); // only if empty
    }
}

void RunFolder::protect(const fs::path& input) const {
    std::error_code failure;
    const fs::path real = fs::weakly_canonical(input, failure);
    for (const std::string& old : old_files_) {
        if (fs::weakly_canonical(folder_ / old, failure) == real) {
            throw Error(
                ErrorKind::output,
                fmt::format(
                    "{}: is an input of this run and a result of the earlier run in {}, expected another "
                    "folder for the results",
                    input.string(), folder_.string()));
        }
    }
}

void RunFolder::begin_writing() {
    std::error_code failure;
    fs::remove(folder_ / manifest_name, failure);
    std::set<fs::path> folders;
    for (const std::string& old : old_files_) {
        fs::remove(folder_ / old, failure);
        folders.insert((folder_ / old).parent_path());
    }
    for (const fs::path& inner : folders) {
        if (inner != folder_) {
            fs::remove(inner, failure); // only if empty
        }
    }
    old_files_.clear();
}

fs::path RunFolder::place(const std::string& relative) {
    const fs::path path = folder_ / relative;
    std::error_code failure;
    fs::create_directories(path.parent_path(), failure);
    if (failure) {
        throw Error(ErrorKind::output,
                    fmt::format("{}: cannot be made: {}", path.parent_path().string(), failure.message()));
    }
    files_.push_back(relative);
    return path;
}

void RunFolder::write_text(const std::string& relative, std::string_view text) {
    files::write_text(place(relative), text, false);
}

void RunFolder::finish(const std::string& command) {
    Json::Array list;
    for (const std::string& relative : files_) {
        const std::string text = file_text(folder_ / relative);
        list.push_back(Json::Object{{"path", relative}, {"bytes", text.size()}, {"fnv1a", hex(fnv1a(text))}});
    }
    const Json manifest =
        Json::Object{{"program", std::string("aureole ") + version}, {"command", command}, {"files", list}};
    files::write_text(folder_ / manifest_name, manifest.text(), true);
}

} // namespace aureole::files
