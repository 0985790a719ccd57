#!/usr/bin/python3
"""Writes docs/published_ranges.md from runs of the starter scattering_laws and its variants: published_ranges.py AUREOLE FOLDER [--reuse] > docs/published_ranges.md.

FOLDER gets the results; with --reuse those that it has are read. Nothing is fitted: the table says where an invented galaxy lies beside published ranges."""
import pathlib
import subprocess
import sys

import numpy as np
from astropy.table import Table

PROGRAM, FOLDER = pathlib.Path(sys.argv[1]).resolve(), pathlib.Path(sys.argv[2])
SETTINGS = ["radio.frequencies=144 MHz, 1.4 GHz, 1.5 GHz, 3 GHz, 6 GHz", 'heights.models=["exponential"]', "accuracy.estimate=false"]
VARIANTS = [
    ("as it is", []),
    ("twice the field", ["field.ordered.value=12 uG", "field.random.value=22 uG"]),
    ("wind, 100 km/s at 5 kpc", ["transport.wind.kind=linear", "transport.wind.speed=100 km s-1"]),
    ("absorbing edges", ["transport.edge_z=free_escape", "transport.edge_r=free_escape"]),
    ("ten times the supernovae and the gas", ["transport.protons.source.remnants.supernova_rate=0.2 yr-1", "gas.hi.value=25 cm-3", "gas.h2.value=30 cm-3"]),
]
SUPERNOVAE_PER_MASS = 0.0101  # of 8-40 solar masses, Kroupa (2001) from 0.1 to 100 solar masses (tests/physics/star_formation_test.cpp)
SUN = 3.828e33  # erg s-1

TEXT = """# Beside published ranges

What the starter `scattering_laws` and variants of it predict, and what has been measured in edge-on and star-forming galaxies. The
galaxy is invented and nothing was tuned: the table shows that the predictions are of the right order, and how far one choice moves
them; it is no test of a law. Made by `python3 scripts/published_ranges.py build/aureole FOLDER > docs/published_ranges.md`.

All heights are **non-thermal**: those of an exponential fitted to all strips of the synchrotron maps, without the thermal emission that
measured total-intensity heights contain (it is thin, and its share grows with frequency).

| quantity | published | source |
|---|---|---|
| height at 6 GHz | 1.1 +- 0.3 kpc, mean and scatter of 13 edge-on galaxies | Krause et al. 2018, A&A 611, A72 |
| height at 1.5 GHz | 1.4 +- 0.7 kpc, the same | the same |
| height at 144 MHz over that at 3 GHz | 1.26 +- 0.16, 16 edge-on galaxies | survey abstract, reference not confirmed |
| log L(0.1-100 GeV)/L(8-1000 um) | -4.3 +- 0.1 (statistics) +- 0.2 (scatter) at 1 solar mass per year | Ackermann et al. 2012, ApJ 755, 164 |
| log L(0.1-100 GeV)/(nu L_nu at 1.4 GHz) | 1.7 +- 0.1 +- 0.2 | the same; that nu L_nu is meant: from memory |

The infrared luminosity is put in as {per_rate:.2e} erg/s per solar mass a year (Kennicutt 1998, times 0.79 for a Chabrier mass function),
the star formation as supernovae over {supernovae} per solar mass (8-40 solar masses, Kroupa 2001): {rate:.2f} solar masses a year in
the starter. Ours leave out the thermal radio emission, and of gamma rays all but pion decay. In the last variant the field stays as it
is, where that of a starburst is stronger. X is the grammage of protons of 10 GV at R = 8 kpc: the laws are anchored at a scattering rate there
and not at a grammage, and where X is small few protons are lost to pions, so that gamma rays lie below the infrared relation.

| galaxy | law | h(6 GHz) kpc | h(1.5 GHz) kpc | h(144 MHz)/h(3 GHz) | X(10 GV) g cm-2 | L(0.1-100 GeV) erg/s | log to L_IR | log to nu L_nu(1.4 GHz) |
|---|---|---|---|---|---|---|---|---|
"""


def run(name, settings):
    """Tables of laws and of their heights."""
    out = FOLDER / "".join(c if c.isalnum() else "_" for c in name)
    if "--reuse" not in sys.argv[3:] or not out.exists():
        predict(name, out, settings)
    return [Table.read(out / "tables" / table, format="ascii.ecsv") for table in ("laws.ecsv", "law_heights.ecsv")]


def predict(name, out, settings):
    scenario = FOLDER / "scattering_laws.toml"
    scenario.write_text(subprocess.run([PROGRAM, "scenario", "scattering_laws"], capture_output=True, text=True, check=True).stdout)
    sets = [word for setting in SETTINGS + settings for word in ("--set", setting)]
    done = subprocess.run([PROGRAM, "predict", scenario, "-o", out, "--force", "-q", *sets], capture_output=True, text=True)
    if done.returncode not in (0, 5):
        raise SystemExit(f"published_ranges.py: {name}: {done.stderr}")


def main():
    FOLDER.mkdir(parents=True, exist_ok=True)
    per_rate = SUN / (1.7e-10 * 0.79)
    print(TEXT.format(per_rate=per_rate, supernovae=SUPERNOVAE_PER_MASS, rate=0.02 / SUPERNOVAE_PER_MASS), end="")
    lines = []
    inside = {key: [] for key in ("6", "1.5", "ratio", "infrared", "radio")}
    for name, settings in VARIANTS:
        laws, heights = run(name, settings)
        for law in laws:
            def height(ghz):
                rows = heights[(heights["law"] == law["law"]) & (heights["strip"] == -1) & (heights["side"] == "both")]
                row = rows[np.argmin(np.abs(rows["frequency"] - 1e9 * ghz))]
                assert abs(row["frequency"] / (1e9 * ghz) - 1) < 1e-6 and row["status"] == "ok", row
                return row["h"]
            supernovae = 0.2 if "ten times" in name else 0.02
            infrared = np.log10(law["gamma_luminosity"] / (per_rate * supernovae / SUPERNOVAE_PER_MASS))
            radio = np.log10(law["gamma_luminosity"] / (law["radio_luminosity"] * law["radio_frequency"]))
            ratio = height(0.144) / height(3)
            lines.append(f"| {name} | `{law['law']}` | {height(6):.2f} | {height(1.5):.2f} | {ratio:.2f} | {law['grammage_10gv']:.2g} | {law['gamma_luminosity']:.2e} "
                         f"| {infrared:.2f} | {radio:.2f} |")
            for key, value, low, high in (("6", height(6), 0.8, 1.4), ("1.5", height(1.5), 0.7, 2.1), ("ratio", ratio, 1.10, 1.42),
                                          ("infrared", infrared, -4.5, -4.1), ("radio", radio, 1.5, 1.9)):
                inside[key].append(low <= value <= high)
    print("\n".join(lines))
    count = {key: f"{sum(values)} of {len(values)}" for key, values in inside.items()}
    print(f"\nWithin the scatter of the measured galaxies: {count['6']} heights at 6 GHz, {count['1.5']} at 1.5 GHz, {count['ratio']} ratios, "
          f"{count['infrared']} gamma-ray luminosities against the infrared, {count['radio']} against the radio.")


if __name__ == "__main__":
    main()
