#pragma once

#include "aureole/base/error.hpp"

#include <catch2/catch.hpp>

#include <csignal>
#include <filesystem>
#include <functional>
#include <string>
#include <sys/resource.h>
#include <sys/wait.h>
#include <unistd.h>

/// A folder of one test, removed with everything in it.
class TestFolder {
  public:
    TestFolder() {
        std::string pattern = (std::filesystem::temp_directory_path() / "aureole_test_XXXXXX").string();
        REQUIRE(mkdtemp(pattern.data()) != nullptr);
        path_ = pattern;
    }
    ~TestFolder() {
        std::error_code ignored;
        std::filesystem::remove_all(path_, ignored);
    }
    TestFolder(const TestFolder&) = delete;
    TestFolder& operator=(const TestFolder&) = delete;
    const std::filesystem::path& path() const { return path_; }
    std::string file(const std::string& name) const { return (path_ / name).string(); }

  private:
    std::filesystem::path path_;
};

/// Runs body in a child process and gives the message of the Error it ended with: "output: ...", "input:
/// ..."; "done" without one, "skipped" where prepare() is false.
inline std::string in_child(const std::function<bool()>& prepare, const std::function<void()>& body) {
    int ends[2];
    REQUIRE(pipe(ends) == 0);
    const pid_t child = fork();
    REQUIRE(child >= 0);
    if (child == 0) {
        close(ends[0]);
        std::string text = "skipped";
        if (prepare()) {
            text = "done";
            try {
                body();
            } catch (const aureole::Error& error) {
                text = std::string(error.kind() == aureole::ErrorKind::output ? "output: " : "input: ") +
                       error.what();
            } catch (const std::exception& error) {
                text = std::string("another exception: ") + error.what();
            }
        }
        const ssize_t written = write(ends[1], text.data(), text.size());
        _exit(written == static_cast<ssize_t>(text.size()) ? 0 : 1);
    }
    close(ends[1]);
    std::string text;
    char part[512];
    for (ssize_t got = 0; (got = read(ends[0], part, sizeof part)) > 0;) {
        text.append(part, static_cast<std::size_t>(got));
    }
    close(ends[0]);
    int status = 0;
    waitpid(child, &status, 0);
    return WIFEXITED(status) && WEXITSTATUS(status) == 0 ? text : text + " (the child died)";
}

/// Gives up the rights of root, which may write anywhere.
inline bool become_nobody() {
    return geteuid() != 0 || (setgid(65534) == 0 && setuid(65534) == 0);
}

/// No file may grow beyond so many bytes, as on a full disc.
inline std::function<bool()> file_limit(rlim_t bytes) {
    return [bytes] {
        std::signal(SIGXFSZ, SIG_IGN);
        const rlimit limit{bytes, bytes};
        return setrlimit(RLIMIT_FSIZE, &limit) == 0;
    };
}
