#include "aureole/sight/orientation.hpp"

#include <cmath>

namespace aureole::sight {

emission::Orientation orientation(const View& view) {
    emission::Orientation result;
    result.right = to_galaxy(view, {1, 0, 0});
    result.up = to_galaxy(view, {0, 1, 0});
    result.towards = to_galaxy(view, {0, 0, -1});
    result.cos_double_angle = std::cos(2 * view.position_angle);
    result.sin_double_angle = std::sin(2 * view.position_angle);
    if (view.projection == Projection::perspective) {
        result.observer = to_galaxy(view, {0, 0, -view.distance});
    }
    return result;
}

} // namespace aureole::sight
