#pragma once

#include "curves.hpp"

#include "aureole/profiles/fit.hpp"

namespace aureole::profiles {

/// fit_height with curves shared between fits. `start`: a usable fit of the same model to nearly the same
/// profile, tried as the only start, without the scatter (h_err_scatter = h_err_noise); if that does not
/// settle, the fit is done as without it. Null: none.
HeightResult fit_height(
    const Profile& profile, Model model, const FitSpec& spec, CurveCache& cache, const HeightResult* start);

} // namespace aureole::profiles
