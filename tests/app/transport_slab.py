#!/usr/bin/python3
"""Heights of a slab with a closed form: transport_slab.py AUREOLE [--table].

A thin source of electrons p^-2.3, uniform diffusion D0 (p c/GeV)^delta, losses b0 (p c)^2 by synchrotron emission in a uniform field,
no edge within reach. Exact densities (Syrovatskii 1959, Sov. Astron. 3, 22) go through the same maps and fits as a grid file. In a
slab with closed sides the sum over all radii follows the equation of the slab whatever the sources do with radius."""
import json
import pathlib
import subprocess
import sys
import tempfile

import numpy as np
from astropy.io import fits
from astropy.table import Table

PROGRAM = pathlib.Path(sys.argv[1]).resolve()
KPC, C, GEV, MC2, SIGMA_T = 3.0856775814913673e21, 2.99792458e10, 1.602176634e-3, 8.1871057769e-7, 6.6524587321e-25
FIELD = 6e-6  # G
B0 = 4 / 3 * SIGMA_T * C * FIELD ** 2 / (8 * np.pi) / MC2 ** 2 * GEV  # GeV-1 s-1, of E^2 [GeV s-1]
D0 = 3e27
TOP = 25.0  # kpc
FREQUENCIES = np.array([0.2, 0.6, 1.8, 5.4])  # GHz

REST = f"""
[radiation]
cmb = false
[emission]
inverse_compton = false
[radio]
frequencies = [{', '.join(f'"{f} GHz"' for f in FREQUENCIES)}]
unit = "MJy/sr"
[view]
inclination = "90 deg"
distance = "10 Mpc"
[map]
pixel = "2 arcsec"
width = "50 arcsec"
height = "1000 arcsec"
spectral_index = false
[accuracy]
estimate = false
[heights]
strips = 1
strip_width = "2.4 kpc"
to = "6 kpc"
models = ["exponential"]
[protons]
source = "none"
[electrons]
source = "SOURCE"
"""


def solved(cells, bins, delta, more=""):
    return f"""
[grid]
radius = "1 kpc"
height = "{TOP} kpc"
cells_r = 2
cells_z = {cells}
smallest_z = "{2.4 / cells!r} kpc"
sectors = 4
[field.random]
profile = "constant"
value = "{FIELD!r} G"
[transport]
energy_from = "50 MeV"
energy_to = "300 GeV"
bins_per_decade = {bins}
edge_z = "free_escape"
edge_r = "closed"
limiter = "none"
[transport.electrons.source.disc]
radius = "20 kpc"
height = "1e-9 kpc"
slope = 2.3
cutoff_rigidity = "1e15 GV"
power = "1e38 erg s-1"
[law.even]
kind = "rigidity_power"
rate = "{C * C / (3 * D0)!r} s-1"
slope = {delta!r}
beta_power = 0
{more}""" + REST.replace("SOURCE", "transport")


def exact(z, energy, delta):
    """Density [z, energy] of a thin source; heights in kpc, energies in GeV."""
    x, w = np.polynomial.legendre.leggauss(64)
    u = 0.5 * (x + 1)
    # E0 = E/(1 - s^2): s runs from 0 (just injected) to 1 (injected at infinite energy); the root singularity at s = 0 is gone.
    s, w = u, 0.5 * w
    source_energy = energy[:, None] / (1 - s ** 2)
    spread = D0 / (B0 * (1 - delta)) * (energy[:, None] ** (delta - 1) - source_energy ** (delta - 1)) / KPC ** 2  # kpc2
    weight = source_energy ** -2.3 * energy[:, None] * 2 * s / (1 - s ** 2) ** 2 * w / np.sqrt(4 * np.pi * spread)
    density = np.einsum("es,zes->ze", weight, np.exp(-z[:, None, None] ** 2 / (4 * spread)))
    return density / (B0 * energy ** 2)


def write_exact(path, delta):
    edges = TOP * np.sinh(5 * np.linspace(0, 1, 401)) / np.sinh(5)
    points, weights = np.polynomial.legendre.leggauss(4)
    z = edges[:-1, None] + 0.5 * (points + 1) * np.diff(edges)[:, None]
    energy = np.geomspace(0.05, 1e3, 140)
    density = np.stack([exact(z[:, i], energy, delta) * weights[i] / 2 for i in range(4)]).sum(0)
    density *= 1e-9 / density.max()

    def hdu(name, data, unit, axes=None, dtype="f4", **cards):
        image = fits.ImageHDU(np.asarray(data, dtype), name=name)
        image.header.update({"BUNIT": unit, **({"AXES": axes} if axes else {}), **cards})
        return image
    primary = fits.PrimaryHDU()
    primary.header.update(FMTNAME="HALO-GRID", FMTVERS="1.0", GEOMETRY="RZ", ZMIRROR=True)
    fits.HDUList([primary, hdu("R_EDGES", [0, 0.5, 1], "kpc", dtype="f8"), hdu("Z_EDGES", edges, "kpc", dtype="f8"),
                  hdu("E_LEPTON", energy, "GeV", dtype="f8", EKIND="TOTAL"),
                  hdu("CR_ELECTRON", np.repeat(density[:, None, :], 2, 1), "cm-3 GeV-1", "E_LEPTON,R,Z"),
                  hdu("B_TURB", np.full((400, 2), FIELD * 1e6), "uG", "R,Z")]).writeto(path, overwrite=True, checksum=True)


def heights(folder, scenario):
    (folder / "slab.toml").write_text(scenario)
    done = subprocess.run([PROGRAM, "predict", folder / "slab.toml", "-o", folder / "results", "--force", "-q"], capture_output=True, text=True)
    if done.returncode != 0:
        raise SystemExit(f"transport_slab.py: {done.stderr}")
    table = Table.read(folder / "results" / "tables" / "heights.ecsv", format="ascii.ecsv")
    rows = table[(table["strip"] == -1) & (table["side"] == "both")]
    if len(rows) != len(FREQUENCIES):
        raise SystemExit(f"transport_slab.py: found {len(rows)} heights, expected {len(FREQUENCIES)}")
    rows.sort("frequency")
    return np.array(rows["h"])


def slope(h):
    return np.polyfit(np.log(FREQUENCIES), np.log(h), 1)[0]


def advected(cells, bins):
    """The slab with a wind that outruns diffusion: N = E^-2.3 (1 - b0 E |z|/V)^0.3, a function of E |z| but for its amplitude."""
    text = solved(cells, bins, 0.0, '[transport.wind]\nkind = "constant"\nspeed = "30 km s-1"\nbase = "0 kpc"\n')
    return text.replace(f'"{C * C / (3 * D0)!r} s-1"', f'"{C * C / (3 * D0) * 100!r} s-1"').replace('"6 kpc"', '"20 kpc"')


def main():
    failures = []

    def expect(good, what):
        print(("ok    " if good else "WRONG ") + what)
        if not good:
            failures.append(what)
    with tempfile.TemporaryDirectory() as name:
        folder = pathlib.Path(name)
        for delta in (0.5, 0.0):
            write_exact(folder / "exact.fits", delta)
            truth = heights(folder, 'input.grid = "exact.fits"\n' + REST.replace("SOURCE", "file"))
            print(f"delta {delta}: exact heights " + " ".join(f"{h:.4f}" for h in truth) + " kpc")
            expect(abs(slope(truth) + (1 - delta) / 4) < 2e-3, f"exponent of the exact heights {slope(truth):.4f}, expected {-(1 - delta) / 4}")
            before = None
            for cells, bins, allowed in ((16, 4, 0.03), (32, 8, 0.01), (64, 16, 0.003), (128, 32, 0.001)):
                found = heights(folder, solved(cells, bins, delta))
                error = found / truth - 1
                expect(np.abs(error).max() < allowed, f"{cells:4d} layers, {bins:2d} bins per decade: heights "
                       + " ".join(f"{100 * e:+.3f}" for e in error) + f" %, expected within {100 * allowed:g} %; exponent {slope(found):.4f}")
                # Second order halves the cells to a quarter of the error; the last rows also hold the error of maps and fits.
                if before is not None:
                    gain = np.abs(before).max() / np.abs(error).max()
                    expect(2.3 < gain < 6, f"     {gain:.2f} times less than in the row before, expected 2.3 to 6")
                before = error
        found = heights(folder, advected(64, 16))
        expect(abs(slope(found) + 0.5) < 0.02, "wind: heights " + " ".join(f"{h:.3f}" for h in found) + f" kpc, exponent {slope(found):.4f}, expected -0.5")
    return 0 if not failures else 1


if __name__ == "__main__":
    sys.exit(main())
