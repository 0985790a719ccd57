#!/usr/bin/env python3
"""Checks `aureole heights` on maps as telescopes leave them, made here with astropy and numpy: heights_cli.py PROGRAM."""
import json
import pathlib
import subprocess
import sys
import tempfile
import unittest

import numpy as np
from astropy.io import fits
from astropy.table import Table
from astropy.wcs import WCS

PROGRAM = ""
ARCSEC = 1 / 3600
KPC = 1 / (1e4 * np.pi / 180)  # deg, at 10 Mpc
CENTRE = (150.1, 32.3)
POSITION_ANGLE = 37.0


def smooth_noise(shape, sigma, rng):
    """Unit noise correlated like a beam of `sigma` pixels."""
    fx, fy = np.fft.fftfreq(shape[1]), np.fft.fftfreq(shape[0])
    filtering = np.exp(-np.pi**2 * sigma**2 * (fx[None, :] ** 2 + fy[:, None] ** 2))
    noise = np.fft.ifft2(np.fft.fft2(rng.normal(size=shape)) * filtering).real
    return noise / noise.std()


def layer(height, along, h, sigma):
    """exp(-|z|/h) by a disc of 6 kpc half length, seen with a Gaussian beam; normalised to 1 before smoothing (kpc)."""
    z = np.linspace(-40, 40, 16001)
    kernel = np.exp(-0.5 * (z / sigma) ** 2)
    curve = np.convolve(np.exp(-np.abs(z) / h), kernel / kernel.sum(), mode="same")
    return np.interp(height, z, curve) * np.exp(-((along / 8.0) ** 4))


def header(size, pixel, beam, frequency, rotation=0.0, form="CD", offset=(0.0, 0.0)):
    """pixel, beam: arcsec."""
    h = fits.Header()
    h["SIMPLE"] = True
    for axis, (ctype, value, unit) in enumerate(
            [("RA---SIN", CENTRE[0], "deg"), ("DEC--SIN", CENTRE[1], "deg"), ("FREQ", frequency, "Hz"), ("STOKES", 1.0, "")], 1):
        h[f"CTYPE{axis}"], h[f"CRVAL{axis}"], h[f"CRPIX{axis}"], h[f"CDELT{axis}"] = ctype, value, 1.0, 1.0
        if unit:
            h[f"CUNIT{axis}"] = unit
    h["CRPIX1"], h["CRPIX2"] = size / 2 + offset[0], size / 2 + offset[1]
    step = pixel * ARCSEC
    c, s = np.cos(np.radians(rotation)), np.sin(np.radians(rotation))
    if form == "CD":
        del h["CDELT1"], h["CDELT2"]
        h["CD1_1"], h["CD1_2"], h["CD2_1"], h["CD2_2"] = -step * c, -step * s, -step * s, step * c
    else:
        h["CDELT1"], h["CDELT2"], h["CROTA2"] = -step, step, rotation
    h["BUNIT"], h["EQUINOX"] = "JY/BEAM", 2000.0
    h["BMAJ"], h["BMIN"], h["BPA"] = beam * ARCSEC, beam * ARCSEC, 0.0
    return h


def make_map(path, h_kpc, size, pixel, beam, frequency, noise=0.002, seed=1, **more):
    rng = np.random.default_rng(seed)
    head = header(size, pixel, beam, frequency, **more)
    place = np.indices((size, size))
    lon, lat = WCS(head).celestial.wcs_pix2world(place[1].ravel(), place[0].ravel(), 0)
    d = np.radians(lon - CENTRE[0])
    b, b0 = np.radians(lat), np.radians(CENTRE[1])
    down = np.sin(b) * np.sin(b0) + np.cos(b) * np.cos(b0) * np.cos(d)
    east = np.degrees(np.cos(b) * np.sin(d) / down) / KPC
    north = np.degrees((np.sin(b) * np.cos(b0) - np.cos(b) * np.sin(b0) * np.cos(d)) / down) / KPC
    s, c = np.sin(np.radians(POSITION_ANGLE)), np.cos(np.radians(POSITION_ANGLE))
    along, height = east * s + north * c, east * c - north * s
    sigma = beam * ARCSEC / KPC / 2.3548
    value = beam**2 * 1e-3 * layer(height, along, h_kpc, sigma).reshape(size, size)
    value += noise * beam**2 * 1e-3 * smooth_noise(value.shape, beam / pixel / 2.3548, rng)
    fits.PrimaryHDU(value[None, None].astype("f4"), head).writeto(path, overwrite=True)


def run(*arguments):
    return subprocess.run([PROGRAM, "heights", *map(str, arguments)], capture_output=True, text=True, timeout=120)


OPTIONS = ["--position-angle", f"{POSITION_ANGLE} deg", "--distance", "10 Mpc", "--model", "exponential", "--to", "7 kpc"]
WIDE = ["--strip-width", "6 kpc"]


class Heights(unittest.TestCase):
    @classmethod
    def setUpClass(cls):
        cls.temporary = tempfile.TemporaryDirectory()
        cls.folder = pathlib.Path(cls.temporary.name)
        cls.low, cls.high = cls.folder / "low.fits", cls.folder / "high.fits"
        make_map(cls.low, 1.8, 300, 4.0, 20.0, 150e6, seed=5, rotation=20.0)
        make_map(cls.high, 1.2, 420, 2.5, 12.0, 1.4e9, seed=6, form="CROTA", rotation=-15.0, offset=(13.3, -7.8))

    @classmethod
    def tearDownClass(cls):
        cls.temporary.cleanup()

    def rows(self, out, table="heights"):
        return Table.read(out / "tables" / f"{table}.ecsv", format="ascii.ecsv")

    def test_one_map_gives_its_height_within_the_error(self):
        out = self.folder / "one"
        result = run(self.high, "-o", out, *OPTIONS, *WIDE)
        self.assertEqual(result.returncode, 0, result.stderr)
        row = self.rows(out)[0]
        self.assertEqual(row["status"], "ok")
        self.assertLess(row["error_noise"], 0.03)
        self.assertLess(abs(row["h"] - 1.2), 4 * row["error_noise"] + 0.003)
        self.assertIn("1.4 GHz", result.stdout)

    def test_two_telescopes_give_both_heights_and_the_exponent(self):
        out = self.folder / "two"
        result = run(self.low, self.high, "-o", out, *OPTIONS, "--strips", "3", "--strip-width", "2 kpc")
        self.assertEqual(result.returncode, 0, result.stderr)
        found = {round(row["frequency"] / 1e6): row for row in self.rows(out) if row["strip"] == -1}
        for frequency, h in ((150, 1.8), (1400, 1.2)):
            row = found[frequency]
            self.assertLess(row["error_noise"], 0.05)
            self.assertLess(abs(row["h"] - h), 4 * row["error_noise"] + 0.005, f"{frequency} MHz: {row['h']}")
            self.assertLess(row["chi2"], 3 * row["dof"])
        for row in self.rows(out):
            self.assertLess(abs(row["h"] - (1.8 if row["frequency"] < 1e9 else 1.2)), 0.03, f"strip {row['strip']}")
        exponent = self.rows(out, "exponents")[0]
        eta = np.log(1.2 / 1.8) / np.log(1400 / 150)
        self.assertLess(abs(exponent["eta"] - eta), 4 * exponent["eta_error"])
        summary = json.loads((out / "summary.json").read_text())
        self.assertEqual(len(summary["maps"]), 2)
        self.assertAlmostEqual(summary["radio_exponent"]["eta"], exponent["eta"])
        self.assertEqual([map_["beam_arcsec"][0] for map_ in summary["maps"]], [summary["maps"][0]["beam_arcsec"][0]] * 2)
        self.assertTrue(any("smoothed" in text for text in summary["warnings"]))
        profile = self.rows(out, "profiles")
        self.assertEqual(set(profile["unit"]), {"Jy/beam"})

    def test_smoothed_maps_with_a_measured_correlation_give_both_heights(self):
        for bins in ([], ["--bin", "0.25 kpc"]):
            out = self.folder / f"measured{len(bins)}"
            result = run(self.low, self.high, "-o", out, *OPTIONS, *WIDE, *bins, "--noise", "autocorrelation")
            self.assertEqual(result.returncode, 0, result.stderr)
            by_beam = self.folder / f"by_beam{len(bins)}"
            self.assertEqual(run(self.low, self.high, "-o", by_beam, *OPTIONS, *WIDE, *bins).returncode, 0)
            for row, other in zip(self.rows(out), self.rows(by_beam)):
                truth = 1.8 if row["frequency"] < 1e9 else 1.2
                self.assertEqual(row["status"], "ok")
                self.assertLess(abs(row["h"] - truth), 4 * row["error_noise"] + 0.003, f"{row['frequency']}: {row['h']}")
                self.assertLess(abs(np.log(row["error_noise"] / other["error_noise"])), np.log(1.3))

    def gamma_cube(self, name, axis, tables=(), unit="cm-2 s-1 sr-1 MeV-1", planes=2):
        size, step, beam = 150, 8.0, 32.0
        head = header(size, step, beam, 1e9)
        for key in (f"{k}{n}" for n in (3, 4) for k in ("CTYPE", "CRVAL", "CRPIX", "CDELT", "CUNIT")):
            head.remove(key, ignore_missing=True)
        head["BUNIT"] = unit
        head.update(axis)
        place = (np.indices((size, size)) - (size / 2 - 1)) * step * ARCSEC / KPC
        east, north = -place[1], place[0]
        s, c = np.sin(np.radians(POSITION_ANGLE)), np.cos(np.radians(POSITION_ANGLE))
        along, height = east * s + north * c, east * c - north * s
        rng = np.random.default_rng(3)
        sigma = beam * ARCSEC / KPC / 2.3548
        cube = [layer(height, along, 1.5 + 0.3 * k, sigma) + 0.002 * smooth_noise((size, size), beam / step / 2.3548, rng)
                for k in range(planes)]
        path = self.folder / name
        fits.HDUList([fits.PrimaryHDU(np.array(cube, "f4") * 1e-9, head), *tables]).writeto(path)
        return path

    def check_labels(self, path, expected, energies=None):
        out = self.folder / (path.name + ".out")
        result = run(path, "-o", out, *OPTIONS, *WIDE)
        self.assertEqual(result.returncode, 0, result.stdout + result.stderr)
        self.assertEqual(list(dict.fromkeys(self.rows(out)["map"])), expected)
        self.assertEqual(list(dict.fromkeys(self.rows(out, "profiles")["map"])), expected)
        summary = json.loads((out / "summary.json").read_text())
        self.assertEqual([row["map"] for row in summary["gamma_heights"]], expected)
        self.assertEqual([row["label"] for row in summary["maps"]], expected)
        self.assertNotIn("no exponent", result.stdout)
        self.assertIsNone(summary["gamma_exponent"])
        for label in expected:
            self.assertIn(f"\n{label}  ", result.stdout)
        for channel, label in enumerate(expected):  # the heights that gamma_cube gives its planes
            row = next(row for row in summary["gamma_heights"] if row["map"] == label)
            self.assertLess(abs(row["h_kpc"] - (1.5 + 0.3 * channel)), 4 * row["error_noise_kpc"] + 0.003, label)
        for row, (low, high) in zip(summary["maps"], energies or []):
            self.assertAlmostEqual(row["energy_from_gev"] / low, 1, places=10)
            self.assertAlmostEqual(row["energy_to_gev"] / high, 1, places=10)
        return summary

    def test_gamma_ray_channels_are_called_by_their_photon_energies(self):
        linear = {"CTYPE3": "ENERGY", "CRVAL3": 2.0, "CRPIX3": 1.0, "CDELT3": 1.5, "CUNIT3": "GeV"}
        self.check_labels(self.gamma_cube("linear.fits", linear), ["2 GeV", "3.5 GeV"], [(2, 2), (3.5, 3.5)])
        log = {"CTYPE3": "ENER-LOG", "CRVAL3": 500.0, "CRPIX3": 1.0, "CDELT3": 500 * np.log(10), "CUNIT3": "MeV"}
        self.check_labels(self.gamma_cube("log.fits", log), ["500 MeV", "5 GeV"], [(0.5, 0.5), (5, 5)])
        band = {"CTYPE3": "ENERBAND", "CRVAL3": 1.0, "CRPIX3": 1.0, "CDELT3": 1.0, "BANDSHDU": "EBOUNDS"}
        columns = [fits.Column("CHANNEL", "J", array=[0, 1]), fits.Column("E_MIN", "D", "keV", array=[1e6, 1e7]),
                   fits.Column("E_MAX", "E", "keV", array=[1e7, 2e9])]
        bounds = fits.BinTableHDU.from_columns(columns, name="EBOUNDS")
        other = fits.ImageHDU(np.zeros((30, 41), "f4"), name="OTHER")  # something to step over
        cube = self.gamma_cube("bands.fits", band, [other, bounds], unit="cm-2 s-1 sr-1")
        self.check_labels(cube, ["1 GeV - 10 GeV", "10 GeV - 2 TeV"], [(1, 10), (10, 2000)])

    def test_a_table_goes_before_the_axis_where_it_has_a_row_for_every_plane(self):
        axis = {"CTYPE3": "ENERGY", "CRVAL3": 2.0, "CRPIX3": 1.0, "CDELT3": 1.5, "CUNIT3": "GeV"}
        for name, values, expected in (("both.fits", [3e3, 7e3], ["3 GeV", "7 GeV"]), ("three.fits", [1.0, 2.0, 3.0], ["2 GeV", "3.5 GeV"])):
            table = fits.BinTableHDU.from_columns([fits.Column("ENERGY", "D", "MeV", array=values)], name="ENERGIES")
            self.check_labels(self.gamma_cube(name, axis, [table]), expected)

    def test_gamma_ray_channels_without_a_unit_keep_their_number(self):
        bare = {"CTYPE3": "ENERGY", "CRVAL3": 2.0, "CRPIX3": 1.0, "CDELT3": 1.5}
        summary = self.check_labels(self.gamma_cube("bare.fits", bare), ["bare.fits, channel 1", "bare.fits, channel 2"])
        self.assertIsNone(summary["maps"][0]["energy_from_gev"])

    def test_two_maps_of_one_photon_energy_are_told_apart_by_their_files(self):
        axis = {"CTYPE3": "ENERGY", "CRVAL3": 2.0, "CRPIX3": 1.0, "CDELT3": 1.5, "CUNIT3": "GeV"}
        first, second = self.gamma_cube("a.fits", axis, planes=1), self.gamma_cube("b.fits", axis, planes=1)
        result = run(first, second, *OPTIONS, *WIDE)
        self.assertEqual(result.returncode, 0, result.stderr)
        self.assertIn("2 GeV (a.fits)", result.stdout)
        self.assertIn("2 GeV (b.fits)", result.stdout)

    def test_a_masked_source_does_not_change_the_height(self):
        data, head = fits.getdata(self.high), fits.getheader(self.high)
        spoilt = data.copy()
        spoilt[0, 0, 225:265, 215:255] += 5 * np.nanmax(data)
        path, regions = self.folder / "spoilt.fits", self.folder / "out.reg"
        fits.PrimaryHDU(spoilt, head).writeto(path)
        lon, lat = WCS(head).celestial.wcs_pix2world(234.5, 244.5, 0)
        regions.write_text(f"# Region file\nglobal color=green\nfk5\ncircle({lon},{lat},120\") # text={{source}}\n")
        clean = run(self.high, "-o", self.folder / "clean", *OPTIONS, *WIDE)
        masked = run(path, "-o", self.folder / "masked", "--mask", regions, *OPTIONS, *WIDE)
        self.assertEqual((clean.returncode, masked.returncode), (0, 0), clean.stderr + masked.stderr)
        before, after = self.rows(self.folder / "clean")[0], self.rows(self.folder / "masked")[0]
        self.assertNotEqual(before["h"], after["h"])
        self.assertLess(abs(before["h"] - after["h"]), 4 * after["error_noise"])
        self.assertGreater(after["error_noise"], before["error_noise"])

    def check_refused(self, code, words, *arguments):
        result = run(*arguments)
        self.assertEqual(result.returncode, code, result.stdout + result.stderr)
        for word in words:
            self.assertIn(word, result.stderr)

    def test_wrong_options_are_usage_errors_naming_the_option(self):
        self.check_refused(2, ["--distance"], self.low, "--position-angle", "37 deg")
        self.check_refused(2, ["--position-angle"], self.low, "--distance", "10 Mpc")
        self.check_refused(2, ["--distance", "10 deg"], self.low, "--distance", "10 deg", "--position-angle", "37 deg")
        self.check_refused(2, ["--model", "cubic"], self.low, *OPTIONS, *WIDE, "--model", "cubic")
        self.check_refused(2, ["--centre"], self.low, *OPTIONS, *WIDE, "--centre", "10 20")
        self.check_refused(2, ["--centre"], self.low, *OPTIONS, *WIDE, "--centre", "north")
        self.check_refused(2, ["--rms"], self.low, *OPTIONS, *WIDE, "--rms", "3 kpc")
        self.check_refused(2, ["--rms", "3 values"], self.low, *OPTIONS, *WIDE, *("--rms", "0") * 3)
        self.check_refused(2, ["--noise"], self.low, *OPTIONS, *WIDE, "--noise", "loud")
        self.check_refused(2, ["MAP"], "--distance", "10 Mpc")

    def test_unusable_maps_are_input_errors_naming_file_and_keyword(self):
        def spoil(name, change, data=None):
            head = fits.getheader(self.low)
            change(head)
            path = self.folder / name
            fits.PrimaryHDU(fits.getdata(self.low) if data is None else data, head).writeto(path)
            return path

        self.check_refused(4, ["absent.fits"], self.folder / "absent.fits", *OPTIONS, *WIDE)
        (self.folder / "text.fits").write_text("no FITS here\n")
        self.check_refused(4, ["text.fits"], self.folder / "text.fits", *OPTIONS, *WIDE)
        self.check_refused(4, ["nobeam.fits", "BMAJ"], spoil("nobeam.fits", lambda h: h.pop("BMAJ")), *OPTIONS, *WIDE)
        self.check_refused(4, ["unit.fits", "BUNIT", "counts"], spoil("unit.fits", lambda h: h.set("BUNIT", "counts")), *OPTIONS, *WIDE)
        self.check_refused(4, ["shear.fits", "CD1_2", "sheared"], spoil("shear.fits", lambda h: h.set("CD1_2", 0.0)), *OPTIONS, *WIDE)
        self.check_refused(4, ["proj.fits", "CTYPE1", "AIT"], spoil("proj.fits", lambda h: h.set("CTYPE1", "RA---AIT")), *OPTIONS, *WIDE)
        blank = np.full((1, 1, 300, 300), np.nan, "f4")
        self.check_refused(4, ["blank.fits", "blanks"], spoil("blank.fits", lambda h: None, blank), *OPTIONS, *WIDE)
        self.check_refused(4, ["far.fits", "overlap"], self.low, spoil("far.fits", lambda h: h.set("CRVAL1", 190.0)), *OPTIONS, *WIDE)
        self.check_refused(4, ["narrower"], self.low, *OPTIONS, *WIDE, "--beam", "5 arcsec")
        (self.folder / "bad.reg").write_text("icrs\ncircle(1,2,3\")\nannulus(1,2,3,4)\n")
        self.check_refused(4, ["bad.reg", "line 3", "annulus"], self.low, *OPTIONS, *WIDE, "--mask", self.folder / "bad.reg")

    def test_a_folder_with_results_or_a_file_in_its_place_is_an_output_error(self):
        out = self.folder / "used"
        self.assertEqual(run(self.low, "-o", out, *OPTIONS, *WIDE).returncode, 0)
        self.check_refused(6, ["--force"], self.low, "-o", out, *OPTIONS, *WIDE)
        self.assertEqual(run(self.low, "-o", out, "--force", *OPTIONS, *WIDE).returncode, 0)
        self.check_refused(6, ["low.fits"], self.low, "-o", self.low, *OPTIONS, *WIDE)

    def test_without_a_folder_only_the_table_is_printed(self):
        before = sorted(self.folder.iterdir())
        result = run(self.low, *OPTIONS, *WIDE)
        self.assertEqual(result.returncode, 0, result.stderr)
        self.assertIn("h/kpc", result.stdout)
        self.assertEqual(sorted(self.folder.iterdir()), before)


if __name__ == "__main__":
    PROGRAM = sys.argv.pop(1)
    unittest.main()
