#pragma once

#include "aureole/maps/image.hpp"
#include "aureole/profiles/geometry.hpp"

#include <optional>
#include <string>
#include <vector>

namespace aureole::profiles {

/// How an inclined disc j = exp(-R/hR) f(z), cut at R_max, spreads over heights. With the tilt Y = y' cos i +
/// z sin i the mean intensity of a strip is  I(Y) = 1/(sin i) * integral c(y) f((Y - y)/sin i) dy * (edge-on
/// intensity scale),  c(y) the thin disc's strip mean <exp(-sqrt(X^2 + (y/cos i)^2)/hR)> scaled to unit
/// integral. So a forward model is a sum of shifted edge-on models with h -> h sin i, and the amplitude w0 is
/// the one the strip would show edge-on. An empty kernel is edge-on.
struct DiscKernel {
    double sin_inclination = 1;
    std::vector<double> offset, weight; ///< cm; sum of weights 1
    bool operator==(const DiscKernel&) const = default;
};

struct DiscSpec {
    std::optional<double> scale_length; ///< cm; empty: fitted to the strip fluxes along the major axis
    std::optional<double> edge_radius;  ///< cm; where the disc ends; empty: it does not
};

/// Kernel of the strip [x_low, x_high] (cm), the strip's edges blurred with a Gaussian of width beam_x.
/// finest   cm; the smallest length the profile shows (beam, bin or height); sets the spacing of the nodes
/// Valid    0 < inclination <= pi/2; Throws Error(scenario) below 0.1 rad (no vertical information left).
DiscKernel disc_kernel(double inclination,
                       double scale_length,
                       std::optional<double> edge_radius,
                       double x_low,
                       double x_high,
                       double beam_x,
                       double finest);

struct ScaleLength {
    double length = 0, error = 0; ///< cm; error from the scatter about the fit
    std::string problem;          ///< empty if the fit is good
};

/// Scale length from the flux of columns across the disc against X: the height integral of an inclined disc
/// does not depend on the inclination, F(X) ~ integral exp(-sqrt(X^2 + y^2)/hR) dy = 2 |X| K1(|X|/hR),
/// blurred by column and beam. Columns as wide as a bin is high, over the strips and the range of the spec.
/// Source  van der Kruit & Searle 1981, A&A 95, 105 (edge-on intensity).
ScaleLength
fit_scale_length(const maps::Image& image, const ProfileSpec& spec, std::optional<double> edge_radius);

} // namespace aureole::profiles
