#include "aureole/scenario/starter.hpp"

#include <array>

namespace aureole::scenario {

namespace {

constexpr std::string_view edge_on_disc =
    R"toml(# An invented edge-on disc galaxy. It is nobody's data: its numbers are round ones of the size met in
# large spiral galaxies. Run it with
#   aureole predict edge_on_disc.toml -o results

[run]
title = "Radio and gamma-ray halo of an invented edge-on galaxy"
object = "INVENTED EDGE-ON"

# Rings and layers, finer near the plane. Both sides of the plane are alike, so only z >= 0 is stored.
[grid]
geometry = "RZ"
radius = "20 kpc"
height = "12 kpc"
cells_r = 60
cells_z = 80
smallest_z = "0.04 kpc"

# A spiral field along the disc and a random one; together 6.6 uG in the plane at R = 8 kpc.
[field.ordered]
profile = "double_exponential"
value = "6 uG"
radius = "15 kpc"
height = "4 kpc"
direction = "spiral"
pitch = "15 deg"

[field.random]
profile = "double_exponential"
value = "11 uG"
radius = "12 kpc"
height = "3 kpc"

# Hydrogen nuclei per cm3; about 1 in the plane at R = 8 kpc.
[gas.hi]
profile = "sech2"
value = "2.5 cm-3"
radius = "8 kpc"
height = "0.3 kpc"

[gas.h2]
profile = "sech2"
value = "3 cm-3"
radius = "3 kpc"
height = "0.12 kpc"

[gas.hii]
profile = "double_exponential"
value = "0.05 cm-3"
radius = "8 kpc"
height = "1.2 kpc"

# The microwave background is there by default; starlight and dust stream out of the disc.
[radiation.component.starlight]
temperature = "4500 K"
profile = "double_exponential"
value = "2 eV cm-3"
radius = "5 kpc"
height = "4 kpc"

[radiation.component.dust]
temperature = "35 K"
profile = "double_exponential"
value = "1 eV cm-3"
radius = "5 kpc"
height = "4 kpc"

# Electrons (with positrons) whose height shrinks with energy, as losses make it. At R = 8 kpc, 1 GeV, there are
# 9e-12 per cm3 and GeV, as many as near the Sun (Potgieter et al. 2015, ApJ 810, 141).
[electrons]
source = "closed_form"
spectrum = "broken_power_law"
norm = "3.5e-11 cm-3 GeV-1"
reference_energy = "1 GeV"
slope = 2.2
break_energy = "3 GeV"
slope_above = 3.1
break_smoothness = 0.7
cutoff_energy = "20 TeV"
height_slope = -0.2

[electrons.space]
profile = "double_exponential"
radius = "6 kpc"
height = "3 kpc"

# At R = 8 kpc, 10 GeV, about as many protons as near the Sun (Vos & Potgieter 2015, ApJ 815, 119).
[protons]
source = "closed_form"
norm = "1.5e-9 cm-3 GeV-1"
slope = 2.7

[protons.space]
profile = "double_exponential"
radius = "7 kpc"
height = "4 kpc"

[radio]
frequencies = ["144 MHz", "330 MHz", "790 MHz", "1.5 GHz", "3 GHz", "10 GHz"]
unit = "Jy/beam"
beam_major = "10 arcsec"

[gamma]
energies = ["100 MeV", "1 GeV", "10 GeV", "100 GeV"]

[view]
inclination = "88 deg"
position_angle = "270 deg"
distance = "10 Mpc"
distance_error = "0.8 Mpc"

[map]
pixel = "2.5 arcsec"
separate = true

[heights]
strips = 5
strip_width = "3 kpc"
from = "0 kpc"
to = "8 kpc"
models = ["exponential", "gaussian", "two_exponential"]
rms = ["300 uJy/beam", "150 uJy/beam", "60 uJy/beam", "30 uJy/beam", "20 uJy/beam", "12 uJy/beam"]
)toml";

constexpr std::string_view dwarf_wind =
    R"toml(# An invented dwarf galaxy with a strong wind: a small, bright disc, a tall halo of electrons carried out by the wind, and a
# field that opens into an X. It is nobody's data.
#   aureole predict dwarf_wind.toml -o results

[run]
title = "Halo of an invented dwarf galaxy with a wind"
object = "INVENTED DWARF"

[grid]
geometry = "RZ"
radius = "6 kpc"
height = "8 kpc"
cells_r = 48
cells_z = 72
smallest_z = "0.03 kpc"

[field.ordered]
profile = "double_exponential"
value = "4 uG"
radius = "3 kpc"
height = "3 kpc"
direction = "x_shaped"
pitch = "20 deg"
tilt = "65 deg"

[field.random]
profile = "double_exponential"
value = "12 uG"
radius = "1.5 kpc"
height = "2 kpc"

[gas.hi]
profile = "sech2"
value = "2 cm-3"
radius = "1.2 kpc"
height = "0.35 kpc"

[gas.hii]
profile = "double_exponential"
value = "0.1 cm-3"
radius = "1.5 kpc"
height = "0.8 kpc"

[radiation.component.starlight]
temperature = "7000 K"
profile = "double_exponential"
value = "3 eV cm-3"
radius = "1.5 kpc"
height = "1.5 kpc"

[radiation.component.dust]
temperature = "45 K"
profile = "double_exponential"
value = "2 eV cm-3"
radius = "1.5 kpc"
height = "1.5 kpc"

# A wind carries electrons of all energies at one speed: their height falls as the inverse of the loss time, steeply.
[electrons]
source = "closed_form"
spectrum = "power_law"
norm = "4e-11 cm-3 GeV-1"
slope = 2.6
cutoff_energy = "30 TeV"
height_slope = -0.35

[electrons.space]
profile = "double_exponential"
radius = "1.5 kpc"
height = "2 kpc"

[protons]
source = "closed_form"
norm = "2e-9 cm-3 GeV-1"
slope = 2.4

[protons.space]
profile = "double_exponential"
radius = "1.5 kpc"
height = "3 kpc"

[radio]
frequencies = ["150 MHz", "610 MHz", "1.4 GHz", "4.85 GHz"]
unit = "Jy/beam"
beam_major = "15 arcsec"

[gamma]
energies = ["100 MeV", "1 GeV", "10 GeV", "100 GeV", "1 TeV"]

[view]
inclination = "82 deg"
position_angle = "300 deg"
distance = "4 Mpc"
distance_error = "0.3 Mpc"

[map]
pixel = "4 arcsec"

[heights]
strips = 3
strip_width = "1.2 kpc"
to = "4 kpc"
models = ["exponential", "two_exponential"]
)toml";

constexpr std::string_view large_halo =
    R"toml(# An invented massive galaxy in a large gaseous halo: cosmic rays that reach 100 kpc meet thin hot gas and the microwave
# background. What shows is the faint gamma-ray and low-frequency radio halo. It is nobody's data.
#   aureole predict large_halo.toml -o results

[run]
title = "Large gaseous halo of an invented galaxy"
object = "INVENTED LARGE HALO"

[grid]
geometry = "RZ"
radius = "150 kpc"
height = "150 kpc"
cells_r = 96
cells_z = 96
smallest_r = "0.5 kpc"
smallest_z = "0.1 kpc"

[field.random]
profile = "beta"
value = "3 uG"
core = "8 kpc"
slope = 0.35

[gas.hi]
profile = "sech2"
value = "1 cm-3"
radius = "6 kpc"
height = "0.3 kpc"

# Hot halo gas: a beta model.
[gas.hii]
profile = "beta"
value = "3e-3 cm-3"
core = "5 kpc"
slope = 0.5

[radiation.component.starlight]
temperature = "4000 K"
profile = "power_law"
value = "1 eV cm-3"
core = "8 kpc"
slope = 2

[electrons]
source = "closed_form"
spectrum = "power_law"
norm = "1e-11 cm-3 GeV-1"
slope = 3.0
cutoff_energy = "1 TeV"

[electrons.space]
profile = "beta"
core = "6 kpc"
slope = 0.6

[protons]
source = "closed_form"
norm = "1.5e-9 cm-3 GeV-1"
slope = 2.6

[protons.space]
profile = "power_law"
core = "10 kpc"
slope = 1.5

[radio]
frequencies = ["54 MHz", "144 MHz", "330 MHz", "1.4 GHz"]
unit = "MJy/sr"
beam_major = "60 arcsec"

[gamma]
band_edges = ["100 MeV", "1 GeV", "10 GeV", "100 GeV"]

[view]
inclination = "75 deg"
position_angle = "270 deg"
distance = "20 Mpc"
distance_error = "2 Mpc"

[map]
pixel = "20 arcsec"

[heights]
strips = 3
strip_width = "12 kpc"
to = "60 kpc"
models = ["exponential", "two_exponential"]
)toml";

constexpr std::string_view scattering_laws =
    R"toml(# An invented edge-on disc galaxy whose cosmic rays are not given but solved for: sources in the disc, transport with losses,
# secondary electrons. Three scattering laws agree near R = 8 kpc in the plane at 1 GV and differ elsewhere; the maps and
# scale heights of each tell them apart. It is nobody's data.
#   aureole predict scattering_laws.toml -o results

[run]
title = "Halo of an invented edge-on galaxy under three scattering laws"
object = "INVENTED EDGE-ON"

# Rings and layers, finer near the plane. Spectra are solved for on the same cells.
[grid]
geometry = "RZ"
radius = "20 kpc"
height = "15 kpc"
cells_r = 48
cells_z = 64
smallest_z = "0.05 kpc"

[field.ordered]
profile = "double_exponential"
value = "6 uG"
radius = "15 kpc"
height = "4 kpc"
direction = "spiral"
pitch = "15 deg"

[field.random]
profile = "double_exponential"
value = "11 uG"
radius = "12 kpc"
height = "3 kpc"

# Gas slows particles down and is what they meet: bremsstrahlung, pions, secondary electrons.
[gas.hi]
profile = "sech2"
value = "2.5 cm-3"
radius = "8 kpc"
height = "0.3 kpc"

[gas.h2]
profile = "sech2"
value = "3 cm-3"
radius = "3 kpc"
height = "0.12 kpc"

[gas.hii]
profile = "double_exponential"
value = "0.05 cm-3"
radius = "8 kpc"
height = "1.2 kpc"

[gas.temperature]
profile = "constant"
value = "1e4 K"

# Light, for inverse-Compton losses and radiation; the microwave background is there by default.
[radiation.component.starlight]
temperature = "4500 K"
profile = "double_exponential"
value = "2 eV cm-3"
radius = "5 kpc"
height = "4 kpc"

[radiation.component.dust]
temperature = "35 K"
profile = "double_exponential"
value = "1 eV cm-3"
radius = "5 kpc"
height = "4 kpc"

# Spectra from 30 MeV to 100 TeV of kinetic energy. Beyond the edge of the grid the density is taken to fall as 1/r.
[transport]
energy_from = "30 MeV"
energy_to = "100 TeV"
bins_per_decade = 8
edge_z = "one_over_r"
edge_r = "one_over_r"
laws = ["everywhere_alike", "with_rigidity", "falling_with_height"]

# Supernova remnants: two in a hundred years, each giving a tenth of 1e51 erg to protons.
[transport.protons.source.remnants]
distribution = "exponential"
radius = "4 kpc"
height = "0.1 kpc"
supernova_rate = "0.02 yr-1"
fraction = 0.1
slope = 2.3
cutoff_rigidity = "3 PV"

# One electron for fifty protons at the same rigidity, 10 GV; fewer below 5 GV.
[transport.electrons.source.remnants]
distribution = "exponential"
radius = "4 kpc"
height = "0.1 kpc"
electron_share = 0.02
slope = 1.8
break_rigidity = "5 GV"
slope_above = 2.5
cutoff_rigidity = "30 TV"

# The same rate in all places and at all rigidities.
[law.everywhere_alike]
kind = "constant"
anchor = "rate"
anchor_rate = "1e-9 s-1"
anchor_radius = "8 kpc"
anchor_rigidity = "1 GV"

# A power of the rigidity, flatter above 300 GV.
[law.with_rigidity]
kind = "rigidity_power"
slope = 0.55
break_rigidity = ["300 GV"]
break_slope = [0.35]
break_width = [0.2]
anchor = "rate"
anchor_rate = "1e-9 s-1"
anchor_radius = "8 kpc"
anchor_rigidity = "1 GV"

# The same power without the break, times a fall with height: particles stream freely far from the plane.
[law.falling_with_height]
kind = "rigidity_power"
slope = 0.55
anchor = "rate"
anchor_rate = "1e-9 s-1"
anchor_radius = "8 kpc"
anchor_rigidity = "1 GV"

[law.falling_with_height.factor.height]
kind = "falling"
along = "height"
form = "exponential"
length = "3 kpc"

[radio]
frequencies = ["144 MHz", "330 MHz", "1.5 GHz", "6 GHz"]
unit = "Jy/beam"
beam_major = "10 arcsec"

[gamma]
energies = ["100 MeV", "1 GeV", "10 GeV", "100 GeV"]

[view]
inclination = "90 deg"
position_angle = "270 deg"
distance = "10 Mpc"
distance_error = "0.8 Mpc"

[map]
pixel = "2.5 arcsec"

[heights]
strips = 3
strip_width = "4 kpc"
to = "8 kpc"
models = ["exponential", "two_exponential"]
)toml";

constexpr std::array<Starter, 4> table{{
    {"edge_on_disc", "edge-on disc galaxy seen at six radio frequencies and in gamma rays", edge_on_disc},
    {"dwarf_wind", "dwarf galaxy with a strong wind and an X-shaped field", dwarf_wind},
    {"large_halo", "massive galaxy in a large gaseous halo", large_halo},
    {"scattering_laws", "edge-on galaxy whose cosmic rays are solved for under three scattering laws",
     scattering_laws},
}};

} // namespace

std::span<const Starter> starters() {
    return table;
}

} // namespace aureole::scenario
