#pragma once

#include <optional>
#include <span>

namespace aureole::transport {

/// What scattering laws ask about one place: a cell or a face. CGS. A medium that the scenario does not give
/// stays empty; the laws that need it then say so. `height` is signed, laws use its size.
struct Place {
    double radius = 0;                     ///< R, from the axis, cm
    double height = 0;                     ///< z, cm
    std::optional<double> field;           ///< |B|, ordered and random, G
    std::optional<double> ordered_field;   ///< |B| of the ordered part alone, G
    std::optional<double> ion_density;     ///< H+ nuclei, cm-3
    std::optional<double> neutral_density; ///< H nuclei in atoms and molecules, cm-3
    std::optional<double> temperature;     ///< of the ionised gas, K
    std::optional<double> alfven_speed;    ///< of the ions, cm s-1; see alfven_speed()
    std::optional<double> turbulent_speed; ///< at the outer scale, cm s-1
    std::optional<double> turbulent_scale; ///< outer scale, cm
};

/// Cosmic rays in resonance with the waves that a particle of one momentum makes, at every place: a law that
/// depends on them is not linear. Empty where nothing is known yet.
struct ResonantPressure {
    std::span<const double> pressure; ///< dP/dlnp = (4 pi/3) p^4 v f, erg cm-3
    std::span<const double> gradient; ///< its derivative along the field, erg cm-4; the sign does not matter
};

/// Alfven speed of waves that the ions alone carry [cm s-1], B/sqrt(4 pi n_i m_p (1 + 4 y)).
/// field           G, >= 0.    ion_density  H+ nuclei, cm-3, > 0.    helium_fraction  He+ ions per H+
/// Valid           resonant waves of cosmic rays below 1 PV: their frequency is far above that of ion-neutral
///                 collisions, so the neutral gas stays behind
/// Source          Alfven 1942, Nature 150, 405; ions only: Kulsrud & Pearce 1969, ApJ 156, 445
double alfven_speed(double field, double ion_density, double helium_fraction);

} // namespace aureole::transport
