#pragma once

#include "aureole/base/pool.hpp"
#include "aureole/scenario/formula.hpp"
#include "aureole/transport/law.hpp"

#include <memory>
#include <string>
#include <string_view>
#include <vector>

namespace aureole::transport {

/// beta^beta_power (R/reference)^-slope with smooth breaks, 1 at the reference for beta = 1.
struct RigidityShape {
    double reference = 1; ///< statvolt
    double slope = 0;
    double beta_power = 0;
    std::vector<double> break_rigidity, break_slope, break_width;
};

/// How a term depends on a place and a particle at once; x R stands for rigidity [statvolt], A for the
/// amplitude times what the particle alone gives.
enum class TermForm {
    product,     ///< A
    cut,         ///< A exp(-exp(sharpness (second - ln R)))
    logarithm,   ///< A max(1, second - ln R)
    patches,     ///< A max(0, min(second R^-slope, lower) - upper)
    equilibrium, ///< A F of the balance of waves
    table,       ///< A exp(interpolated)
    formula,     ///< A times the value, converted
    sum,         ///< A sum of the parts
    maximum,     ///< A greatest part
};

enum class FormulaGives {
    rate,
    parallel_diffusion,
    isotropic_diffusion,
    isotropic_third,
    mean_free_path,
    factor
};

/// A law, or factor of one, with the places worked in. Vectors are [places] unless a comment says otherwise.
struct PreparedTerm {
    std::string name;
    TermForm form = TermForm::product;
    std::vector<double> amplitude;
    double speed_power = 0;    ///< A holds (cm s-1)^
    double rigidity_power = 0; ///< A holds (statvolt)^
    std::vector<RigidityShape> shapes;
    std::vector<PreparedTerm> parts; ///< summands of sum and maximum; of other forms factors

    std::vector<double> second;
    double sharpness = 1, slope = 1, lower = 0, upper = 0;

    /// Equilibrium: growth = growth x gradient; damping at R = 1 statvolt.
    std::vector<double> growth, linear, turbulent, cascade, landau;

    std::vector<double> log_rigidity; ///< [nodes]
    std::vector<double> log_rate;     ///< [places][nodes]

    FormulaGives gives = FormulaGives::rate;
    std::vector<double> values; ///< [places][variables]; those of the particle are filled in later
    bool uses_pressure = false, uses_gradient = false;
    std::shared_ptr<Pool<scenario::Formula>> formulas; ///< locked inside, so shared by threads
};

/// Where the particle's own variables stand in formula_variables(). 3, 4: rigidity, beta.
inline constexpr std::size_t variable_rigidity = 3, variable_beta = 4, variable_field = 5,
                             variable_gyroradius = 13, variable_gyrofrequency = 14, variable_pressure = 15,
                             variable_gradient = 16;

std::vector<std::string> variable_names();

/// Whether an expression uses the variable.
bool mentions(std::string_view expression, std::string_view variable);

/// The words of a list with commas or blanks between.
std::vector<std::string_view> split_words(std::string_view text);

double gigavolt(); ///< statvolt

} // namespace aureole::transport
