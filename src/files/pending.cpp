#include "aureole/files/pending.hpp"

#include "aureole/base/error.hpp"

#include <fmt/format.h>

#include <cerrno>
#include <cstring>
#include <fcntl.h>
#include <unistd.h>

namespace aureole::files {

namespace {

Error output_error(const std::filesystem::path& path, std::string_view what, int number) {
    return {ErrorKind::output, fmt::format("{}: {}: {}", path.string(), what, std::strerror(number))};
}

} // namespace

PendingFile::PendingFile(std::filesystem::path target, bool replace) : target_(std::move(target)) {
    std::error_code failure;
    const auto kind = std::filesystem::status(target_, failure);
    if (std::filesystem::is_directory(kind)) {
        throw Error(ErrorKind::output,
                    fmt::format("{}: found a folder, expected a name for a file", target_.string()));
    }
    if (!replace && std::filesystem::exists(kind)) {
        throw Error(ErrorKind::output,
                    fmt::format("{}: exists already, expected a new name, or --force to replace it",
                                target_.string()));
    }
    temporary_ = target_;
    temporary_ += fmt::format(".tmp{}", getpid());
    const int descriptor = open(temporary_.c_str(), O_WRONLY | O_CREAT | O_TRUNC | O_CLOEXEC, 0666);
    if (descriptor < 0) {
        const int number = errno;
        const auto named = target_;
        temporary_.clear();
        throw output_error(named, "cannot be written", number);
    }
    close(descriptor);
}

PendingFile::~PendingFile() {
    if (!temporary_.empty()) {
        std::error_code ignored;
        std::filesystem::remove(temporary_, ignored);
    }
}

PendingFile::PendingFile(PendingFile&& other) noexcept
    : target_(std::move(other.target_)), temporary_(std::move(other.temporary_)) {
    other.temporary_.clear();
}

void PendingFile::commit() {
    const int descriptor = open(temporary_.c_str(), O_RDONLY | O_CLOEXEC);
    if (descriptor < 0) {
        throw output_error(target_, "cannot be finished", errno);
    }
    const int failed = fsync(descriptor) != 0 ? errno : 0;
    close(descriptor);
    if (failed != 0 && failed != EINVAL) {
        throw output_error(target_, "cannot be flushed to the disc", failed);
    }
    std::error_code failure;
    std::filesystem::rename(temporary_, target_, failure);
    if (failure) {
        throw output_error(target_, "cannot be renamed from its temporary name", failure.value());
    }
    temporary_.clear();
}

void write_text(const std::filesystem::path& target, std::string_view text, bool replace) {
    PendingFile file(target, replace);
    const int descriptor = open(file.path().c_str(), O_WRONLY | O_TRUNC | O_CLOEXEC);
    if (descriptor < 0) {
        throw output_error(target, "cannot be written", errno);
    }
    while (!text.empty()) {
        const ssize_t written = write(descriptor, text.data(), text.size());
        if (written < 0 && errno == EINTR) {
            continue;
        }
        if (written < 0) {
            const int number = errno;
            close(descriptor);
            throw output_error(target, "cannot be written", number);
        }
        text.remove_prefix(static_cast<std::size_t>(written));
    }
    if (close(descriptor) != 0) {
        throw output_error(target, "cannot be written", errno);
    }
    file.commit();
}

} // namespace aureole::files
