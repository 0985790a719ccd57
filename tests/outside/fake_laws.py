#!/usr/bin/python3
"""Writes an invented output folder of several scattering laws in the form `aureole predict` leaves it: fake_laws.py DIR.

All numbers are closed forms made up for tests of readers; nothing here comes from the program.
"""
import json
import pathlib
import sys

import numpy as np
from astropy.table import Table

import fake_results

LAWS = ("even", "steep", "far_reaching_and_long_named")
MAPS = ("radio", "gamma", "index")
# Shares of the injected power in percent, of two kinds of particles; each row adds up to 100.
SHARES = {"protons": {"ionisation": 4, "coulomb": 2, "pions": 14, "adiabatic": -10, "escape: top": 50, "escape: outer radius": 35,
                      "catastrophic": 0, "cooled below the lowest energy": 5},
          "electrons": {"synchrotron": 20, "inverse compton: cmb": 13, "inverse compton: starlight": 8, "bremsstrahlung: hi": 6,
                        "bremsstrahlung: h2": 1, "ionisation": 5, "coulomb": 2, "adiabatic": 0, "escape: top": 40,
                        "catastrophic": 0, "cooled below the lowest energy": 3, "something new": 2}}


def save(folder, name, columns, rows, units):
    table = Table(rows=rows, names=columns)
    for column, unit in units.items():
        table[column].unit = unit
    table.write(folder / "tables" / f"{name}.ecsv", delimiter=",")


def write_laws(folder, laws):
    at = ("1gv", "10gv", "100gv")
    columns = ["law", "anchor", "factor", "energy_density", "energy_density_error", "gamma_luminosity", "radio_luminosity",
               "radio_frequency", *(f"{q}_{r}" for q in ("grammage", "age", "residence") for r in at)]
    rows = [(law, "rate", 1.0, 0.4 / (i + 1), 0.02, 1e39 / 4 ** i, 1e28 / 2 ** i, 1.5e9,
             *(size * 10 ** (-0.5 * i * r) for size in (10.0, 100.0, 200.0) for r in range(3))) for i, law in enumerate(laws)]
    save(folder, "laws", columns, rows, {"energy_density": "eV cm-3", "gamma_luminosity": "erg s-1"})


def write_budgets(folder, laws):
    rows = []
    for law in laws:
        for kind, shares in SHARES.items():
            rows.append((law, kind, "injected", 1e40, 1.0))
            rows += [(law, kind, process, 1e38 * share, 0.01 * share) for process, share in shares.items()]
            rows.append((law, kind, "defect of the sum", 1e24, 1e-16))
    save(folder, "budgets", ["law", "particles", "process", "power", "share"], rows, {"power": "erg s-1"})


def write_profiles(folder, laws):
    rows = []
    for i, law in enumerate(laws):
        rows += [(law, "radius", r, 0.025, 0.3 / (i + 1) / np.hypot(1, r / 5)) for r in np.geomspace(0.2, 20, 24)]
        rows += [(law, "height", 8.0, z, 0.15 / (i + 1) / np.hypot(1, z / 3)) for z in np.linspace(-15, 15, 30)]
    save(folder, "pressure", ["law", "axis", "R", "z", "pressure"], rows, {"R": "kpc", "z": "kpc", "pressure": "eV cm-3"})
    rows = []
    for kind, size in (("protons", 1e-10), ("electrons", 3e-12)):
        for i, law in enumerate((*laws, f"Somebody et al. 2015, near the Sun, {kind}")):
            rows += [(law, kind, e, size * (e + 1) ** (-2.3 - 0.2 * i)) for e in np.geomspace(0.03, 1e5, 40)]
    save(folder, "local_spectra", ["law", "particles", "energy", "density"], rows, {"energy": "GeV", "density": "cm-3 GeV-1"})


def write_heights(folder, laws):
    columns = ["law", "map", "frequency", "strip", "model", "forward", "side", "component", "chosen", "h", "error_noise", "error_scatter",
               "error_distance", "error_numerical", "status"]
    rows = []
    for i, law in enumerate(laws):
        model, parts = ("two_exponential", 2) if i == 1 else ("exponential", 1)
        for frequency in fake_results.FREQUENCIES:
            for part in range(parts):
                h = (1.6 - 0.3 * i) * (1 + part) * (frequency / 1.4e9) ** -0.1
                rows.append((law, f"{frequency / 1e6:g} MHz", frequency, -1, model, False, "both", part, True, h, 0.01 * h, 0.02 * h,
                             0.08 * h, 0.015 * h, "ok"))
    save(folder, "law_heights", columns, rows, {"frequency": "Hz", "h": "kpc"})


def write(folder, laws=LAWS):
    """Writes the folder (must not exist), with a folder of one run for each law; of one law alone all in one folder."""
    folder = pathlib.Path(folder)
    if len(laws) == 1:
        fake_results.write(folder, without=MAPS)
    else:
        (folder / "tables").mkdir(parents=True)
        for law in laws:
            fake_results.write(folder / law, without=(*MAPS, "profiles"))
        write_heights(folder, laws)
        (folder / "summary.json").write_text(json.dumps({"title": "invented layers", "object": fake_results.NAME, "laws": [
            {"law": law, "folder": law, "factor": 1.0, "over_empirical": 1.0} for law in laws]}) + "\n")
    write_laws(folder, laws)
    write_budgets(folder, laws)
    write_profiles(folder, laws)


if __name__ == "__main__":
    if len(sys.argv) != 2:
        sys.exit(__doc__)
    write(sys.argv[1])
