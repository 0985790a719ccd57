#!/usr/bin/python3
"""Runs the program as a user would: predict_cli.py AUREOLE SOURCE_DIR. Exit codes, messages, files left behind."""
import json
import os
import pathlib
import resource
import shutil
import signal
import subprocess
import sys
import tempfile
import time
import unittest
import warnings

import numpy as np
from astropy.io import fits
from astropy.table import Table

PROGRAM, SOURCE = pathlib.Path(sys.argv[1]).resolve(), pathlib.Path(sys.argv[2]).resolve()
sys.path.insert(0, str(SOURCE / "tests" / "bench"))
sys.dont_write_bytecode = True
import make_grid  # noqa: E402

SCENARIO = """
[run]
title = "small"
[grid]
geometry = "RZ"
radius = "12 kpc"
height = "6 kpc"
cells_r = 16
cells_z = 16
smallest_z = "0.1 kpc"
[field.random]
profile = "double_exponential"
value = "8 uG"
radius = "8 kpc"
height = "3 kpc"
[gas.hi]
profile = "double_exponential"
value = "1 cm-3"
radius = "6 kpc"
height = "0.3 kpc"
[electrons]
height_slope = -0.2
energy_nodes = 33
[electrons.space]
radius = "5 kpc"
height = "2 kpc"
[protons]
energy_nodes = 33
[protons.space]
radius = "5 kpc"
height = "2 kpc"
[radio]
frequencies = ["150 MHz", "1.4 GHz"]
beam_major = "15 arcsec"
[gamma]
energies = ["1 GeV"]
[view]
inclination = "90 deg"
distance = "10 Mpc"
[map]
pixel = "6 arcsec"
[heights]
strips = 1
strip_width = "8 kpc"
to = "4 kpc"
models = ["exponential"]
"""


def run(*arguments, **options):
    options.setdefault("timeout", 120)
    return subprocess.run([PROGRAM, *map(str, arguments)], capture_output=True, text=True, **options)


class Predict(unittest.TestCase):
    def setUp(self):
        self.folder = pathlib.Path(tempfile.mkdtemp(prefix="aureole [é 1] "))
        self.addCleanup(shutil.rmtree, self.folder, ignore_errors=True)
        self.scenario = self.folder / "small.toml"
        self.scenario.write_text(SCENARIO)
        self.out = self.folder / "results"

    def fails(self, code, *parts, arguments=None, scenario=None, **options):
        if scenario is not None:
            self.scenario.write_text(scenario)
        done = run(*(arguments or ["predict", self.scenario, "-o", self.out]), **options)
        self.assertEqual(done.returncode, code, done.stderr)
        for part in parts:
            self.assertIn(part, done.stderr)
        self.assertEqual(done.stdout, "")
        if self.out.exists():
            self.assertEqual(os.listdir(self.out), [], "something was left behind")
        return done

    def grid_file(self, cells=8, energies=16):
        path = self.folder / "grid[1].fits"
        make_grid.main(str(path), cells, energies)
        return path

    def test_maps_tables_and_summary_agree(self):
        done = run("predict", self.scenario, "-o", self.out)
        self.assertEqual(done.returncode, 0, done.stderr)
        self.assertEqual(done.stderr, "")
        self.assertIn("h ~ nu^eta", done.stdout)
        summary = json.loads((self.out / "summary.json").read_text())
        channels = Table.read(self.out / "tables" / "channels.ecsv", format="ascii.ecsv")
        for row in channels[channels["band"] == "radio"]:
            with warnings.catch_warnings():
                warnings.simplefilter("error")
                with fits.open(self.out / row["file"], checksum=True) as hdus:
                    header, data = hdus[0].header, hdus[0].data[0]
            beam = np.pi * header["BMAJ"] * header["BMIN"] / (4 * np.log(2))
            flux = data.sum() * abs(header["CDELT1"] * header["CDELT2"]) / beam
            self.assertAlmostEqual(flux / row["flux"], 1, delta=2e-3)  # smoothing carries a little over the edge
            # 4 pi D^2 S = L
            distance = 10e3 * 3.0856775814913673e21
            self.assertAlmostEqual(4 * np.pi * distance ** 2 * row["flux"] * 1e-23 / row["luminosity"], 1, delta=1e-3)
        heights = Table.read(self.out / "tables" / "heights.ecsv", format="ascii.ecsv")
        self.assertTrue(np.all(heights["h"] > 0))
        radio = heights[heights["frequency"] > 0]
        self.assertGreater(radio["h"][0], radio["h"][-1])
        self.assertEqual({m["file"] for m in summary["maps"]}, set(channels["file"]))
        listed = {f["path"] for f in json.loads((self.out / "manifest.json").read_text())["files"]}
        found = {str(p.relative_to(self.out)) for p in self.out.rglob("*") if p.is_file()}
        self.assertEqual(listed | {"manifest.json"}, found)

    def test_the_effective_scenario_repeats_the_run_to_the_byte(self):
        environment = dict(os.environ, SOURCE_DATE_EPOCH="1700000000")
        self.assertEqual(run("predict", self.scenario, "-o", self.out, "--threads", 1, env=environment).returncode, 0)
        again = self.folder / "again"
        self.assertEqual(run("predict", self.out / "scenario.toml", "-o", again, "--threads", 2, env=environment).returncode, 0)
        for path in sorted(self.out.glob("maps/*.fits")):
            one, two = fits.getdata(path), fits.getdata(again / path.relative_to(self.out))
            np.testing.assert_array_equal(one, two)
        self.assertEqual((self.out / "scenario.toml").read_bytes(), (again / "scenario.toml").read_bytes())
        self.assertEqual(run("predict", self.scenario, "-o", self.out, "--threads", 1, "--force", env=environment).returncode, 0)
        first = {p.name: p.read_bytes() for p in self.out.glob("maps/*.fits")}
        self.assertEqual(run("predict", self.scenario, "-o", self.out, "--threads", 1, "--force", env=environment).returncode, 0)
        self.assertEqual(first, {p.name: p.read_bytes() for p in self.out.glob("maps/*.fits")})

    def test_results_of_another_run_are_not_mixed_in(self):
        self.assertEqual(run("predict", self.scenario, "-o", self.out).returncode, 0)
        done = run("predict", self.scenario, "-o", self.out)
        self.assertEqual(done.returncode, 6)
        self.assertIn("--force", done.stderr)
        note = self.out / "maps" / "mine.txt"
        note.write_text("keep")
        self.assertEqual(run("predict", self.scenario, "-o", self.out, "--force", "--set", "radio.frequencies=[\"3 GHz\"]").returncode, 0)
        self.assertTrue(note.exists())
        self.assertEqual(sorted(p.name for p in self.out.glob("maps/radio*.fits")), ["radio_3GHz.fits"])

    def test_dry_run_writes_nothing(self):
        done = run("predict", self.scenario, "-o", self.out, "--dry-run")
        self.assertEqual(done.returncode, 0, done.stderr)
        self.assertIn("memory", done.stdout)
        self.assertFalse(self.out.exists())

    def test_a_grid_file_gives_what_it_holds(self):
        grid = self.grid_file(12, 24)
        self.scenario.write_text(f'input.grid = "{grid.name}"\nradio.frequencies = ["1.4 GHz"]\nradio.unit = "MJy/sr"\n'
                                 'gamma.energies = ["1 GeV"]\nview.inclination = "85 deg"\nmap.pixel = "10 arcsec"\n'
                                 'heights.models = ["exponential"]\nheights.inclination = "naive"\n')
        done = run("predict", self.scenario, "-o", self.out)
        self.assertEqual(done.returncode, 0, done.stderr)
        self.assertTrue((self.out / "maps" / "radio_1.4GHz.fits").exists())
        self.assertIn("no checksum", done.stderr)

    def test_bad_scenarios_are_refused_with_code_3(self):
        self.fails(3, "small.toml:1:", scenario="[run\ntitle = 3")
        self.fails(3, "view.inclinaton", "view.inclination", scenario=SCENARIO.replace("inclination", "inclinaton"))
        self.fails(3, "map.pixel", "an angle", scenario=SCENARIO.replace('"6 arcsec"', "6"))
        self.fails(3, "map.pixel", "length", scenario=SCENARIO.replace('"6 arcsec"', '"6 kpc"'))
        self.fails(3, "view.inclination", "180", scenario=SCENARIO.replace('"90 deg"', '"200 deg"'))
        self.fails(3, "Jy/beam", "radio.beam_major", scenario=SCENARIO.replace('beam_major = "15 arcsec"', ""))
        self.fails(3, "gas.hi", "unknown name", scenario=SCENARIO.replace('[gas.hi]\nprofile = "double_exponential"', '[gas.hi]\nprofile = "formula"\nformula = "exp(-q)"'))
        self.fails(3, "gas.hi", "finite", scenario=SCENARIO.replace('[gas.hi]\nprofile = "double_exponential"', '[gas.hi]\nprofile = "formula"\nformula = "log(-1-R)"'))
        self.fails(3, "assignment", scenario=SCENARIO.replace('[gas.hi]\nprofile = "double_exponential"', '[gas.hi]\nprofile = "formula"\nformula = "z=5"'))
        self.fails(3, "beyond the grid", scenario=SCENARIO.replace('"10 Mpc"', '"5 kpc"\nprojection = "perspective"'))
        self.fails(3, "no channels", scenario=SCENARIO.replace('["150 MHz", "1.4 GHz"]', "[]").replace('["1 GeV"]', "[]"))
        self.fails(3, "radio.bandwidth", "twice the lowest frequency", scenario=SCENARIO.replace('beam_major', 'bandwidth = "300 MHz"\nbeam_major'))
        self.fails(4, "nowhere.toml", arguments=["predict", self.folder / "nowhere.toml", "-o", self.out])
        self.fails(4, "folder", arguments=["predict", self.folder, "-o", self.out])

    def test_bad_grid_files_are_refused_with_code_4(self):
        grid = self.grid_file()
        use = f'input.grid = "{grid.name}"\nradio.frequencies = ["1.4 GHz"]\nradio.unit = "MJy/sr"\n'
        whole = grid.read_bytes()
        self.fails(4, "missing.fits", scenario=use.replace(grid.name, "missing.fits"))
        grid.write_bytes(b"hello")
        self.fails(4, grid.name, scenario=use)
        for blocks in (1, 3, 10, len(whole) // 2880 - 1):
            grid.write_bytes(whole[:2880 * blocks])
            self.fails(4, grid.name, scenario=use)

        def edited(change):
            grid.write_bytes(whole)
            with fits.open(grid, mode="update") as hdus:
                change(hdus)

        edited(lambda h: h["CR_ELECTRON"].header.set("AXES", "X,Y,Z,E_LEPTON"))
        self.fails(4, "CR_ELECTRON", "AXES", "X,Y,Z,E_LEPTON", "E_LEPTON,X,Y,Z", scenario=use)
        edited(lambda h: h["B_TURB"].header.remove("BUNIT"))
        self.fails(4, "B_TURB", "BUNIT", scenario=use)
        edited(lambda h: h["B_TURB"].header.set("BUNIT", "kpc"))
        self.fails(4, "B_TURB", "BUNIT", "kpc", scenario=use)
        edited(lambda h: h[0].header.set("FMTNAME", "OTHER"))
        self.fails(4, "FMTNAME", "OTHER", scenario=use)
        edited(lambda h: h[0].header.set("FMTVERS", "2.0"))
        self.fails(4, "FMTVERS", "2.0", scenario=use)

        def poison(value):
            def change(hdus):
                hdus["CR_ELECTRON"].data[3, 2, 1, 5] = value
            return change
        for value in (np.nan, np.inf, -1.0):
            edited(poison(value))
            self.fails(4, "CR_ELECTRON", "X 2, Y 3, Z 4", "6", scenario=use)

        def swap(hdus):
            hdus["E_LEPTON"].data[3] = hdus["E_LEPTON"].data[5]
        edited(swap)
        self.fails(4, "E_LEPTON", "rising", scenario=use)

        def damaged(hdus):
            for hdu in hdus[1:]:
                hdu.add_checksum()
        edited(damaged)
        data = bytearray(grid.read_bytes())
        with fits.open(grid) as hdus:
            place = hdus["CR_ELECTRON"]._data_offset + 4000
        data[place] ^= 1
        grid.write_bytes(bytes(data))
        self.fails(4, "CR_ELECTRON", "checksum", scenario=use)

    def test_usage_errors_have_code_2(self):
        self.fails(2, arguments=["predict"])
        self.fails(2, arguments=["predict", self.scenario, "--frobnicate"])
        self.fails(2, "-o", arguments=["predict", self.scenario])
        self.fails(2, "--memory", arguments=["predict", self.scenario, "-o", self.out, "--memory", "lots"])
        self.fails(2, arguments=["scenario", "no_such_name"])
        self.fails(2, "--memory", arguments=["predict", self.scenario, "-o", self.out, "--memory", "1e30"])
        self.fails(1, "--memory", arguments=["predict", self.scenario, "-o", self.out, "--memory", "1 MB"])

    @unittest.skipUnless(os.geteuid() == 0, "needs root to become another user")
    def test_a_folder_that_cannot_be_written_to_has_code_6(self):
        locked = self.folder / "locked"
        locked.mkdir(mode=0o755)
        os.chmod(self.folder, 0o755)

        def nobody():
            os.setgid(65534)
            os.setuid(65534)
        self.out = locked / "results"
        self.fails(6, "locked", preexec_fn=nobody)

    def test_a_full_disc_leaves_nothing(self):
        def small_files():
            resource.setrlimit(resource.RLIMIT_FSIZE, (20000, 20000))
            signal.signal(signal.SIGXFSZ, signal.SIG_IGN)
        self.fails(6, "results", preexec_fn=small_files)

    def test_an_interrupt_leaves_nothing(self):
        big = SCENARIO.replace("cells_r = 16", "cells_r = 400").replace("cells_z = 16", "cells_z = 400")
        self.scenario.write_text(big.replace('"6 arcsec"', '"1 arcsec"'))
        process = subprocess.Popen([PROGRAM, "predict", self.scenario, "-o", self.out], stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True)
        time.sleep(1.0)
        process.send_signal(signal.SIGINT)
        _, stderr = process.communicate(timeout=60)
        self.assertEqual(process.returncode, 130, stderr)
        self.assertIn("interrupted", stderr)
        if self.out.exists():
            self.assertEqual(os.listdir(self.out), [])

    def test_warnings_name_what_is_lost(self):
        self.scenario.write_text(SCENARIO.replace('pixel = "6 arcsec"', 'pixel = "10 arcsec"\nwidth = "60 arcsec"\nheight = "60 arcsec"'))
        done = run("predict", self.scenario, "-o", self.out)
        self.assertIn(done.returncode, (0, 5), done.stderr)
        self.assertIn("off the map", done.stderr)
        self.assertIn("pixels wide", done.stderr)
        done = run("predict", self.scenario, "-o", self.folder / "short", "--set", "electrons.energy_to=3 GeV")
        self.assertIn("the spectra end", done.stderr)

    def test_quiet_inspect_prints_problems_only(self):
        grid = self.grid_file()
        for path in (self.scenario, grid):
            self.assertGreater(len(run("inspect", path).stdout), 100)
            done = run("inspect", path, "-q")
            self.assertEqual((done.returncode, done.stdout, done.stderr), (0, "", ""))
        with fits.open(grid, mode="update") as hdus:
            hdus["B_TURB"].data[0, 0, 0] = -1
        done = run("inspect", grid, "-q")
        self.assertEqual((done.returncode, done.stdout.count("\n")), (4, 1), done.stdout)
        self.assertTrue(done.stdout.startswith("problem:"), done.stdout)

    def test_nuclei_that_are_not_used_are_named(self):
        grid = self.grid_file()
        with fits.open(grid, mode="update") as hdus:
            hdus["E_LEPTON"].header.add_history("copied for helium")
            nodes = fits.ImageHDU(hdus["E_LEPTON"].data, name="E_HELIUM")
            nodes.header["BUNIT"] = hdus["E_LEPTON"].header["BUNIT"]
            helium = fits.ImageHDU(hdus["CR_ELECTRON"].data, name="CR_HELIUM")
            helium.header["BUNIT"] = hdus["CR_ELECTRON"].header["BUNIT"]
            helium.header["AXES"] = hdus["CR_ELECTRON"].header["AXES"].replace("E_LEPTON", "E_HELIUM")
            hdus.append(nodes)
            hdus.append(helium)
        self.scenario.write_text(f'input.grid = "{grid.name}"\nradio.frequencies = ["1.4 GHz"]\nradio.unit = "MJy/sr"\n'
                                 'map.pixel = "20 arcsec"\nheights.models = ["exponential"]\n')
        done = run("predict", self.scenario, "-o", self.out)
        self.assertEqual(done.returncode, 0, done.stderr)
        self.assertIn("CR_HELIUM is not used", done.stderr)

    def test_quiet_is_quiet(self):
        done = run("predict", self.scenario, "-o", self.out, "-q")
        self.assertEqual((done.returncode, done.stdout, done.stderr), (0, "", ""))


if __name__ == "__main__":
    result = unittest.main(argv=sys.argv[:1], exit=False).result
    print(f"{len(result.skipped)} skipped")
    sys.exit(0 if result.wasSuccessful() and result.testsRun > 0 else 1)
