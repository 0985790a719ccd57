#!/usr/bin/python3
"""The program against an independent NumPy pipeline on the same grid file: compare.py AUREOLE SOURCE_DIR.

Luminosities of every process, fluxes and maps of a small galaxy, seen at inclination 85 deg with and without a turn by 30 deg.
What may differ is the oracle's error, which its documentation names:
- electrons and protons: straight lines through E^2.75 N between 48 nodes, 7 to the decade, second order: 0.3 %, near the pion peak
  and thresholds 1 %; the trapezium of synchrotron radiation is good to 0.1 % on smooth spectra;
- bremsstrahlung: relativistic formulae, neither mass terms nor the electron-electron correction at low energies: 1.5 %;
- sight lines: one ray per pixel centre in steps of half the smallest cell, here FINER rays along each side of our pixels: 0.4 % of a
  flux, 1 % of a map (L1; at azimuth 0 the rays run along the cells and fall together on the same side of their faces, else 0.3 %).
The pion model is the published one without joining, which is what the oracle computes."""
import pathlib
import subprocess
import sys
import tempfile
import unittest

import numpy as np
from astropy.io import fits
from astropy.table import Table

PROGRAM, SOURCE = pathlib.Path(sys.argv[1]).resolve(), pathlib.Path(sys.argv[2]).resolve()
sys.path.insert(0, str(SOURCE / "tests" / "bench"))
sys.dont_write_bytecode = True
import make_grid  # noqa: E402

FREQUENCIES, ENERGIES = [1.5e8, 1.4e9, 1e10], [0.1, 1.0, 30.0]  # Hz, GeV
PIXELS, PIXEL_KPC, DISTANCE_KPC, FINER = 96, 0.5, 10000.0, 4
KPC = 3.0856775814913673e21

SCENARIO = """
input.grid = "g.fits"
emission.pion_model = "kafexhiu_2014"
[radiation.component.dust]
temperature = "40 K"
profile = "constant"
value = "0.3 eV cm-3"
[radio]
frequencies = ["150 MHz", "1.4 GHz", "10 GHz"]
unit = "MJy/sr"
[gamma]
energies = ["0.1 GeV", "1 GeV", "30 GeV"]
[view]
inclination = "85 deg"
azimuth = "AZIMUTH deg"
distance = "10 Mpc"
[map]
pixel = "PIXEL rad"
width = "WIDTH rad"
height = "WIDTH rad"
tolerance = 2e-4
separate = true
spectral_index = false
[heights]
strips = 1
models = ["exponential"]
inclination = "naive"
[accuracy]
estimate = false
"""


def ours(folder, azimuth):
    pixel = PIXEL_KPC / DISTANCE_KPC
    text = SCENARIO.replace("AZIMUTH", str(azimuth)).replace("PIXEL", repr(pixel)).replace("WIDTH", repr(pixel * PIXELS * (1 - 1e-9)))
    (folder / "s.toml").write_text(text)
    out = folder / f"out{azimuth}"
    done = subprocess.run([PROGRAM, "predict", folder / "s.toml", "-o", out, "--threads", "1"], capture_output=True, text=True, timeout=100)
    if done.returncode != 0:
        raise RuntimeError(done.stderr)
    luminosity = {}
    for row in Table.read(out / "tables" / "channels.ecsv", format="ascii.ecsv"):
        luminosity.setdefault((row["band"], row["process"]), []).append(row["luminosity"])
    radio = [fits.getdata(p)[0] for p in (out / "maps" / f"radio_{n}.fits" for n in ("150MHz", "1.4GHz", "10GHz"))]
    gamma = np.array(fits.getdata(out / "maps" / "gamma.fits"), float)
    parts = sum(np.array(fits.getdata(p), float) for p in sorted((out / "maps").glob("gamma_*.fits")))
    return {k: np.array(v) for k, v in luminosity.items()}, np.array(radio, float), gamma, parts


def oracle(folder, azimuth):
    path = folder / f"oracle{azimuth}.npz"
    subprocess.run(["/usr/bin/python3", SOURCE / "tests" / "oracle" / "numpy_pipeline.py", folder / "g.fits", path, "--frequencies",
                    *map(str, FREQUENCIES), "--energies", *map(str, ENERGIES), "--radiation", "2.7255", "40:0.3", "--inclination", "85",
                    "--azimuth", str(azimuth), "--distance", str(DISTANCE_KPC), "--pixels", str(PIXELS * FINER), "--pixel-size", str(PIXEL_KPC / FINER),
                    "--step", "0.5"], check=True, capture_output=True, timeout=100)
    result = dict(np.load(path))
    for band in ("radio", "gamma"):
        result[band] = result[band].reshape(-1, PIXELS, FINER, PIXELS, FINER).mean((2, 4))
    return result


class Compare(unittest.TestCase):
    @classmethod
    def setUpClass(cls):
        cls.folder = tempfile.TemporaryDirectory()
        cls.addClassCleanup(cls.folder.cleanup)
        place = pathlib.Path(cls.folder.name)
        make_grid.main(str(place / "g.fits"), 24, 48)
        cls.pairs = {azimuth: (ours(place, azimuth), oracle(place, azimuth)) for azimuth in (0, 30)}

    def check(self, name, ours, theirs, tolerance):
        ratio = np.asarray(ours) / np.asarray(theirs)
        print(f"{name:32} {' '.join(f'{r:.5f}' for r in np.atleast_1d(ratio))}  within {tolerance}")
        self.assertLess(np.abs(ratio - 1).max(), tolerance, name)

    def test_luminosities_of_every_process_agree(self):
        for azimuth, ((luminosity, _, _, _), npz) in self.pairs.items():
            self.check(f"synchrotron, azimuth {azimuth}", luminosity["radio", "total"], npz["luminosity_radio"], 0.001)
        per_gev = 1e3
        for process, name, tolerance in (("inverse_compton:cmb", "inverse_compton:2.7255", 0.003),
                                         ("inverse_compton:dust", "inverse_compton:40", 0.003), ("pion_decay", "pion_decay", 0.01)):
            self.check(process, luminosity["gamma", process], per_gev * npz["luminosity_" + name], tolerance)
        self.check("bremsstrahlung, neutral", luminosity["gamma", "bremsstrahlung:hi"] + luminosity["gamma", "bremsstrahlung:h2"],
                   per_gev * npz["luminosity_bremsstrahlung:neutral"], 0.015)
        self.check("bremsstrahlung, ionised", luminosity["gamma", "bremsstrahlung:hii"],
                   per_gev * npz["luminosity_bremsstrahlung:ionised"], 0.015)
        self.check("gamma, total", luminosity["gamma", "total"],
                   per_gev * sum(v for k, v in npz.items() if k.startswith("luminosity_") and k != "luminosity_radio"), 0.01)

    def test_maps_of_the_processes_add_up_to_the_total(self):
        for (_, _, gamma, parts), _ in self.pairs.values():
            self.assertLess((np.abs(parts - gamma).max((1, 2)) / gamma.max((1, 2))).max(), 1e-5)

    def test_fluxes_and_maps_agree(self):
        for azimuth, ((_, radio, gamma, _), npz) in self.pairs.items():
            for name, mine, other, unit in (("radio", radio, npz["radio"], 1e-17), ("gamma", gamma, npz["gamma"], 1)):
                other = other / unit
                self.check(f"{name} flux, azimuth {azimuth}", mine.sum((1, 2)), other.sum((1, 2)), 0.006)
                # The pattern of the map, without the difference in flux.
                other = other * (mine.sum((1, 2)) / other.sum((1, 2)))[:, None, None]
                distance = np.abs(mine - other).sum((1, 2)) / mine.sum((1, 2))
                mirrored = np.abs(mine - other[:, :, ::-1]).sum((1, 2)) / mine.sum((1, 2))
                print(f"{name} maps, azimuth {azimuth}: L1 {distance}, mirrored {mirrored}")
                self.assertLess(distance.max(), 0.01 if azimuth == 0 else 0.003)
                if azimuth != 0:  # the galaxy is not the same on both sides, so that a mirrored map would be seen
                    self.assertGreater(mirrored.min(), 3 * distance.max())


if __name__ == "__main__":
    result = unittest.main(argv=sys.argv[:1], exit=False).result
    sys.exit(0 if result.wasSuccessful() and result.testsRun > 0 else 1)
