#include "aureole/base/units.hpp"

#include "aureole/base/constants.hpp"
#include "aureole/base/error.hpp"

#include <fmt/format.h>

#include <array>
#include <charconv>
#include <cmath>
#include <optional>
#include <vector>

namespace aureole {

namespace {

using namespace dimension;

struct NamedUnit {
    std::string_view name;
    double factor;
    Dimension dimension;
    bool prefixes;
};

constexpr double joule = 1e7;

constexpr Dimension rigidity_dimension{.length = 1, .field = 1}; // statvolt = G cm
constexpr Dimension power_dimension{.length = 2, .mass = 1, .time = -3};

/// Sources: FITS Standard 4.0, tables 3 to 5; CODATA 2018 and IAU values in constants.hpp.
const std::vector<NamedUnit>& named_units() {
    static const std::vector<NamedUnit> units{
        {"m", 100, length, true},
        {"pc", constants::parsec, length, true},
        {"AU", 1.495978707e13, length, false},
        {"g", 1, {.mass = 1}, true},
        {"s", 1, time, true},
        {"min", 60, time, false},
        {"h", 3600, time, false},
        {"d", 86400, time, false},
        {"yr", constants::year, time, true},
        {"a", constants::year, time, true},
        {"K", 1, temperature, true},
        {"G", 1, magnetic_field, true},
        {"T", 1e4, magnetic_field, true},
        {"V", constants::electronvolt / constants::elementary_charge, rigidity_dimension,
         true}, // 1e8/c statvolt
        {"statvolt", 1, rigidity_dimension, false},
        {"eV", constants::electronvolt, energy, true},
        {"erg", 1, energy, false},
        {"J", joule, energy, true},
        {"W", joule, {.length = 2, .mass = 1, .time = -3}, true},
        {"N", 1e5, {.length = 1, .mass = 1, .time = -2}, true},
        {"Pa", 10, energy_density, true},
        {"barn", 1e-24, {.length = 2}, true},
        {"Angstrom", 1e-8, length, false},
        {"Hz", 1, frequency, true},
        {"Jy", constants::jansky, flux_density, true},
        {"rad", 1, angle, true},
        {"sr", 1, {.angle = 2}, false},
        {"deg", constants::degree, angle, false},
        {"arcmin", constants::arcminute, angle, false},
        {"arcsec", constants::arcsecond, angle, true},
        {"mas", 1e-3 * constants::arcsecond, angle, false},
        {"beam", 1, {.beam = 1}, false},
        {"pixel", 1, {.pixel = 1}, false},
        {"pix", 1, {.pixel = 1}, false},
        {"ph", 1, none, false},
        {"photon", 1, none, false},
        {"count", 1, none, false},
        {"ct", 1, none, false},
        {"solMass", 1.988409870698051e33, {.mass = 1}, false},             // IAU GM over CODATA 2018 G
        {"solLum", 3.828e33, {.length = 2, .mass = 1, .time = -3}, false}, // IAU 2015 Resolution B3
    };
    return units;
}

constexpr std::array<std::pair<std::string_view, double>, 20> prefix_table{{
    {"da", 1e1}, {"y", 1e-24}, {"z", 1e-21}, {"a", 1e-18}, {"f", 1e-15}, {"p", 1e-12}, {"n", 1e-9},
    {"u", 1e-6}, {"m", 1e-3},  {"c", 1e-2},  {"d", 1e-1},  {"h", 1e2},   {"k", 1e3},   {"M", 1e6},
    {"G", 1e9},  {"T", 1e12},  {"P", 1e15},  {"E", 1e18},  {"Z", 1e21},  {"Y", 1e24},
}};

std::optional<Unit> find_unit(std::string_view name) {
    for (const NamedUnit& unit : named_units()) {
        if (unit.name == name) {
            return Unit{unit.factor, unit.dimension};
        }
    }
    for (const auto& [prefix, size] : prefix_table) {
        if (!name.starts_with(prefix)) {
            continue;
        }
        for (const NamedUnit& unit : named_units()) {
            if (unit.prefixes && unit.name == name.substr(prefix.size())) {
                return Unit{size * unit.factor, unit.dimension};
            }
        }
    }
    return std::nullopt;
}

Dimension raised(const Dimension& d, int power) {
    return {d.length * power, d.mass * power,  d.time * power, d.temperature * power,
            d.field * power,  d.angle * power, d.beam * power, d.pixel * power};
}

bool is_letter(char c) {
    return (c >= 'a' && c <= 'z') || (c >= 'A' && c <= 'Z');
}

/// Reads products and quotients of powers: one pass over the text.
class UnitReader {
  public:
    explicit UnitReader(std::string_view text) : text_(text) {}

    Unit read() {
        Unit result{power_of_ten(), none};
        bool divided = false; // "a/b c" means two things to two readers
        while (place_ < text_.size()) {
            const char separator = separation();
            if (place_ == text_.size() && separator == ' ') {
                break;
            }
            if (divided && separator != '/') {
                fail("one unit after a division: write cm-2, /cm2 or brackets");
            }
            divided = separator == '/';
            const Unit factor = at('(') ? bracket() : power();
            const int sign = divided ? -1 : 1;
            result.factor *= std::pow(factor.factor, sign);
            result.dimension = result.dimension * raised(factor.dimension, sign);
        }
        return result;
    }

  private:
    [[noreturn]] void fail(std::string_view expected) const {
        throw Error(
            ErrorKind::input,
            fmt::format("unit \"{}\": found {} at character {}, expected {}", text_,
                        place_ < text_.size() ? fmt::format("\"{}\"", text_.substr(place_)) : "the end",
                        place_ + 1, expected));
    }
    bool at(char c) const { return place_ < text_.size() && text_[place_] == c; }
    bool skip_blanks() {
        const std::size_t start = place_;
        while (at(' ') || at('\t')) {
            ++place_;
        }
        return place_ > start;
    }
    /// What stands between the factors: ' ', '.', '*' or '/'. Nothing is needed before the first.
    char separation() {
        const bool first = place_ == start_;
        const bool blank = skip_blanks();
        if (at('/') || (!first && (at('*') || at('.')))) {
            const char found = text_[place_++];
            skip_blanks();
            return found;
        }
        if (!first && !blank) {
            fail("a blank, '.', '*' or '/' between units");
        }
        return ' ';
    }
    /// "10**-3" in front of the units, as FITS allows.
    double power_of_ten() {
        skip_blanks();
        start_ = place_;
        if (!text_.substr(place_).starts_with("10")) {
            return 1;
        }
        place_ += 2;
        const Unit scale = with_exponent({10, none});
        if (scale.factor == 10) {
            place_ = start_;
            fail("a unit such as kpc, GeV or uG");
        }
        if (!at(' ') && place_ < text_.size()) {
            fail("a blank after the power of ten");
        }
        return scale.factor;
    }
    Unit bracket() {
        const std::size_t close = text_.find(')', place_);
        if (close == std::string_view::npos ||
            text_.substr(place_ + 1, close - place_ - 1).find('(') != std::string_view::npos) {
            fail("a closing bracket");
        }
        const Unit inner = UnitReader(text_.substr(place_ + 1, close - place_ - 1)).read();
        place_ = close + 1;
        return with_exponent(inner);
    }
    Unit power() {
        const std::size_t start = place_;
        while (place_ < text_.size() && is_letter(text_[place_])) {
            ++place_;
        }
        const auto unit = find_unit(text_.substr(start, place_ - start));
        if (!unit) {
            place_ = start;
            fail("a unit such as kpc, GeV or uG");
        }
        return with_exponent(*unit);
    }
    Unit with_exponent(const Unit& unit) {
        bool marked = false;
        if (text_.substr(place_).starts_with("**")) {
            place_ += 2;
            marked = true;
        } else if (at('^')) {
            ++place_;
            marked = true;
        }
        const bool enclosed = marked && at('(');
        place_ += enclosed ? 1 : 0;
        const bool plus = at('+');
        const std::string_view digits = text_.substr(place_ + (plus ? 1 : 0));
        int exponent = 1;
        const auto [end, failure] = std::from_chars(digits.data(), digits.data() + digits.size(), exponent);
        const bool understood =
            failure == std::errc() && std::abs(exponent) <= 30 && !(plus && digits.front() == '-');
        if (!understood) {
            if (marked || plus || failure != std::errc::invalid_argument) {
                fail("a whole exponent from -30 to 30");
            }
            return unit;
        }
        place_ = static_cast<std::size_t>(end - text_.data());
        if (enclosed) {
            if (!at(')')) {
                fail("a closing bracket");
            }
            ++place_;
        }
        return {std::pow(unit.factor, exponent), raised(unit.dimension, exponent)};
    }

    std::string_view text_;
    std::size_t place_ = 0;
    std::size_t start_ = 0; ///< of the first factor
};

/// How a dimension is spoken of: the trade's unit first, one whose factor is exactly 1 last.
struct BorderUnit {
    Dimension dimension;
    std::string_view name, example;
    std::vector<std::string_view> units;
};

const std::vector<BorderUnit>& border_units() {
    static const std::vector<BorderUnit> units{
        {length, "a length", "3 kpc", {"kpc", "pc", "Mpc", "km", "cm"}},
        {time, "a time", "10 Myr", {"Myr", "yr", "s"}},
        {frequency, "a frequency", "4.85 GHz", {"GHz", "MHz", "yr-1", "Hz"}},
        {speed, "a speed", "300 km s-1", {"km s-1", "cm s-1"}},
        {energy, "an energy", "1 GeV", {"GeV", "MeV", "TeV", "PeV", "keV", "eV", "erg"}},
        {temperature, "a temperature", "1e4 K", {"K"}},
        {magnetic_field, "a magnetic field", "5 uG", {"uG", "nG", "mG", "G"}},
        {rigidity_dimension, "a rigidity", "10 GV", {"GV", "MV", "TV", "PV", "statvolt"}},
        {angle, "an angle", "85 deg", {"deg", "arcmin", "arcsec", "rad"}},
        {number_density, "a number density", "0.1 cm-3", {"cm-3"}},
        {energy_density, "an energy density", "0.5 eV cm-3", {"eV cm-3", "erg cm-3"}},
        {spectral_density, "a density per energy", "1e-11 cm-3 GeV-1", {"cm-3 GeV-1", "cm-3 erg-1"}},
        {radio_intensity, "a surface brightness", "1 MJy/sr", {"MJy/sr", "Jy/sr", "erg s-1 cm-2 Hz-1 sr-1"}},
        {flux_density, "a flux density", "1 Jy", {"Jy", "mJy", "uJy", "erg s-1 cm-2 Hz-1"}},
        {flux_density / Dimension{.beam = 1},
         "a brightness per beam",
         "10 uJy/beam",
         {"Jy/beam", "mJy/beam", "uJy/beam", "erg s-1 cm-2 Hz-1 beam-1"}},
        {flux_density / Dimension{.pixel = 1},
         "a brightness per pixel",
         "10 uJy/pixel",
         {"Jy/pixel", "mJy/pixel", "uJy/pixel", "erg s-1 cm-2 Hz-1 pixel-1"}},
        {power_dimension, "a power", "1e41 erg s-1", {"erg s-1"}},
        {{.length = -2, .mass = 1}, "a column density of mass", "10 g cm-2", {"g cm-2"}},
        {{.mass = 1, .time = -1}, "a mass per time", "2 solMass yr-1", {"solMass yr-1", "g s-1"}},
        {{.length = 3, .time = -1}, "a rate coefficient", "1e-9 cm3 s-1", {"cm3 s-1"}},
        {radio_emissivity, "a radio emissivity", "1e-38 erg s-1 cm-3 Hz-1 sr-1", {"erg s-1 cm-3 Hz-1 sr-1"}},
        {photon_emissivity,
         "a photon emissivity",
         "1e-28 cm-3 s-1 GeV-1 sr-1",
         {"cm-3 s-1 GeV-1 sr-1", "cm-3 s-1 erg-1 sr-1"}},
    };
    return units;
}

const BorderUnit* find_border(const Dimension& dimension) {
    for (const BorderUnit& unit : border_units()) {
        if (unit.dimension == dimension) {
            return &unit;
        }
    }
    return nullptr;
}

/// The fewest digits that, read in a unit of this size, give the same double; nothing if no double does.
std::optional<std::string> digits_in(double cgs, double factor) {
    const auto reads_back = [&](double value) { return value * factor == cgs; };
    const double value = cgs / factor;
    for (int digits = 1; digits <= 17; ++digits) {
        const std::string text = fmt::format("{:.{}g}", value, digits);
        double back = 0;
        std::from_chars(text.data(), text.data() + text.size(), back);
        if (reads_back(back)) {
            return fmt::format("{}", back);
        }
    }
    for (const double near : {std::nextafter(value, HUGE_VAL), std::nextafter(value, -HUGE_VAL)}) {
        if (reads_back(near)) {
            return fmt::format("{}", near);
        }
    }
    return std::nullopt;
}

} // namespace

Dimension operator*(const Dimension& a, const Dimension& b) {
    return {a.length + b.length, a.mass + b.mass,   a.time + b.time, a.temperature + b.temperature,
            a.field + b.field,   a.angle + b.angle, a.beam + b.beam, a.pixel + b.pixel};
}

Dimension operator/(const Dimension& a, const Dimension& b) {
    return a * raised(b, -1);
}

Unit parse_unit(std::string_view text) {
    return UnitReader(text).read();
}

DimensionText describe(const Dimension& dimension) {
    if (dimension == none) {
        return {"a number", "1.5"};
    }
    if (const BorderUnit* border = find_border(dimension)) {
        return {std::string(border->name), std::string(border->example)};
    }
    return {"another dimension", "1e-17 erg s-1 cm-2"};
}

double to_cgs(std::string_view text, const Dimension& expected) {
    const auto text_of = describe(expected);
    const auto refuse = [&](std::string_view why) -> Error {
        return Error(ErrorKind::scenario, fmt::format("found \"{}\"{}, expected {} such as \"{}\"", text, why,
                                                      text_of.name, text_of.example));
    };
    std::string_view rest = text;
    while (!rest.empty() && (rest.front() == ' ' || rest.front() == '\t')) {
        rest.remove_prefix(1);
    }
    if (rest.starts_with('+') && !rest.starts_with("+-")) {
        rest.remove_prefix(1);
    }
    double number = 0;
    const auto [end, failure] = std::from_chars(rest.data(), rest.data() + rest.size(), number);
    if (failure != std::errc() || !std::isfinite(number)) {
        throw refuse("");
    }
    rest.remove_prefix(static_cast<std::size_t>(end - rest.data()));
    Unit unit;
    try {
        unit = parse_unit(rest);
    } catch (const Error& error) {
        throw refuse(fmt::format(" ({})", error.what()));
    }
    if (!(unit.dimension == expected)) {
        throw refuse(unit.dimension == none ? " without a unit"
                                            : fmt::format(", which is {}", describe(unit.dimension).name));
    }
    const double value = number * unit.factor;
    if (!std::isfinite(value)) {
        throw refuse(", which is too large");
    }
    return value;
}

double unit_factor(std::string_view unit, const Dimension& expected) {
    const Unit parsed = parse_unit(unit);
    if (!(parsed.dimension == expected)) {
        const auto text = describe(expected);
        throw Error(ErrorKind::input, fmt::format("found unit \"{}\", expected one of {}, as in \"{}\"", unit,
                                                  text.name, text.example));
    }
    return parsed.factor;
}

std::string format_quantity(double cgs, const Dimension& dimension) {
    if (dimension == none) {
        return fmt::format("{}", cgs);
    }
    const BorderUnit* border = find_border(dimension);
    if (border == nullptr) {
        throw Error(ErrorKind::runtime, "format_quantity: a dimension without a unit of the trade");
    }
    std::string shortest;
    for (const std::string_view name : border->units) {
        const auto digits = digits_in(cgs, parse_unit(name).factor);
        const std::string text = digits ? fmt::format("{} {}", *digits, name) : std::string();
        if (digits && (shortest.empty() || text.size() < shortest.size())) {
            shortest = text;
        }
        if (digits && cgs == 0) {
            break;
        }
    }
    return shortest;
}

} // namespace aureole
