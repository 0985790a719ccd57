#include "child_process.hpp"

#include "aureole/base/error.hpp"
#include "aureole/files/fits_reader.hpp"
#include "aureole/files/fits_writer.hpp"

#include <catch2/catch.hpp>
#include <fitsio.h>

#include <cmath>
#include <cstdlib>
#include <fstream>
#include <limits>
#include <sstream>

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

void write_content(const string& path, const string& content) {
    std::ofstream(path, std::ios::binary) << content;
}

/// Replaces the first place of a text in a file by another of the same length.
void patch(const string& path, const string& from, const string& to) {
    REQUIRE(from.size() == to.size());
    string content = content_of(path);
    const auto place = content.find(from);
    REQUIRE(place != string::npos);
    write_content(path, content.replace(place, from.size(), to));
}

std::vector<float> ramp(std::size_t count) {
    std::vector<float> values(count);
    for (std::size_t i = 0; i < count; ++i) {
        values[i] = static_cast<float>(i) + 0.25F;
    }
    return values;
}

/// A primary header with keys and two images of 1000 and 2000 values.
void write_sample(const string& path) {
    FitsWriter writer(path, true);
    writer.image("", {}, std::vector<float>{},
                 {{{"TESTKEY", 1.25, ""}, {"TESTTEXT", string("abc"), ""}, {"TESTFLAG", true, ""}}, {}});
    writer.image("FIRST", {10, 100}, ramp(1000), {});
    writer.image("SECOND", {2000}, ramp(2000), {});
    writer.commit();
}

string refusal(const std::function<void()>& call) {
    try {
        call();
    } catch (const Error& error) {
        CHECK(error.kind() == ErrorKind::input);
        return error.what();
    }
    return "accepted";
}

string opening(const string& path) {
    return refusal([&] { FitsReader reader(path); });
}

enum class Packing { rice_of_integers, gzip_of_floats, quantised_floats };

void write_compressed(const string& path, Packing packing) {
    fitsfile* file = nullptr;
    int status = 0;
    fits_create_diskfile(&file, path.c_str(), &status);
    fits_set_compression_type(file, packing == Packing::gzip_of_floats ? GZIP_1 : RICE_1, &status);
    fits_set_quantize_level(file, packing == Packing::quantised_floats ? 4.0F : 0.0F, &status);
    long axes[] = {50, 40};
    fits_create_img(file, packing == Packing::rice_of_integers ? LONG_IMG : FLOAT_IMG, 2, axes, &status);
    std::vector<int> whole(2000);
    std::vector<float> real(2000);
    for (int i = 0; i < 2000; ++i) {
        whole[static_cast<std::size_t>(i)] = i;
        real[static_cast<std::size_t>(i)] = std::sin(static_cast<float>(i));
    }
    if (packing == Packing::rice_of_integers) {
        fits_write_img(file, TINT, 1, 2000, whole.data(), &status);
    } else {
        fits_write_img(file, TFLOAT, 1, 2000, real.data(), &status);
    }
    char name[] = "IMAGE";
    fits_update_key_str(file, "EXTNAME", name, nullptr, &status);
    fits_close_file(file, &status);
    REQUIRE(status == 0);
}

} // namespace

TEST_CASE("what is no FITS file is refused with its name", "[files][fits][bad-input]") {
    const TestFolder folder;
    CHECK_THAT(opening(folder.file("absent.fits")), Contains("absent.fits") && Contains("not found"));
    CHECK_THAT(opening(folder.path().string()), Contains("found a folder"));
    CHECK_THAT(opening("/dev/null"), Contains("/dev/null") && Contains("expected a FITS file"));
    for (const char* content : {"", "hello", "SIMPLE  =                    T", "# a scenario\n[view]\n"}) {
        INFO("content " << content);
        write_content(folder.file("other.txt"), content);
        CHECK_THAT(opening(folder.file("other.txt")), Contains("other.txt"));
    }
    write_content(folder.file("zeros"), string(28800, '\0'));
    CHECK_THAT(opening(folder.file("zeros")), Contains("zeros"));
}

TEST_CASE("a FITS file cut anywhere is refused on opening", "[files][fits][bad-input]") {
    const TestFolder folder;
    const string whole = folder.file("whole.fits");
    write_sample(whole);
    const string content = content_of(whole);
    REQUIRE(content.size() % 2880 == 0);
    std::size_t accepted = 0;
    for (std::size_t size = 0; size < content.size(); size += 720) {
        INFO("cut at byte " << size << " of " << content.size());
        write_content(folder.file("cut.fits"), content.substr(0, size));
        const string message = opening(folder.file("cut.fits"));
        // At the end of an HDU the rest is a whole file.
        const bool between = size > 0 && size % 2880 == 0 && content.compare(size, 8, "XTENSION") == 0;
        accepted += message == "accepted" ? 1 : 0;
        CHECK((message == "accepted") == between);
        if (!between) {
            CHECK_THAT(message, Contains("cut.fits"));
        }
    }
    CHECK(accepted == 2);
}

TEST_CASE("sizes that no file can have are refused", "[files][fits][bad-input]") {
    const TestFolder folder;
    const string path = folder.file("big.fits");
    write_sample(path);
    patch(path, "NAXIS1  =                   10", "NAXIS1  =           1000000000");
    CHECK_THAT(opening(path), Contains("big.fits") && Contains("FIRST"));
    patch(path, "NAXIS1  =           1000000000", "NAXIS1  =  4611686018427387904");
    CHECK_THAT(opening(path), Contains("big.fits"));
    patch(path, "NAXIS1  =  4611686018427387904", "NAXIS1  =                  -10");
    CHECK_THAT(opening(path), Contains("big.fits"));
}

TEST_CASE("keywords of another type are refused, absent ones are nothing", "[files][fits][bad-input]") {
    const TestFolder folder;
    const string path = folder.file("keys.fits");
    write_sample(path);
    {
        FitsReader reader(path);
        const auto& primary = reader.hdus().front();
        CHECK(reader.number(primary, "TESTKEY") == 1.25);
        CHECK(reader.text(primary, "TESTTEXT") == "abc");
        CHECK(reader.flag(primary, "TESTFLAG") == true);
        CHECK_FALSE(reader.number(primary, "ABSENT"));
        CHECK_FALSE(reader.text(primary, "ABSENT"));
        CHECK_FALSE(reader.flag(primary, "ABSENT"));
        CHECK_THAT(refusal([&] { reader.number(primary, "TESTTEXT"); }),
                   Contains("keys.fits") && Contains("TESTTEXT") && Contains("abc") && Contains("number"));
        CHECK_THAT(refusal([&] { reader.flag(primary, "TESTTEXT"); }),
                   Contains("TESTTEXT") && Contains("T or F"));
    }
    for (const string value : {" NaN", " Inf", "'x'", "1e999"}) {
        write_sample(path);
        const string before = content_of(path);
        const auto place = before.find("TESTKEY =");
        const string card = before.substr(place, 80);
        string other = "TESTKEY = " + value;
        other.resize(80, ' ');
        patch(path, card, other);
        FitsReader reader(path);
        INFO("value " << value);
        CHECK_THAT(refusal([&] { reader.number(reader.hdus().front(), "TESTKEY"); }),
                   Contains("TESTKEY") && Contains("finite number"));
    }
}

TEST_CASE("an HDU that is there twice is refused when it is asked for", "[files][fits][bad-input]") {
    const TestFolder folder;
    FitsWriter writer(folder.file("twice.fits"), false);
    writer.image("", {}, std::vector<float>{}, {});
    writer.image("MAP", {1}, std::vector<float>{1}, {});
    writer.image("MAP", {1}, std::vector<float>{2}, {});
    writer.commit();
    const FitsReader reader(folder.file("twice.fits"));
    CHECK_THAT(refusal([&] { reader.find("MAP"); }), Contains("twice.fits") && Contains("numbers 2 and 3"));
    CHECK(reader.find("OTHER") == nullptr);
}

TEST_CASE("a changed bit fails the checksum of its HDU only", "[files][fits][bad-input]") {
    const TestFolder folder;
    const string path = folder.file("bit.fits");
    write_sample(path);
    string content = content_of(path);
    content[content.size() - 2000] = static_cast<char>(content[content.size() - 2000] ^ 4);
    write_content(path, content);
    FitsReader reader(path);
    CHECK(reader.verify_checksum(*reader.find("FIRST")) == true);
    CHECK(reader.verify_checksum(*reader.find("SECOND")) == false);
    CHECK(reader.datasum(*reader.find("FIRST")).has_value());
}

TEST_CASE("lossless compression is told from lossy", "[files][fits]") {
    const TestFolder folder;
    const auto opened = [&](Packing packing) {
        const string path = folder.file("packed" + std::to_string(static_cast<int>(packing)) + ".fits");
        write_compressed(path, packing);
        FitsReader reader(path);
        const HduInfo& hdu = *reader.find("IMAGE");
        CHECK(hdu.compressed);
        CHECK(hdu.is_image);
        CHECK(hdu.shape == std::vector<std::size_t>{50, 40});
        CHECK(hdu.lossy == (packing == Packing::quantised_floats));
        const auto values = reader.read_all(hdu);
        REQUIRE(values.size() == 2000);
        return values[1999];
    };
    CHECK(opened(Packing::rice_of_integers) == 1999);
    CHECK(opened(Packing::gzip_of_floats) == static_cast<double>(std::sin(1999.0F)));
    CHECK(opened(Packing::quantised_floats) == Approx(std::sin(1999.0)).margin(0.2));
}

TEST_CASE("values come back as they were written, infinite ones too", "[files][fits][round-trip]") {
    const TestFolder folder;
    const double infinite = std::numeric_limits<double>::infinity();
    std::vector<double> values{0, -0.1, 1e-300, 1e300, infinite, -infinite, std::nan("")};
    FitsWriter writer(folder.file("values.fits"), false);
    writer.image("", {7}, values, {});
    writer.image("FLOAT", {4},
                 std::vector<float>{1e-38F, 3e38F, std::numeric_limits<float>::infinity(), std::nanf("")},
                 {});
    writer.commit();
    FitsReader reader(folder.file("values.fits"));
    const auto back = reader.read_all(reader.hdus().front());
    REQUIRE(back.size() == values.size());
    for (std::size_t i = 0; i < 6; ++i) {
        CHECK(back[i] == values[i]);
    }
    CHECK(std::isnan(back[6]));
    std::vector<float> part(3);
    reader.read(*reader.find("FLOAT"), 1, 3, part.data());
    CHECK(part[0] == 3e38F);
    CHECK(part[1] == std::numeric_limits<float>::infinity());
    CHECK(std::isnan(part[2]));
}

TEST_CASE("blanks of integer images are NaN and scales are applied", "[files][fits]") {
    const TestFolder folder;
    const string path = folder.file("integers.fits");
    fitsfile* file = nullptr;
    int status = 0;
    fits_create_diskfile(&file, path.c_str(), &status);
    long axes[] = {4};
    fits_create_img(file, SHORT_IMG, 1, axes, &status);
    short raw[] = {-32768, 0, 10, 20};
    fits_write_img(file, TSHORT, 1, 4, raw, &status);
    fits_update_key_lng(file, "BLANK", -32768, nullptr, &status);
    fits_update_key_dbl(file, "BSCALE", 0.5, -15, nullptr, &status);
    fits_update_key_dbl(file, "BZERO", 3, -15, nullptr, &status);
    fits_close_file(file, &status);
    REQUIRE(status == 0);
    FitsReader reader(path);
    CHECK(reader.hdus().front().scaled);
    const auto values = reader.read_all(reader.hdus().front());
    REQUIRE(values.size() == 4);
    CHECK(std::isnan(values[0]));
    CHECK(values[1] == 3);
    CHECK(values[3] == 13);
}

TEST_CASE("names with brackets, blanks and other letters are names", "[files][fits]") {
    const TestFolder folder;
    for (const char* name : {"map[1].fits", "a(1).fits", "two words.fits", "Gal\xc3\xa4xie \xce\xb1.fits",
                             "!first.fits", "~home.fits", "-"}) {
        INFO(name);
        const string path = folder.file(name);
        write_sample(path);
        CHECK(std::filesystem::is_regular_file(path));
        FitsReader reader(path);
        CHECK(reader.find("SECOND") != nullptr);
    }
    CHECK(std::distance(std::filesystem::directory_iterator(folder.path()), {}) == 7);
}
