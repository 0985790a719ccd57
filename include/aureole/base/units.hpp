#pragma once

#include <string>
#include <string_view>

namespace aureole {

/// Exponents of the base dimensions. Lengths are cm, masses g, times s, temperatures K, fields G, angles rad;
/// `beam` and `pixel` count resolution elements of a map. The field is a base dimension of its own, so that
/// no half-integer exponents occur; photons and particles are pure numbers.
struct Dimension {
    int length = 0, mass = 0, time = 0, temperature = 0, field = 0, angle = 0, beam = 0, pixel = 0;
    friend bool operator==(const Dimension&, const Dimension&) = default;
    friend Dimension operator*(const Dimension& a, const Dimension& b);
    friend Dimension operator/(const Dimension& a, const Dimension& b);
};

namespace dimension {
inline constexpr Dimension none{};
inline constexpr Dimension length{.length = 1};
inline constexpr Dimension time{.time = 1};
inline constexpr Dimension frequency{.time = -1};
inline constexpr Dimension speed{.length = 1, .time = -1};
inline constexpr Dimension energy{.length = 2, .mass = 1, .time = -2};
inline constexpr Dimension temperature{.temperature = 1};
inline constexpr Dimension magnetic_field{.field = 1};
inline constexpr Dimension angle{.angle = 1};
inline constexpr Dimension number_density{.length = -3};
inline constexpr Dimension energy_density{.length = -1, .mass = 1, .time = -2};
inline constexpr Dimension spectral_density{.length = -5, .mass = -1, .time = 2}; ///< cm-3 erg-1
inline constexpr Dimension radio_intensity{.mass = 1, .time = -2, .angle = -2};   ///< erg s-1 cm-2 Hz-1 sr-1
inline constexpr Dimension flux_density{.mass = 1, .time = -2};                   ///< erg s-1 cm-2 Hz-1
inline constexpr Dimension radio_emissivity{
    .length = -1, .mass = 1, .time = -2, .angle = -2}; ///< erg s-1 cm-3 Hz-1 sr-1
inline constexpr Dimension photon_emissivity{
    .length = -5, .mass = -1, .time = 1, .angle = -2}; ///< s-1 cm-3 erg-1 sr-1
} // namespace dimension

/// A unit and its size: one such unit is `factor` CGS units of `dimension`.
struct Unit {
    double factor = 1;
    Dimension dimension;
};

/// Reads a unit string in the grammar of the FITS Standard 4.0, section 4.3: products by blank, '.' or '*',
/// '/' for division by the one unit or bracket after it, integer powers ("cm-2", "cm^-2", "cm**-2"), SI
/// prefixes, a power of ten in front ("10**-3 Jy"); case-sensitive. "" is dimensionless. What two readers may
/// take differently
/// ("erg/s cm2") is refused. Throws Error(input): what was found and the place of the first character that is
/// not understood.
Unit parse_unit(std::string_view text);

/// CGS value, always finite, of a quantity such as "3 kpc", "1e28 cm2 s-1" or "-15 deg". Numbers are read in
/// the C locale. Throws Error(scenario) with what was found and, for a bare number or another dimension, an
/// example of what is expected.
double to_cgs(std::string_view text, const Dimension& expected);

/// Factor from `unit` to CGS. Throws Error(input) if its dimension is not `expected`.
double unit_factor(std::string_view unit, const Dimension& expected);

/// Name and example of a dimension for messages: {"a length", "3 kpc"}.
struct DimensionText {
    std::string name, example;
};
DimensionText describe(const Dimension& dimension);

/// Writes a finite CGS value so that to_cgs reads back the same double, in whichever of the trade's units of
/// its dimension (kpc, pc, Mpc; GHz, MHz; deg, arcsec; ...) makes it shortest: "3 kpc", "144 MHz". Throws
/// Error(runtime) for a dimension that describe() has no name for.
std::string format_quantity(double cgs, const Dimension& dimension);

} // namespace aureole
