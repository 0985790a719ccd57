#include "child_process.hpp"

#include "aureole/base/error.hpp"
#include "aureole/files/fits_reader.hpp"
#include "aureole/files/fits_writer.hpp"

#include <catch2/catch.hpp>

#include <chrono>
#include <cmath>
#include <cstdlib>
#include <fstream>
#include <limits>
#include <random>
#include <sstream>
#include <thread>

using namespace aureole;
using namespace aureole::files;
using Catch::Matchers::Contains;
using std::string;

namespace {

string content_of(const string& path) {
    std::ifstream stream(path, std::ios::binary);
    std::ostringstream text;
    text << stream.rdbuf();
    return text.str();
}

std::size_t entries(const std::filesystem::path& folder) {
    return static_cast<std::size_t>(std::distance(std::filesystem::directory_iterator(folder), {}));
}

void write_sample(const string& path, bool replace) {
    FitsWriter writer(path, replace);
    writer.image("", {20, 10}, std::vector<float>(200, 1.5F),
                 {{{"OBJECT", string("SAMPLE"), "a name"}}, {"one line"}});
    writer.table("TABLE",
                 {{"HEIGHT", "kpc", std::vector<double>{1, 2}},
                  {"NAME", "", std::vector<string>{"a", "longer"}},
                  {"COUNT", "", std::vector<long>{3, 4}}},
                 {});
    writer.commit();
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

} // namespace

TEST_CASE("an output that exists is kept unless it is to be replaced", "[files][fits][bad-output]") {
    const TestFolder folder;
    const string path = folder.file("map.fits");
    std::ofstream(path) << "mine";
    CHECK_THAT(refusal([&] { write_sample(path, false); }),
               Contains("map.fits") && Contains("exists already") && Contains("--force"));
    CHECK(content_of(path) == "mine");
    write_sample(path, true);
    CHECK(content_of(path).substr(0, 6) == "SIMPLE");
    CHECK(entries(folder.path()) == 1);
    CHECK_THAT(refusal([&] { write_text(folder.path(), "text", true); }), Contains("folder"));
}

TEST_CASE("a file that is not committed leaves no trace", "[files][fits]") {
    const TestFolder folder;
    {
        FitsWriter writer(folder.file("map.fits"), false);
        writer.image("", {2}, std::vector<float>{1, 2}, {});
        CHECK_FALSE(std::filesystem::exists(folder.file("map.fits")));
    }
    CHECK(entries(folder.path()) == 0);
    CHECK_THAT(refusal([&] { write_sample(folder.file("no/such/map.fits"), false); }),
               Contains("no/such/map.fits"));
}

TEST_CASE("a folder without the right to write is refused by name", "[files][fits][bad-output]") {
    const TestFolder folder;
    std::filesystem::permissions(folder.path(), std::filesystem::perms(0555));
    for (const bool text : {false, true}) {
        const string message = in_child(become_nobody, [&] {
            text ? write_text(folder.file("notes.txt"), "text", false)
                 : write_sample(folder.file("map.fits"), false);
        });
        if (message == "skipped") {
            WARN("skipped: this process may not change its user");
            continue;
        }
        CHECK_THAT(message,
                   Contains("output: ") && Contains(folder.path().string()) && Contains("ermission"));
    }
    std::filesystem::permissions(folder.path(),
                                 std::filesystem::perms(0000)); // not even its names can be asked for
    const string message = in_child(become_nobody, [&] { write_sample(folder.file("map.fits"), false); });
    if (message != "skipped") {
        CHECK_THAT(message, Contains("output: ") && Contains("map.fits"));
    }
    std::filesystem::permissions(folder.path(), std::filesystem::perms(0755));
    CHECK(entries(folder.path()) == 0);
}

TEST_CASE("a full disc is an error and leaves no half file", "[files][fits][bad-output]") {
    const TestFolder folder;
    const std::vector<float> many(1 << 20, 1.0F);
    for (const rlim_t limit : {1000U, 6000U, 1000000U}) {
        INFO("limit " << limit);
        const string message = in_child(file_limit(limit), [&] {
            FitsWriter writer(folder.file("map.fits"), false);
            writer.image("", {1 << 20}, many, {});
            writer.commit();
        });
        CHECK_THAT(message, Contains("output: ") && Contains("map.fits"));
        CHECK_THAT(message, !Contains("died"));
        CHECK(entries(folder.path()) == 0);
    }
    const string text =
        in_child(file_limit(1000), [&] { write_text(folder.file("a.txt"), string(5000, 'x'), false); });
    CHECK_THAT(text, Contains("output: ") && Contains("a.txt") && Contains("large"));
    CHECK(entries(folder.path()) == 0);
}

TEST_CASE("equal input gives equal bytes at any time", "[files][fits][reproducible]") {
    const TestFolder folder;
    setenv("SOURCE_DATE_EPOCH", "1700000000", 1);
    write_sample(folder.file("one.fits"), false);
    std::this_thread::sleep_for(std::chrono::milliseconds(1100)); // time stamps count seconds
    write_sample(folder.file("two.fits"), false);
    unsetenv("SOURCE_DATE_EPOCH");
    const string one = content_of(folder.file("one.fits"));
    CHECK(one == content_of(folder.file("two.fits")));
    CHECK_THAT(one, Contains("DATE    = '2023-11-14T22:13:20'"));
    FitsReader reader(folder.file("one.fits"));
    for (const HduInfo& hdu : reader.hdus()) {
        CHECK(reader.verify_checksum(hdu) == true);
    }
}

TEST_CASE("header values read back as they were given", "[files][fits][round-trip]") {
    const TestFolder folder;
    std::mt19937_64 random(41);
    std::uniform_real_distribution<double> mantissa(-10, 10);
    std::uniform_real_distribution<double> logarithm(-300, 300);
    Header header;
    std::vector<double> numbers{
        0, 1.0 / 3, 0.1, 1e22, -4.85e9, 2.2250738585072014e-308, 1.7976931348623157e308};
    for (int i = 0; i < 200; ++i) {
        numbers.push_back(mantissa(random) * std::pow(10.0, logarithm(random)));
    }
    for (std::size_t i = 0; i < numbers.size(); ++i) {
        header.cards.push_back({"N" + std::to_string(i), numbers[i], ""});
    }
    const std::vector<string> texts{"",
                                    "short",
                                    string(68, 'x'),
                                    string(69, 'y'),
                                    string(300, 'z'),
                                    "it's a 'quoted' text",
                                    string(60, '\''),
                                    string(34, '\'') + "end",
                                    "a / slash",
                                    "ends with &"};
    for (std::size_t i = 0; i < texts.size(); ++i) {
        header.cards.push_back({"T" + std::to_string(i), texts[i], "comment"});
    }
    header.cards.push_back({"NOTHING", std::nan(""), ""});
    header.cards.push_back({"UTF8", string("R\xc3\xb6ntgen"), ""});
    FitsWriter writer(folder.file("keys.fits"), false);
    writer.image("", {}, std::vector<float>{}, header);
    writer.commit();
    FitsReader reader(folder.file("keys.fits"));
    const HduInfo& hdu = reader.hdus().front();
    for (std::size_t i = 0; i < numbers.size(); ++i) {
        INFO("seed 41, number " << numbers[i]);
        CHECK(reader.number(hdu, "N" + std::to_string(i)) == numbers[i]);
    }
    for (std::size_t i = 0; i < texts.size(); ++i) {
        CHECK(reader.text(hdu, "T" + std::to_string(i)) == texts[i]);
    }
    CHECK_FALSE(reader.number(hdu, "NOTHING"));
    CHECK(reader.text(hdu, "UTF8") == "R?ntgen");
    CHECK(reader.verify_checksum(hdu) == true);
}

TEST_CASE("a keyword or shape that cannot be is a fault, not a file", "[files][fits]") {
    const TestFolder folder;
    FitsWriter writer(folder.file("map.fits"), false);
    CHECK_THROWS_WITH(writer.image("", {}, std::vector<float>{}, {{{"MUCHTOOLONG", 1.0, ""}}, {}}),
                      Contains("MUCHTOOLONG"));
    CHECK_THROWS_WITH(writer.image("", {3}, std::vector<float>{1, 2}, {}), Contains("2") && Contains("3"));
    CHECK_THROWS_WITH(
        writer.table("T", {{"A", "", std::vector<double>{1}}, {"B", "", std::vector<double>{1, 2}}}, {}),
        Contains("B"));
}
