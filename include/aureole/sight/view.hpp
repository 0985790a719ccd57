#pragma once

#include <array>

namespace aureole::sight {

using Vec3 = std::array<double, 3>;

enum class Projection { orthographic, perspective };

/// How the observer outside sees the galaxy. Galaxy frame (x, y, z) is right-handed, z the rotation axis.
/// Inclination 0 is face-on with +z towards the observer, 90 deg edge-on. Position angle: of the galaxy's +x
/// axis after the azimuth turn, North through East. All angles rad, distance cm.
struct View {
    double inclination = 0, position_angle = 0, azimuth = 0, distance = 0;
    Projection projection = Projection::orthographic;
};

/// Galaxy-frame vector -> (X, Y, s): X along the projected major axis, Y along position angle + 90 deg, s
/// depth growing away from the observer. x' = x cos phi0 - y sin phi0, y' = x sin phi0 + y cos phi0; X = x',
/// Y = y' cos i + z sin i, s = y' sin i - z cos i.
Vec3 to_view(const View& view, const Vec3& galaxy);
/// Inverse of to_view.
Vec3 to_galaxy(const View& view, const Vec3& seen);

/// (X, Y) -> (East, North):  E = X sin PA + Y cos PA,  N = X cos PA - Y sin PA.
std::array<double, 2> to_sky(const View& view, double x, double y);
/// Inverse of to_sky.
std::array<double, 2> from_sky(const View& view, double east, double north);

} // namespace aureole::sight
