#!/usr/bin/env python3
"""Runs the writer of docs/grid_file.md and looks at its file, and at spoilt ones, with `aureole inspect`.

Usage: grid_file_example.py PROGRAM docs/grid_file.md
"""
import gzip
import pathlib
import re
import subprocess
import sys
import tempfile
import unittest

import numpy as np
from astropy.io import fits

PROGRAM, PAGE = (pathlib.Path(argument).resolve() for argument in sys.argv[1:3])


def inspect(path):
    return subprocess.run([PROGRAM, "inspect", path], capture_output=True, text=True, check=False)


class GridFileExample(unittest.TestCase):
    @classmethod
    def setUpClass(cls):
        cls.folder = tempfile.TemporaryDirectory()
        cls.place = pathlib.Path(cls.folder.name)
        (program,) = re.findall(r"```python\n(.*?)```", PAGE.read_text(encoding="utf-8"), re.S)
        subprocess.run([sys.executable, "-c", program], cwd=cls.place, check=True)
        cls.halo = cls.place / "halo.fits"

    @classmethod
    def tearDownClass(cls):
        cls.folder.cleanup()

    def check(self, path, code, *parts):
        result = inspect(path)
        text = result.stdout + result.stderr
        self.assertEqual(result.returncode, code, text)
        for part in parts:
            self.assertIn(part, text)
        return text

    def spoilt(self, change):
        path = self.place / "spoilt.fits"
        with fits.open(self.halo) as hdus:
            hdus = fits.HDUList([hdu.copy() for hdu in hdus])
            change(hdus)
            hdus.writeto(path, overwrite=True, checksum=True)
        return path

    def test_the_example_is_accepted_with_its_contents(self):
        text = self.check(self.halo, 0, "HALO-GRID 1.0", "Cartesian", "CR_ELECTRON", "B_VECTOR", "no problems")
        self.assertNotIn("problem:", text)
        self.assertNotIn("warning:", text)
        total = float(re.search(r"CR_ELECTRON.*in all (\S+) erg", text).group(1))
        with fits.open(self.halo) as hdus:
            kpc = 3.0856775814913673e21
            widths = [np.diff(hdus[a + "_EDGES"].data) * kpc for a in "ZYX"]
            volume = widths[0][:, None, None] * widths[1][None, :, None] * widths[2][None, None, :]
            energy = hdus["E_LEPTON"].data
            cells = np.sum(volume[..., None] * hdus["CR_ELECTRON"].data, axis=(0, 1, 2), dtype=np.float64)
        expected = cells[0] * energy[0] ** 2.7 * (energy[0] ** -0.7 - energy[-1] ** -0.7) / 0.7 * 1.602176634e-3
        self.assertAlmostEqual(total / expected, 1, delta=1e-3)  # printed with four digits

    def test_every_problem_is_listed(self):
        def change(hdus):
            hdus["CR_ELECTRON"].header["AXES"] = "X,Y,Z,E_LEPTON"
            del hdus["B_VECTOR"].header["COMPS"]
        text = self.check(self.spoilt(change), 4, "CR_ELECTRON", "found 'X,Y,Z,E_LEPTON'", "COMPS: found none", "2 problems")
        self.assertEqual(text.count("problem: "), 2)

    def test_bad_values_are_named_with_their_cell(self):
        def change(hdus):
            hdus["CR_ELECTRON"].data[3, 2, 1, 0] = -1
            hdus["B_VECTOR"].data[0, 0, 0, 0] = np.nan
        self.check(self.spoilt(change), 4, "cell (X 2, Y 3, Z 4), energy node 1", "HDU B_VECTOR: cell (X 1, Y 1, Z 1)")

    def test_a_changed_bit_is_found(self):
        path = self.place / "bit.fits"
        content = bytearray(self.halo.read_bytes())
        content[-2880 * 50] ^= 1
        path.write_bytes(content)
        self.check(path, 4, "HDU B_VECTOR", "checksum")

    def test_a_file_cut_short_is_found(self):
        path = self.place / "short.fits"
        path.write_bytes(self.halo.read_bytes()[:-2880])
        self.check(path, 4, "short.fits", "cut short")

    def test_lossy_compression_is_refused_and_lossless_accepted(self):
        def with_gas(level):
            def change(hdus):
                gas = np.random.default_rng(1).random(hdus["B_VECTOR"].data.shape[:3], dtype=np.float32)
                hdus.append(fits.CompImageHDU(gas, name="GAS_HI", compression_type="GZIP_2", quantize_level=level))
                hdus[-1].header.update(BUNIT="cm-3", AXES="X,Y,Z")
            return change
        self.check(self.spoilt(with_gas(0)), 0, "compressed", "no problems")
        self.check(self.spoilt(with_gas(16)), 4, "GAS_HI", "lossy")

    def test_any_map_is_looked_at(self):
        path = self.place / "map [1].fits"
        image = np.arange(12.0, dtype=">f4").reshape(3, 4)
        image[0, 0] = np.nan
        hdu = fits.PrimaryHDU(image)
        hdu.header.update(BUNIT="Jy/beam", BMAJ=10 / 3600, BMIN=8 / 3600, BPA=30.0)
        hdu.writeto(path, checksum=True)
        self.check(path, 0, "4 x 3", "1 to 11 Jy/beam", "1 blank", "beam 10 x 8 arcsec")
        hdu.data[:] = np.nan
        hdu.writeto(path, checksum=True, overwrite=True)
        self.check(path, 4, "no finite value")
        hdu.data[:] = np.inf
        hdu.data[1] = 0
        hdu.writeto(path, checksum=True, overwrite=True)
        self.check(path, 4, "8 infinite values")

    def test_a_scenario_is_looked_at(self):
        path = self.place / "run.toml"
        path.write_text('input.grid = "halo.fits"\nradio.frequencies = ["1.4 GHz"]\nradio.unit = "K"\n')
        self.check(path, 0, "1.4 GHz", "HALO-GRID 1.0", "no problems")
        path.write_text('input.grid = "absent.fits"\n')
        self.check(path, 4, "absent.fits", "not found")
        path.write_text('view.inclinaton = "80 deg"\nview.distance = 3\n')
        self.check(path, 3, "run.toml:1", "view.inclination", "run.toml:2", "view.distance", "2 problems")

    def test_what_is_neither_is_refused(self):
        for name, content, part in (("zeros", b"\0" * 5000, "neither"), ("empty", b"", "neither")):
            path = self.place / name
            path.write_bytes(content)
            self.check(path, 4, name, part)
        self.check(self.place / "absent", 4, "not found")
        self.check(self.place, 4, "found a folder")
        path = self.place / "packed.fits.gz"
        path.write_bytes(gzip.compress(self.halo.read_bytes()))
        self.check(path, 0, "HALO-GRID 1.0", "no problems")
        path.write_bytes(gzip.compress(b"view.distance = 3"))
        self.check(path, 4, "packed.fits.gz")


if __name__ == "__main__":
    unittest.main(argv=sys.argv[:1])
