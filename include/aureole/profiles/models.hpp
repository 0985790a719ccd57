#pragma once

#include "aureole/profiles/disc.hpp"

#include <cstddef>
#include <string>
#include <string_view>
#include <vector>

namespace aureole::profiles {

/// exponential w0 exp(-|z|/h), gaussian w0 exp(-z^2/h^2) (no factor 2), sech2 w0 sech^2(z/h), and sums of two
/// of a kind.
enum class Model { exponential, gaussian, sech2, two_exponential, two_gaussian };
std::string to_string(Model model);
/// Throws Error(scenario) naming the known models.
Model parse_model(std::string_view name);
std::size_t components(Model model);
/// The kind of each component.
Model kind(Model model);

/// One component of unit amplitude and its derivatives.
struct Shape {
    double value = 0;
    double by_ln_h = 0; ///< d value / d ln h
    double by_z = 0;    ///< d value / d z
};

/// Unit-amplitude component of height h, seen with a Gaussian of width s, at z. h > 0, s >= 0 (0: not
/// convolved).
///   exponential: W = [exp(s^2/2h^2 - |z|/h) erfc(u) + exp(-z^2/2s^2) erfcx(v)]/2, u, v = (s^2 -+ |z|
///   h)/(sqrt2 s h), and the first term as exp(-z^2/2s^2) erfcx(u) where u > 0;   gaussian: h/sqrt(2s^2 +
///   h^2) exp(-z^2/(2s^2 + h^2));   sech2: Gauss-Legendre quadrature.
/// Accuracy   1e-12 relative (exponential, gaussian), 1e-10 of the peak (sech2); derivatives 1e-8 of the
/// peak. Source     Dumke et al. 1995, A&A 302, 691; erfcx through the hazard function of the normal law.
Shape convolved(Model single, double h, double s, double z);

/// Mean of the above over [z - width/2, z + width/2]; width >= 0.
/// Source     integrals of the same expressions: F(z) = h {1 - 2 Phi(-z/s) - A + B} (exponential), h
/// sqrt(pi)/2 erf(z/sqrt(2s^2 + h^2)).
Shape bin_mean(Model single, double h, double s, double z, double width);

/// Mean over the bin of the component seen at an inclination: sum over the kernel of bin_mean at h sin i,
/// over sin i (see DiscKernel).
Shape bin_mean(Model single, double h, double s, double z, double width, const DiscKernel& disc);

} // namespace aureole::profiles
