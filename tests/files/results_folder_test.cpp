#include "child_process.hpp"

#include "aureole/base/error.hpp"
#include "aureole/files/run_folder.hpp"

#include <catch2/catch.hpp>
#include <fmt/format.h>

#include <fstream>
#include <set>
#include <sstream>

using namespace aureole;
using namespace aureole::files;
using Catch::Matchers::Contains;
using std::string;
namespace fs = std::filesystem;

namespace {

string content_of(const fs::path& path) {
    std::ifstream stream(path, std::ios::binary);
    std::ostringstream text;
    text << stream.rdbuf();
    return text.str();
}

std::set<string> names_in(const fs::path& folder) {
    std::set<string> names;
    for (const auto& entry : fs::recursive_directory_iterator(folder)) {
        if (!entry.is_directory()) {
            names.insert(fs::relative(entry.path(), folder).string());
        }
    }
    return names;
}

void run_once(const fs::path& path,
              bool force,
              const std::vector<string>& results,
              const string& text = "result") {
    RunFolder folder(path, force);
    folder.begin_writing();
    for (const string& result : results) {
        folder.write_text(result, text);
    }
    folder.finish("aureole predict");
}

string refusal(const std::function<void()>& call) {
    try {
        call();
    } catch (const Error& error) {
        CHECK(error.kind() == ErrorKind::output);
        return error.what();
    }
    return "accepted";
}

using Names = std::set<string>;

} // namespace

TEST_CASE("a run leaves its results and a list of them", "[files][folder]") {
    const TestFolder test;
    const auto path = test.path() / "deep" / "results";
    run_once(path, false, {"maps/a.txt", "b.txt"});
    CHECK(names_in(path) == Names{"b.txt", "manifest.json", "maps/a.txt"});
    const string manifest = content_of(path / "manifest.json");
    // FNV-1a of "result", 64 bits: from the definition with offset cbf29ce484222325 and prime 100000001b3.
    std::uint64_t hash = 0xcbf29ce484222325U;
    for (const char c : string("result")) {
        hash = (hash ^ static_cast<unsigned char>(c)) * 0x100000001b3U;
    }
    CHECK_THAT(manifest, Contains("\"path\": \"maps/a.txt\"") && Contains("\"bytes\": 6") &&
                             Contains(fmt::format("{:016x}", hash)) && Contains("aureole predict"));
}

TEST_CASE("a second run does not mix with the first", "[files][folder][bad-output]") {
    const TestFolder test;
    run_once(test.path(), false, {"a.txt"}, "first");
    CHECK_THAT(refusal([&] { run_once(test.path(), false, {"b.txt"}); }),
               Contains(test.path().string()) && Contains("earlier run") && Contains("--force"));
    CHECK(content_of(test.path() / "a.txt") == "first");
    CHECK(names_in(test.path()) == Names{"a.txt", "manifest.json"});
}

TEST_CASE("force removes exactly the files of the earlier run", "[files][folder]") {
    const TestFolder test;
    run_once(test.path(), false, {"a.txt", "maps/b.txt", "tables/c.txt"});
    std::ofstream(test.path() / "mine.txt") << "mine";
    std::ofstream(test.path() / "maps" / "mine.txt") << "mine";
    run_once(test.path(), true, {"new.txt"});
    CHECK(names_in(test.path()) == Names{"manifest.json", "maps/mine.txt", "mine.txt", "new.txt"});
    CHECK_FALSE(fs::exists(test.path() / "tables"));
    CHECK(content_of(test.path() / "mine.txt") == "mine");
}

TEST_CASE("a file of the user at the place of a result is kept", "[files][folder][bad-output]") {
    const TestFolder test;
    std::ofstream(test.path() / "a.txt") << "mine";
    CHECK_THAT(refusal([&] { run_once(test.path(), false, {"first.txt", "a.txt"}); }), Contains("a.txt"));
    CHECK(names_in(test.path()) == Names{"a.txt"});
    CHECK(content_of(test.path() / "a.txt") == "mine");
    { // a forced run that fails before it has written
        RunFolder folder(test.path(), true);
        folder.begin_writing();
        folder.place("a.txt");
    }
    CHECK(content_of(test.path() / "a.txt") == "mine");
}

TEST_CASE("a run that fails leaves the earlier results or none of its own", "[files][folder]") {
    const TestFolder test;
    run_once(test.path(), false, {"a.txt"}, "first");
    { RunFolder folder(test.path(), true); }
    CHECK(names_in(test.path()) == Names{"a.txt", "manifest.json"});
    const auto fresh = test.path() / "fresh";
    {
        RunFolder folder(fresh, false);
        folder.begin_writing();
        folder.write_text("maps/b.txt", "half");
    }
    CHECK_FALSE(fs::exists(fresh));
}

TEST_CASE("a manifest of another program is respected", "[files][folder][bad-output]") {
    const TestFolder test;
    std::ofstream(test.path() / "manifest.json")
        << "{\n  \"files\": [\n    {\"path\": \"precious.txt\"}\n  ]\n}\n";
    std::ofstream(test.path() / "precious.txt") << "mine";
    for (const bool force : {false, true}) {
        CHECK_THAT(refusal([&] { run_once(test.path(), force, {"a.txt"}); }),
                   Contains("manifest.json") && Contains("did not write"));
    }
    CHECK(names_in(test.path()) == Names{"manifest.json", "precious.txt"});
}

TEST_CASE("a list that points out of the folder removes nothing there", "[files][folder][bad-output]") {
    const TestFolder test;
    const auto path = test.path() / "results";
    fs::create_directory(path);
    std::ofstream(test.path() / "outside.txt") << "mine";
    std::ofstream(path / "manifest.json")
        << "{\n  \"program\": \"aureole 0.1.0\",\n  \"path\": \"../outside.txt\"\n  \"path\": \""
        << (test.path() / "outside.txt").string() << "\"\n}\n";
    run_once(path, true, {"a.txt"});
    CHECK(content_of(test.path() / "outside.txt") == "mine");
}

TEST_CASE("one run at a time writes in a folder", "[files][folder][bad-output]") {
    const TestFolder test;
    {
        RunFolder first(test.path(), false);
        CHECK_THAT(refusal([&] { RunFolder second(test.path(), true); }),
                   Contains("another run") && Contains(std::to_string(getpid())));
        const string message = in_child([] { return true; }, [&] { RunFolder second(test.path(), true); });
        CHECK_THAT(message, Contains("output: ") && Contains("another run"));
    }
    CHECK_NOTHROW(RunFolder(test.path(), false));
}

TEST_CASE("the lock and the rests of a killed run are taken over", "[files][folder]") {
    const TestFolder test;
    const pid_t child = fork();
    REQUIRE(child >= 0);
    if (child == 0) {
        RunFolder folder(test.path(), false);
        folder.begin_writing();
        folder.write_text("half.txt", "half");
        raise(SIGKILL);
    }
    int status = 0;
    waitpid(child, &status, 0);
    REQUIRE(WIFSIGNALED(status));
    REQUIRE(fs::exists(test.path() / "half.txt"));
    run_once(test.path(), false, {"new.txt"});
    CHECK(names_in(test.path()) == Names{"manifest.json", "new.txt"});
}

TEST_CASE("an input is neither removed nor overwritten", "[files][folder][bad-output]") {
    const TestFolder test;
    run_once(test.path(), false, {"a.txt"});
    {
        RunFolder folder(test.path(), true);
        CHECK_THAT(refusal([&] { folder.protect(test.path() / "." / "a.txt"); }),
                   Contains("a.txt") && Contains("input"));
    }
    std::ofstream(test.path() / "input.fits") << "input";
    {
        RunFolder folder(test.path(), true);
        folder.protect(test.path() / "input.fits");
        folder.begin_writing();
        CHECK_THAT(refusal([&] { folder.place("input.fits"); }), Contains("input.fits"));
    }
    CHECK(content_of(test.path() / "input.fits") == "input");
}

TEST_CASE("a place that is no folder or may not be written is refused", "[files][folder][bad-output]") {
    const TestFolder test;
    std::ofstream(test.path() / "file") << "mine";
    CHECK_THAT(refusal([&] { RunFolder folder(test.path() / "file", true); }), Contains("found a file"));
    CHECK_THAT(refusal([&] { RunFolder folder(test.path() / "file" / "inner", true); }),
               Contains("cannot be made"));
    fs::permissions(test.path(), fs::perms(0555));
    for (const char* name : {"", "inner"}) {
        const string message = in_child(become_nobody, [&] { RunFolder folder(test.path() / name, false); });
        if (message == "skipped") {
            WARN("skipped: this process may not change its user");
        } else {
            CHECK_THAT(message, Contains("output: ") && Contains(test.path().string()));
        }
    }
    fs::permissions(test.path(), fs::perms(0755));
}
