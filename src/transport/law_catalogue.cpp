#include "aureole/transport/law_catalogue.hpp"

#include "aureole/base/constants.hpp"
#include "aureole/base/error.hpp"
#include "aureole/scenario/keys.hpp"

#include <fmt/format.h>

#include <algorithm>
#include <array>
#include <limits>
#include <numeric>
#include <vector>

namespace aureole::transport {

namespace {

using namespace dimension;
using constants::kiloparsec;
using constants::parsec;
using scenario::above_zero;

constexpr double no_limit = std::numeric_limits<double>::infinity();
constexpr double absent = std::numeric_limits<double>::quiet_NaN();
constexpr double gigavolt = constants::gigaelectronvolt / constants::elementary_charge;

constexpr LawParameter quantity(std::string_view name,
                                const Dimension& dimension,
                                double least,
                                double greatest,
                                double otherwise,
                                std::string_view help) {
    return {.name = name,
            .kind = ParameterKind::number,
            .dimension = dimension,
            .least = least,
            .greatest = greatest,
            .otherwise = otherwise,
            .help = help};
}

constexpr LawParameter required_quantity(
    std::string_view name, const Dimension& dimension, double least, double greatest, std::string_view help) {
    LawParameter parameter = quantity(name, dimension, least, greatest, absent, help);
    parameter.required = true;
    return parameter;
}

constexpr LawParameter list(std::string_view name,
                            const Dimension& dimension,
                            double least,
                            double greatest,
                            bool required,
                            std::string_view help) {
    LawParameter parameter = quantity(name, dimension, least, greatest, absent, help);
    parameter.kind = ParameterKind::list;
    parameter.required = required;
    return parameter;
}

constexpr LawParameter words(ParameterKind kind,
                             std::string_view name,
                             std::string_view otherwise,
                             std::string_view choices,
                             std::string_view help) {
    return {.name = name,
            .kind = kind,
            .dimension = none,
            .text = otherwise,
            .choices = choices,
            .required = otherwise.empty(),
            .help = help};
}

constexpr LawParameter rate_of_shape =
    quantity("rate", frequency, above_zero, 1e3, 1e-9, "scattering rate where the shape is 1");

constexpr LawParameter wave_coefficient =
    quantity("coefficient",
             none,
             above_zero,
             10,
             constants::pi / 4,
             "scattering rate over Omega F, the waves in resonance (pi/4; some papers leave it out)");

constexpr LawParameter relative_field = quantity(
    "relative_field",
    none,
    above_zero,
    100,
    absent,
    "rms of the turbulent field at the outer scale over the whole field (if not given: from the media)");

constexpr LawParameter outer_scale =
    quantity("outer_scale",
             length,
             above_zero,
             no_limit,
             absent,
             "outer scale L of the turbulence (if not given: turbulence.scale)");

constexpr std::array constant_parameters{
    quantity("rate", frequency, above_zero, 1e3, 1e-9, "scattering rate")};

constexpr std::array rigidity_power_parameters{
    quantity(
        "rate", frequency, above_zero, 1e3, 1e-9, "scattering rate at the reference rigidity for beta = 1"),
    quantity("reference_rigidity",
             rigidity_dimension,
             above_zero,
             no_limit,
             gigavolt,
             "rigidity where the shape is 1"),
    quantity("slope", none, -3, 3, 0.5, "delta below all breaks: the rate falls as rigidity^-delta"),
    quantity("beta_power", none, -5, 5, 1, "eta of beta^eta (kappa = v^2/(3 nu) has beta^2 besides)"),
    list(
        "break_rigidity", rigidity_dimension, above_zero, no_limit, false, "rigidities of breaks, ascending"),
    list("break_slope", none, -3, 3, false, "delta above each break"),
    list("break_width", none, 1e-3, 10, false, "width of each break in ln rigidity (0.1 each if not given)"),
};

constexpr std::array falling_parameters{
    rate_of_shape,
    words(ParameterKind::choice,
          "along",
          "height",
          "height, radius, spherical, ellipsoidal",
          "s = |z|, R, sqrt(R^2 + z^2), or sqrt(R^2 + z^2/axis_ratio^2)"),
    words(ParameterKind::choice,
          "form",
          "exponential",
          "exponential, power, stretched",
          "S = exp(-s/length), (1 + s/length)^-slope, or exp(-(s/length)^stretch)"),
    quantity("length", length, above_zero, no_limit, 3 * kiloparsec, "scale of the fall"),
    quantity("slope", none, 0, 20, 2, "exponent of the power form"),
    quantity("stretch", none, 0.05, 10, 0.5, "exponent of the stretched form"),
    quantity("axis_ratio", none, 1e-3, 1e3, 1, "height over radius of the ellipsoids"),
};

constexpr std::array plasma_power_parameters{
    rate_of_shape,
    quantity("field_power", none, -10, 10, 0, "exponent of |B|"),
    quantity("field_reference", magnetic_field, above_zero, no_limit, 5e-6, "|B| where its factor is 1"),
    quantity("density_power", none, -10, 10, 0, "exponent of the density of ions"),
    quantity("density_reference",
             number_density,
             above_zero,
             no_limit,
             0.03,
             "ions per volume where their factor is 1"),
    quantity("speed_power", none, -10, 10, 0, "exponent of the turbulent speed"),
    quantity("speed_reference", speed, above_zero, no_limit, 1e6, "turbulent speed where its factor is 1"),
    quantity("scale_power", none, -10, 10, 0, "exponent of the turbulent scale"),
    quantity("scale_reference",
             length,
             above_zero,
             no_limit,
             50 * parsec,
             "turbulent scale where its factor is 1"),
    quantity("temperature_power", none, -10, 10, 0, "exponent of the temperature"),
    quantity(
        "temperature_reference", temperature, above_zero, no_limit, 1e4, "temperature where its factor is 1"),
};

constexpr std::array slab_parameters{
    quantity("slope", none, 1.001, 3, 5.0 / 3, "q of the spectrum k^-q of the turbulence"),
    relative_field,
    outer_scale,
    wave_coefficient,
};

constexpr std::array anisotropic_parameters{
    quantity("coefficient", none, above_zero, 10, 0.14, "kappa ln(l_A/r_g)/(c l_A)"),
    quantity("alfven_scale",
             length,
             above_zero,
             no_limit,
             absent,
             "l_A, where eddies turn at the Alfven speed (if not given: L (v_A/u)^3 of the media)"),
};

constexpr std::array fast_mode_parameters{
    quantity("slope", none, 1.001, 3, 1.5, "q of the spectrum k^-q of the turbulence"),
    relative_field,
    outer_scale,
    required_quantity(
        "damping_scale", length, 0, no_limit, "1/k_d: shorter waves are damped away; 0: no damping"),
    quantity("sharpness", none, 0.1, 100, 1, "m of the cut exp(-(k/k_d)^m)"),
    wave_coefficient,
};

constexpr std::array self_confinement_parameters{
    words(ParameterKind::words,
          "damping",
          "ion_neutral, turbulent, nonlinear_cascade",
          "ion_neutral, turbulent, nonlinear_cascade, nonlinear_landau, none",
          "what takes energy from the waves, one or several; none: linear_damping alone"),
    quantity("linear_damping",
             frequency,
             0,
             no_limit,
             0,
             "one more rate at which waves lose energy, such as that by charged dust (Squire et al. 2021, "
             "MNRAS 502, 2630); twice the rate of the amplitude"),
    quantity("ion_neutral_coefficient",
             {.length = 3, .time = -1},
             above_zero,
             1e-6,
             8.4e-9,
             "energy rate of ion-neutral damping over n_n (T/1e4 K)^0.4"),
    wave_coefficient,
};

constexpr std::array patchy_parameters{
    quantity("slope", none, 0.01, 3, 0.5, "d of f_V/l ~ l^-d, f_V filling factor per ln l"),
    quantity("filling", none, above_zero, 1, 3e-5, "f_V of structures of the reference size"),
    quantity("size", length, above_zero, no_limit, parsec, "reference size l_0"),
    quantity("least_size", length, 0, no_limit, 0, "no smaller structures"),
    quantity("greatest_size",
             length,
             above_zero,
             no_limit,
             absent,
             "no larger structures (if not given: no limit)"),
};

constexpr std::array dust_parameters{
    rate_of_shape,
    quantity("density_power", none, -10, 10, 1, "exponent of the dust density (ions and neutral gas)"),
    quantity("density_reference",
             number_density,
             above_zero,
             no_limit,
             1,
             "H nuclei per volume where their factor is 1"),
    quantity("field_power", none, -10, 10, 0, "exponent of |B|"),
    quantity("field_reference", magnetic_field, above_zero, no_limit, 5e-6, "|B| where its factor is 1"),
    quantity("slope", none, -3, 3, 0.5, "delta of rigidity^-delta"),
    quantity("reference_rigidity",
             rigidity_dimension,
             above_zero,
             no_limit,
             gigavolt,
             "rigidity where its factor is 1"),
};

constexpr std::array formula_parameters{
    words(ParameterKind::text, "expression", "", "", "a formula in the variables listed below"),
    words(ParameterKind::choice,
          "gives",
          "rate",
          "rate, parallel_diffusion, isotropic_diffusion, isotropic_third, mean_free_path, factor",
          "s-1; kappa in cm2 s-1; D in cm2 s-1 read as kappa, or as kappa/3; kpc; a factor of another law"),
};

constexpr std::array table_parameters{
    list("radius", length, 0, no_limit, true, "nodes of R, ascending"),
    list("height", length, 0, no_limit, true, "nodes of |z|, ascending"),
    list("rigidity", rigidity_dimension, above_zero, no_limit, true, "nodes of the rigidity, ascending"),
    list("rate",
         frequency,
         above_zero,
         1e3,
         true,
         "scattering rates at the nodes, rigidity fastest, then height, then radius"),
};

constexpr std::span<const LawParameter> no_parameters{};

constexpr std::array catalogue{
    LawEntry{"constant", LawClass::physical, "the same rate everywhere and at all rigidities", "nu = rate",
             constant_parameters, "nothing", "0", "common practice", "kappa still falls as v^2 below 1 GV"},
    LawEntry{"rigidity_power", LawClass::shape,
             "a power of the rigidity with smooth breaks, in all places alike",
             "S = beta^eta (R/R0)^-d0 prod_i { [1 + (R/R_i)^(1/w_i)]/[1 + (R0/R_i)^(1/w_i)] }^(-(d_i - "
             "d_(i-1)) w_i)",
             rigidity_power_parameters, "nothing", "slope, break_slope",
             "smooth breaks: Genolini et al. 2017, PRL 119, 241101; rate and slope near home: Hopkins et al. "
             "2022, MNRAS 516, 3470 (from memory)",
             "delta 0.3-0.7 fits the ratios of secondary nuclei"},
    LawEntry{"falling", LawClass::shape, "a fall with height, radius, or both",
             "S = exp(-s/length), (1 + s/length)^-slope, or exp(-(s/length)^stretch)", falling_parameters,
             "nothing", "0",
             "common practice; an extended scattering halo: Hopkins et al. 2022, MNRAS 516, 3470",
             "far out the mean free path exceeds s, and the flux limiter rules"},
    LawEntry{"plasma_power", LawClass::shape, "powers of what the plasma is like in each place",
             "S = (B/B0)^a (n_i/n0)^b (u_t/u0)^c (L/L0)^d (T/T0)^e", plasma_power_parameters,
             "what has an exponent other than 0", "0", "parametrisation of this program",
             "the profile of the rate is that of the media"},
    LawEntry{"slab_turbulence", LawClass::physical,
             "gyroresonance with waves along the field, of a turbulent spectrum from a large outer scale",
             "nu = c Omega (q - 1) (dB/B)^2 (r_g/L)^(q-1)", slab_parameters,
             "field; ordered and random field; turbulent scale", "2 - q",
             "Jokipii 1966, ApJ 146, 480; Kulsrud & Pearce 1969, ApJ 156, 445",
             "quasi-linear, r_g < L; with dB = B as it stands 50-1000 times the rate near home: real "
             "turbulence is not made of such waves"},
    LawEntry{"anisotropic_alfvenic", LawClass::physical,
             "Alfven waves of critically balanced turbulence: eddies long along the field hardly resonate",
             "nu = v^2 ln(l_A/r_g)/(3 c_A c l_A), kappa = c_A c l_A/ln(l_A/r_g); the logarithm >= 1",
             anisotropic_parameters, "field; Alfven speed, turbulent speed and scale", "about 0",
             "Goldreich & Sridhar 1995, ApJ 438, 763; Chandran 2000, PRL 85, 4656; coefficient: Hopkins et "
             "al. 2021, MNRAS 501, 4184 (from memory)",
             "nearly the same at all rigidities, unlike what nuclei near home show; for u_t < v_A the scale "
             "l_A is formal and larger than L"},
    LawEntry{
        "fast_modes", LawClass::physical,
        "gyroresonance with isotropic compressible turbulence, down to a length where it is damped",
        "nu = c Omega (q - 1) (dB/B)^2 (r_g/L)^(q-1) exp(-(l_d/r_g)^m)", fast_mode_parameters,
        "field; ordered and random field; turbulent scale", "2 - q, then none below the cut",
        "Yan & Lazarian 2004, ApJ 614, 757; 2008, ApJ 673, 942; the form of the cut is of this program",
        "the length of damping is the user's; hot halos damp strongly. Transit-time damping is left out"},
    LawEntry{
        "self_confinement", LawClass::physical,
        "cosmic rays scatter on the waves that their own streaming makes, as far as these are not damped",
        "nu = c Omega F, G_lin F + G_cascade F^(3/2) + G_landau F^2 = v_A |dP/ds|/(2 U_B), P = dP/dlnp",
        self_confinement_parameters,
        "field, Alfven speed; of the damping chosen: neutral gas, temperature, turbulent speed and scale",
        "a - 3 for f ~ p^-a with linear damping, 1.2 turbulent, 0.8-0.85 nonlinear (a = 4.7)",
        "Skilling 1975, MNRAS 173, 255; ion-neutral: Kulsrud & Pearce 1969, ApJ 156, 445; turbulent: Farmer "
        "& Goldreich 2004, ApJ 604, 671, Lazarian 2016, ApJ 833, 131; nonlinear_cascade: Ptuskin & "
        "Zirakashvili 2003, A&A 403, 1; nonlinear_landau: Kulsrud 2005 (from memory)",
        "depends on the cosmic rays; 10-1000 times the rate near home as it stands; steady states may be "
        "unstable (Hopkins et al. 2022, MNRAS 517, 5413); the two nonlinear rates exclude each other in the "
        "literature"},
    LawEntry{
        "patchy", LawClass::physical,
        "rare strong scatterers of many sizes, each turning particles whose gyroradius is below its size",
        "nu = v (f0/(d l_0)) [(max(r_g, l_least)/l_0)^-d - (l_greatest/l_0)^-d]", patchy_parameters, "field",
        "slope", "Butsky et al. 2024, MNRAS 528, 4245; Lemoine 2023, JPP 89, 175890501",
        "needs a mean free path well below the cells"},
    LawEntry{"dust", LawClass::shape, "waves driven by or tied to dust, parametrised",
             "S = ((n_i + n_n)/n0)^a (B/B0)^b (R/R0)^-delta", dust_parameters, "ions, neutral gas; field",
             "slope", "parametrisation of this program, after Squire et al. 2021, MNRAS 502, 2630",
             "dust is taken to follow the gas"},
    LawEntry{"formula", LawClass::physical, "a formula of the user", "what `expression` says",
             formula_parameters, "what the formula names", "of the formula", "the user",
             "slower than a law of the list"},
    LawEntry{"table", LawClass::physical, "rates at nodes of R, |z| and rigidity",
             "ln nu linear in R, |z| and ln rigidity; the value of the edge outside", table_parameters,
             "nothing", "of the table", "the user",
             "no beta: electrons and protons of one rigidity have one rate"},
    LawEntry{"sum", LawClass::combined, "several mechanisms at once", "nu = nu_1 + nu_2 + ...", no_parameters,
             "of its laws", "of its laws", "independent scatterings add",
             "a factor that anchors it scales all alike"},
    LawEntry{"maximum", LawClass::combined, "the strongest of several mechanisms",
             "nu = max(nu_1, nu_2, ...)", no_parameters, "of its laws", "of its laws", "common practice",
             "has kinks in space and rigidity"},
};

constexpr std::array variables{
    FormulaVariable{"R", "distance from the axis, kpc"},
    FormulaVariable{"z", "height above the plane, kpc, with its sign"},
    FormulaVariable{"r", "distance from the centre, kpc"},
    FormulaVariable{"rigidity", "p c/(Z e), GV"},
    FormulaVariable{"beta", "speed over c"},
    FormulaVariable{"B", "whole field, uG"},
    FormulaVariable{"B_ordered", "ordered field, uG"},
    FormulaVariable{"n_i", "ions (H+), cm-3"},
    FormulaVariable{"n_n", "neutral gas (H nuclei), cm-3"},
    FormulaVariable{"T", "temperature of the ionised gas, K"},
    FormulaVariable{"v_A", "Alfven speed of the ions, km s-1"},
    FormulaVariable{"u_t", "turbulent speed, km s-1"},
    FormulaVariable{"L_t", "outer scale of the turbulence, kpc"},
    FormulaVariable{"r_g", "gyroradius, kpc"},
    FormulaVariable{"Omega", "v/r_g, gyrofrequency with the Lorentz factor in it, rad s-1"},
    FormulaVariable{"P_res", "dP/dlnp of the cosmic rays at this momentum, eV cm-3"},
    FormulaVariable{"dP_res", "size of its gradient along the field, eV cm-3 kpc-1"},
};

std::size_t edits(std::string_view a, std::string_view b) {
    std::vector<std::size_t> row(b.size() + 1);
    std::iota(row.begin(), row.end(), std::size_t{0});
    for (std::size_t i = 1; i <= a.size(); ++i) {
        std::size_t diagonal = row[0];
        row[0] = i;
        for (std::size_t j = 1; j <= b.size(); ++j) {
            const std::size_t replaced = diagonal + (a[i - 1] == b[j - 1] ? 0U : 1U);
            diagonal = row[j];
            row[j] = std::min({replaced, row[j] + 1, row[j - 1] + 1});
        }
    }
    return row[b.size()];
}

} // namespace

std::span<const LawEntry> law_catalogue() {
    return catalogue;
}

std::span<const FormulaVariable> formula_variables() {
    return variables;
}

const LawEntry& find_law(std::string_view name) {
    std::vector<std::string_view> names;
    for (const LawEntry& entry : catalogue) {
        if (entry.name == name) {
            return entry;
        }
        names.push_back(entry.name);
    }
    throw Error(ErrorKind::scenario, fmt::format("found no scattering law '{}', the nearest is '{}'", name,
                                                 nearest_word(name, names)));
}

const LawParameter* find_parameter(const LawEntry& law, std::string_view name) {
    const auto found = std::find_if(law.parameters.begin(), law.parameters.end(),
                                    [&](const LawParameter& parameter) { return parameter.name == name; });
    return found == law.parameters.end() ? nullptr : &*found;
}

std::string_view nearest_word(std::string_view word, std::span<const std::string_view> candidates) {
    const auto nearest =
        std::min_element(candidates.begin(), candidates.end(), [&](std::string_view a, std::string_view b) {
            return edits(word, a) < edits(word, b);
        });
    return nearest == candidates.end() ? std::string_view{} : *nearest;
}

} // namespace aureole::transport
