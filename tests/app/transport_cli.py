#!/usr/bin/python3
"""Runs scenarios whose spectra are solved for: transport_cli.py AUREOLE. Exit codes, messages, files left behind, budgets."""
import json
import os
import pathlib
import re
import shutil
import signal
import subprocess
import sys
import tempfile
import time
import unittest

import numpy as np
from astropy.io import fits
from astropy.table import Table

PROGRAM = pathlib.Path(sys.argv[1]).resolve()

GRID = """
[grid]
geometry = "RZ"
radius = "12 kpc"
height = "6 kpc"
cells_r = 10
cells_z = 12
smallest_z = "0.2 kpc"
[field.random]
profile = "double_exponential"
value = "8 uG"
radius = "8 kpc"
height = "3 kpc"
"""
LAW = """kind = "rigidity_power"
rate = "1e-9 s-1"
slope = 0.5
"""
REST = f"""
[gas.hi]
profile = "double_exponential"
value = "1 cm-3"
radius = "6 kpc"
height = "0.3 kpc"
[gas.hii]
profile = "double_exponential"
value = "0.03 cm-3"
radius = "8 kpc"
height = "1 kpc"
[transport]
bins_per_decade = 4
energy_from = "100 MeV"
energy_to = "1 TeV"
[transport.protons.source.disc]
power = "1e41 erg s-1"
slope = 2.3
[transport.electrons.source.disc]
power = "1e39 erg s-1"
slope = 2.5
[law.one]
{LAW}
[radio]
frequencies = ["1.4 GHz"]
unit = "MJy/sr"
[gamma]
energies = ["1 GeV"]
[view]
inclination = "90 deg"
distance = "10 Mpc"
[map]
pixel = "12 arcsec"
[accuracy]
estimate = false
[heights]
strips = 1
strip_width = "8 kpc"
to = "4 kpc"
models = ["exponential"]
"""
SCENARIO = GRID + REST


def law(text):
    """The scenario with another law."""
    return SCENARIO.replace(LAW, text)


def formula(expression):
    return law(f'kind = "formula"\nexpression = "{expression}"\n')


def also(table, key):
    """The scenario with a key added to the end of a table."""
    return re.sub(rf"(\[{re.escape(table)}\]\n(?:[^\[]+\n)?)", rf"\1{key}\n", SCENARIO, count=1)


class Transport(unittest.TestCase):
    def setUp(self):
        self.folder = pathlib.Path(tempfile.mkdtemp(prefix="aureole transport "))
        self.addCleanup(shutil.rmtree, self.folder, ignore_errors=True)
        self.scenario = self.folder / "small.toml"
        self.out = self.folder / "results"

    def predict(self, text, *flags, out=None, **options):
        self.scenario.write_text(text)
        command = [PROGRAM, "predict", self.scenario, "-o", out or self.out, *flags]
        return subprocess.run([str(word) for word in command], capture_output=True, text=True, timeout=120, **options)

    def fails(self, code, text, *parts):
        done = self.predict(text)
        self.assertEqual(done.returncode, code, done.stderr)
        for part in parts:
            self.assertIn(part, done.stderr)
        self.assertEqual(done.stdout, "")
        self.assertFalse(self.out.exists() and os.listdir(self.out), "something was left behind")

    def works(self, text, *flags, code=0, out=None):
        done = self.predict(text, *flags, out=out)
        self.assertEqual(done.returncode, code, done.stderr)
        return done

    def table(self, name, out=None):
        return Table.read((out or self.out) / "tables" / name, format="ascii.ecsv")

    def budget(self, particles, process, out=None):
        rows = self.table("budgets.ecsv", out)
        return rows["power"][(rows["particles"] == particles) & (rows["process"] == process)][0]

    def grid_file(self, velocity=None, spectra=False):
        """The grid of the scenario without its gas, as a file."""
        r_edges, z_edges = np.linspace(0, 12, 11), np.linspace(0, 6, 13)
        z, r = np.meshgrid(0.5 * (z_edges[1:] + z_edges[:-1]), 0.5 * (r_edges[1:] + r_edges[:-1]), indexing="ij")

        def hdu(name, data, unit, axes=None, dtype="f4", **cards):
            image = fits.ImageHDU(np.asarray(data, dtype), name=name)
            image.header.update({"BUNIT": unit, **({"AXES": axes} if axes else {}), **cards})
            return image
        primary = fits.PrimaryHDU()
        primary.header.update(FMTNAME="HALO-GRID", FMTVERS="1.0", GEOMETRY="RZ", ZMIRROR=True)
        hdus = [primary, hdu("R_EDGES", r_edges, "kpc", dtype="f8"), hdu("Z_EDGES", z_edges, "kpc", dtype="f8"),
                hdu("B_TURB", 8 * np.exp(-r / 8 - z / 3), "uG", "R,Z")]
        if velocity is not None:
            hdus.append(hdu("VELOCITY", np.stack([0 * r, 0 * r, velocity(z)], -1), "km s-1", "COMP,R,Z", COMPS="R,PHI,Z"))
        if spectra:
            energy = np.geomspace(0.1, 1e4, 51)
            hdus += [hdu("E_LEPTON", energy, "GeV", dtype="f8"),
                     hdu("CR_ELECTRON", (1e-11 * np.exp(-r / 5 - z / 3))[..., None] * energy ** -2.7, "cm-3 GeV-1", "E_LEPTON,R,Z")]
        fits.HDUList(hdus).writeto(self.folder / "galaxy.fits", overwrite=True, checksum=True)
        return 'input.grid = "galaxy.fits"\n' + REST

    def test_parameters_that_a_law_does_not_have_are_refused_with_the_nearest(self):
        self.fails(3, law(LAW + "slop = 0.3\n"), "small.toml:", "law.one.slop:", "the nearest is law.one.slope")
        self.fails(3, law(LAW + 'lenght = "3 kpc"\n'), "law.one.lenght", "law.one.length")
        self.fails(3, law(LAW + "sharpness = 3\n"), "law.one:", "rigidity_power", "no parameter 'sharpness'", "the nearest is 'slope'")
        self.fails(3, law('kind = "rigidity_pover"\n'), "law.one.kind", "rigidity_pover", "rigidity_power")
        self.fails(3, SCENARIO + '[law.both]\nkind = "sum"\nof = ["one", "tow"]\n[law.two]\n' + LAW, "law.both.of", '"tow"', "the nearest is two")
        self.fails(3, also("transport", 'laws = ["oen"]'), "transport.laws", '"oen"', "the nearest is one")

    def test_rates_that_are_not_above_0_are_refused(self):
        for rate in ("-1e-9 s-1", "0 s-1", "nan s-1", "inf s-1"):
            self.fails(3, law(LAW.replace("1e-9 s-1", rate)), "law.one.rate", rate)
        self.fails(3, law(LAW.replace('"1e-9 s-1"', '"1e-9 cm"')), "law.one.rate", "1e-9 cm", "a frequency")
        self.fails(3, formula("1e-9*(z - 2)"), "law 'one'", "found -", "R = ", "z = ", "rigidity", "at least 0")

    def test_rates_above_that_of_bohm_diffusion_are_limited_to_it(self):
        far, farther, bohm = (self.folder / name for name in ("far", "farther", "bohm"))
        done = self.works(law('kind = "constant"\nrate = "1 s-1"\n'), out=far)
        self.assertRegex(done.stderr, r"protons: the scattering rate is above the gyrofrequency at \d+ of \d+ cells")
        self.works(law('kind = "constant"\nrate = "100 s-1"\n'), out=farther)
        self.works(formula("Omega"), out=bohm)
        for process in ("escape: top", "ionisation", "adiabatic"):
            reached = self.budget("protons", process, bohm)
            # The rates are floats in memory and the escape a sum of small terms.
            np.testing.assert_allclose(self.budget("protons", process, far), reached, rtol=1e-6)
            np.testing.assert_allclose(self.budget("protons", process, farther), reached, rtol=1e-6)

    def test_formulas_that_are_not_finite_somewhere_name_the_place(self):
        self.fails(3, formula("1e-9/sqrt(R - 5)"), "law 'one'", "nan", "R = 1.2 kpc", "z = 0.1 kpc", "rigidity", "finite")
        self.fails(3, law('kind = "formula"\nexpression = "1e-9/R"\nanchor = "rate"\nanchor_radius = "0 kpc"\n'),
                   "law 'one'", "inf", "R = 0 kpc", "z = 0 kpc", "1 GV", "finite")
        self.fails(3, law('kind = "formula"\nexpression = "1e28*(R > 6)"\ngives = "parallel_diffusion"\n'), "found 0", "R = 1.2 kpc", "above 0")
        self.fails(3, formula("1e-9*q"), "law.one", "q", "known variables")

    def test_anchors_outside_the_grid_are_refused(self):
        self.fails(3, law(LAW + 'anchor = "rate"\nanchor_radius = "13 kpc"\n'), "law.one.anchor_radius", "13 kpc", "at most 12 kpc")
        self.fails(3, law(LAW + 'anchor = "rate"\nanchor_height = "-7 kpc"\n'), "law.one.anchor_height", "-7 kpc", "-6 kpc to 6 kpc")
        self.fails(3, law(LAW + 'anchor = "grammage"\n'), "law.one.anchor", "grammage", "law.one.anchor_grammage")

    def test_anchors_that_no_factor_meets_say_what_was_found(self):
        for name, unit, values in (("energy_density", "eV cm-3", ("1e6", "1e-9")), ("gamma_luminosity", "erg s-1", ("1e42",)),
                                   ("grammage", "g cm-2", ("1e-5",))):
            for value in values:
                self.fails(3, law(LAW + f'anchor = "{name}"\nanchor_{name} = "{value} {unit}"\n'), "law 'one'", "anchor",
                           name.replace("_", " ").replace("gamma ", "gamma-ray "), "no factor", "scaled solutions have", "expected")

    def test_a_flow_that_compresses_faster_than_particles_lose_energy_names_the_place(self):
        wind = '[transport.wind]\nkind = "file"\n'
        self.fails(3, self.grid_file(lambda z: 3000 * np.exp(-z)) + wind, "law 'one'", "compression", "GeV", "R = 0.6 kpc", "z = 0.75 kpc")
        self.fails(3, self.grid_file() + wind, "transport.wind.kind", "VELOCITY")
        self.fails(3, also("transport", 'wind.speed = "100 km s-1"'), "transport.wind.speed", "kind")
        self.works(self.grid_file(lambda z: 30 * z) + wind)
        self.assertGreater(self.budget("protons", "adiabatic"), 0)

    def test_sources_outside_the_grid_or_without_power_are_refused(self):
        ring = 'distribution = "ring"\nradius = "40 kpc"\nwidth = "0.5 kpc"'
        self.fails(3, also("transport.protons.source.disc", ring), "transport.protons.source.disc", "ring", "inside the grid")
        self.fails(3, also("transport.electrons.source.disc", ring), "transport.electrons.source.disc", "ring", "inside the grid")
        for source, power in (("protons", "1e41"), ("electrons", "1e39")):
            self.fails(3, SCENARIO.replace(f'"{power} erg s-1"', '"0 erg s-1"'), f"transport.{source}.source.disc.power", "more than 0")
            self.fails(3, SCENARIO.replace(f'power = "{power} erg s-1"', "fraction = 0.2"), f"transport.{source}.source.disc", "no power", "star_formation_rate")
        self.fails(3, SCENARIO.replace('[transport.protons.source.disc]\npower = "1e41 erg s-1"\nslope = 2.3\n', ""), "transport.species", "without sources")
        self.fails(3, also("transport.electrons.source.disc", "slope_above = 3"), "slope_above", "break_rigidity")

    def test_energies_that_end_too_low_for_a_channel_say_what_it_needs(self):
        low = SCENARIO.replace('energy_to = "1 TeV"', 'energy_to = "20 GeV"')
        # Synchrotron critical frequency 3 e B gamma^2/(4 pi m c) at 1 uG: gamma = 18257 at 1.4 GHz, 9.33 GeV.
        self.fails(3, low, "transport.energy_to", "20 GeV", "93.3 GeV", "1.4 GHz")
        self.fails(3, SCENARIO.replace('"1 GeV"', '"200 GeV"'), "transport.energy_to", "2e+03 GeV", "200 GeV")
        self.fails(3, SCENARIO.replace('energy_from = "100 MeV"', 'energy_from = "2 TeV"'), "transport.energy_from", "rising")

    def test_an_iteration_that_does_not_settle_ends_with_code_5_and_results(self):
        # Over a pressure particles scatter so little that it falls below, where they scatter so much that it rises above: no steady state.
        done = self.works(formula("P_res > 0.003 ? 1e-10 : 1e-8"), "--set", "transport.streaming=false", code=5)
        self.assertIn("did not settle", done.stderr)
        self.assertTrue((self.out / "manifest.json").exists())
        summary = json.loads((self.out / "summary.json").read_text())
        self.assertTrue(any("did not settle" in text for text in summary["warnings"]), summary["warnings"])

    def test_spectra_of_a_file_and_of_a_solution_for_one_species_are_refused(self):
        scenario = self.grid_file(spectra=True)
        self.fails(4, scenario, "galaxy.fits", "CR_ELECTRON", "electrons.source", '"transport" or "file"', "small.toml")
        self.fails(3, 'electrons.source = "file"\n' + scenario, "electrons.source", '"file"', "[transport.electrons]")
        self.works('electrons.source = "transport"\n' + scenario)

    def test_boxes_get_the_spectra_of_rings(self):
        boxes = GRID.replace('"RZ"', '"XYZ"').replace('radius = "12 kpc"\nheight', 'half_width = "12 kpc"\nheight')
        boxes = boxes.replace("cells_r = 10", "cells_xy = 24").replace('smallest_z = "0.2 kpc"\n', "")
        self.works(boxes + REST, out=self.folder / "boxes")
        self.works(SCENARIO)
        ratio = self.table("laws.ecsv", self.folder / "boxes")["radio_luminosity"] / self.table("laws.ecsv")["radio_luminosity"]
        np.testing.assert_allclose(ratio, 1, atol=0.1)  # 1 kpc boxes against rings of 1.2 kpc: 0.947

    def test_budgets_add_up_and_luminosities_agree_with_the_tables_of_channels(self):
        self.works(SCENARIO.replace('energies = ["1 GeV"]', 'band_edges = ["100 MeV", "1 GeV"]'))
        rows = self.table("budgets.ecsv")
        for particles in ("protons", "electrons", "secondary electrons", "positrons"):
            part = rows[rows["particles"] == particles]
            injected = part["power"][part["process"] == "injected"][0]
            lost = sum(part["power"][(part["process"] != "injected") & (part["process"] != "defect of the sum")])
            self.assertGreater(injected, 0)
            np.testing.assert_allclose(lost, injected, rtol=1e-9)
        laws, channels = self.table("laws.ecsv"), self.table("channels.ecsv")
        radio = channels[(channels["band"] == "radio") & (channels["process"] == "total")]
        np.testing.assert_allclose(laws["radio_luminosity"], radio["luminosity"], rtol=1e-12)
        self.assertEqual(laws["radio_frequency"][0], 1.4e9)

    def test_more_laws_have_a_folder_each_and_the_same_bits_on_any_number_of_threads(self):
        text = also("transport", 'laws = ["one", "two"]') + f"[law.two]\n{LAW}".replace("0.5", "0.3")
        one, two = self.folder / "one", self.folder / "two"
        self.works(text, "--threads", 1, out=one)
        self.works(text, "--threads", 2, out=two)
        maps = sorted(path.relative_to(one) for path in one.rglob("*.fits"))
        self.assertEqual({path.parts[0] for path in maps}, {"one", "two"})
        for path in maps:
            np.testing.assert_array_equal(fits.getdata(one / path), fits.getdata(two / path))
        self.assertEqual((one / "tables" / "budgets.ecsv").read_bytes(), (two / "tables" / "budgets.ecsv").read_bytes())
        alone = self.folder / "alone"
        self.works(text, "--set", 'transport.laws=["two"]', out=alone)
        np.testing.assert_array_equal(fits.getdata(alone / "maps" / "gamma.fits"), fits.getdata(one / "two" / "maps" / "gamma.fits"))
        listed = {entry["path"] for entry in json.loads((one / "manifest.json").read_text())["files"]}
        self.assertEqual(listed | {"manifest.json"}, {str(path.relative_to(one)) for path in one.rglob("*") if path.is_file()})

    def test_the_scenario_left_behind_runs_again_whatever_was_asked(self):
        protons = '[transport.protons.source.disc]\npower = "1e41 erg s-1"\nslope = 2.3\n'
        electrons = '[transport.electrons.source.disc]\npower = "1e39 erg s-1"\nslope = 2.5\n'
        broken = 'break_rigidity = "5 GV"\nslope_above = 3\n'
        for name, text in (("plain", SCENARIO), ("electrons", 'protons.source = "none"\n' + SCENARIO.replace(protons, "")),
                           ("protons", 'electrons.source = "none"\n' + SCENARIO.replace(electrons, "")),
                           ("break", SCENARIO.replace(electrons, electrons + broken)),
                           ("grammage", law(LAW + 'anchor = "grammage"\nanchor_grammage = "1 g cm-2"\n')),
                           ("sum", SCENARIO + '[law.both]\nkind = "sum"\nof = ["one"]\n'),
                           ("file", 'electrons.source = "transport"\n' + self.grid_file(spectra=True) + '[transport.wind]\nkind = "linear"\nspeed = "50 km s-1"\n')):
            with self.subTest(name):
                first, second = self.folder / name / "first", self.folder / name / "second"
                self.works(text, "--set", "transport.bins_per_decade=2", out=first)
                again = (first / "scenario.toml").read_text()
                self.works(again, out=second)
                self.assertEqual((second / "scenario.toml").read_text(), again)
                for path in sorted(first.rglob("*.fits")):
                    np.testing.assert_array_equal(fits.getdata(path), fits.getdata(second / path.relative_to(first)))

    def test_one_bad_law_of_two_leaves_nothing(self):
        self.fails(3, SCENARIO + '[law.two]\nkind = "formula"\nexpression = "1e-9*(R - 2)"\n', "law 'two'", "R = 1.2 kpc")

    def test_an_interrupt_of_the_solution_leaves_nothing(self):
        self.scenario.write_text(SCENARIO.replace("cells_r = 10", "cells_r = 300").replace("cells_z = 12", "cells_z = 300"))
        process = subprocess.Popen([PROGRAM, "predict", self.scenario, "-o", self.out], stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True)
        time.sleep(1.5)
        process.send_signal(signal.SIGINT)
        _, stderr = process.communicate(timeout=60)
        self.assertEqual(process.returncode, 130, stderr)
        self.assertIn("interrupted", stderr)
        self.assertFalse(self.out.exists() and os.listdir(self.out))

    def test_quiet_is_quiet_and_a_dry_run_solves_nothing(self):
        done = self.works(SCENARIO, "-q")
        self.assertEqual((done.stdout, done.stderr), ("", ""))
        done = self.works(SCENARIO, "--dry-run", out=self.folder / "dry")
        self.assertIn("memory", done.stdout)
        self.assertFalse((self.folder / "dry").exists())


if __name__ == "__main__":
    result = unittest.main(argv=sys.argv[:1], exit=False).result
    sys.exit(0 if result.wasSuccessful() and result.testsRun > 0 else 1)
