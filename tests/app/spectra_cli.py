#!/usr/bin/python3
"""Runs `aureole spectra` as a user would: spectra_cli.py AUREOLE. The file, the maps made from it, exit codes, what is left behind."""
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
import warnings

import numpy as np
from astropy.io import fits

PROGRAM = pathlib.Path(sys.argv[1]).resolve()
MEDIA = """
[grid]
geometry = "RZ"
radius = "12 kpc"
height = "8 kpc"
cells_r = 12
cells_z = 14
smallest_z = "0.1 kpc"
[field.ordered]
profile = "double_exponential"
value = "4 uG"
radius = "10 kpc"
height = "4 kpc"
[field.random]
profile = "double_exponential"
value = "8 uG"
radius = "8 kpc"
height = "4 kpc"
[gas.hi]
profile = "double_exponential"
value = "1 cm-3"
radius = "6 kpc"
height = "0.3 kpc"
[gas.electrons]
profile = "constant"
value = "0.01 cm-3"
[gas.temperature]
profile = "constant"
value = "8e3 K"
[radiation.component.starlight]
temperature = "4000 K"
profile = "double_exponential"
value = "1 eV cm-3"
radius = "5 kpc"
height = "3 kpc"
[radio]
frequencies = ["150 MHz", "1.4 GHz"]
unit = "MJy/sr"
[gamma]
energies = ["1 GeV"]
[view]
inclination = "85 deg"
distance = "10 Mpc"
[map]
pixel = "10 arcsec"
[accuracy]
estimate = false
[heights]
strips = 1
strip_width = "8 kpc"
to = "4 kpc"
models = ["exponential"]
"""
TRANSPORT = """
[transport]
energy_from = "100 MeV"
energy_to = "1 TeV"
bins_per_decade = 6
[transport.protons.source.remnants]
radius = "3 kpc"
supernova_rate = "0.02 yr-1"
[transport.electrons.source.remnants]
radius = "3 kpc"
electron_share = 0.02
slope = 2.4
[law.powers]
kind = "rigidity_power"
slope = 0.5
"""
STREAMING = """
[law.streaming]
kind = "self_confinement"
damping = ["ion_neutral", "turbulent"]
[turbulence.speed]
profile = "constant"
value = "10 km s-1"
[turbulence.scale]
profile = "constant"
value = "50 pc"
[gas.hii]
profile = "double_exponential"
value = "0.03 cm-3"
radius = "8 kpc"
height = "1.2 kpc"
"""
SECOND_LAW = """
[law.even]
kind = "constant"
"""


def run(*arguments, **options):
    options.setdefault("timeout", 120)
    return subprocess.run([PROGRAM, *map(str, arguments)], capture_output=True, text=True, **options)


class Spectra(unittest.TestCase):
    def setUp(self):
        self.folder = pathlib.Path(tempfile.mkdtemp(prefix="aureole [é 2] "))
        self.addCleanup(shutil.rmtree, self.folder, ignore_errors=True)
        self.scenario = self.write("galaxy.toml", MEDIA + TRANSPORT)
        self.file = self.folder / "halo.fits"

    def write(self, name, text):
        path = self.folder / name
        path.write_text(text)
        return path

    def solve(self, *more, **options):
        done = run("spectra", self.scenario, "-o", self.file, *more, **options)
        self.assertEqual(done.returncode, 0, done.stderr)
        return done

    def fails(self, code, *parts, arguments):
        before = sorted(os.listdir(self.folder))
        done = run("spectra", *arguments)
        self.assertEqual(done.returncode, code, done.stderr)
        for part in parts:
            self.assertIn(part, done.stderr)
        self.assertEqual(done.stdout, "")
        self.assertEqual(sorted(os.listdir(self.folder)), before, "something was left behind")

    def test_the_file_is_one_that_inspect_and_astropy_accept(self):
        self.solve()
        done = run("inspect", self.file)
        self.assertEqual((done.returncode, done.stderr), (0, ""))
        self.assertIn("no problems found", done.stdout)
        for name in ("CR_ELECTRON", "CR_POSITRON", "CR_PROTON", "B_VECTOR", "B_TURB", "GAS_HI", "N_E", "T_E"):
            self.assertRegex(done.stdout, rf"(?m)^  {name} ")
        with warnings.catch_warnings():
            warnings.simplefilter("error")
            with fits.open(self.file, checksum=True) as hdus:
                hdus.verify("exception")
                for hdu in hdus:
                    self.assertIn("DATASUM", hdu.header)
                    self.assertIn("CHECKSUM", hdu.header)
                electrons, positrons = hdus["CR_ELECTRON"].data, hdus["CR_POSITRON"].data
                self.assertEqual(electrons.shape, (14, 12, len(hdus["E_LEPTON"].data)))
                self.assertTrue(np.all(electrons > 0) and np.all(positrons > 0))
                # positrons have been made by protons in the gas alone; sources give electrons
                self.assertLess(positrons.sum(), 0.5 * electrons.sum())
                self.assertTrue(np.all(hdus["N_E"].data == np.float32(0.01)))
                # the mean over the first cell lies below the peak of 8 uG
                self.assertGreater(hdus["B_TURB"].data.max(), 7)
                self.assertLess(hdus["B_TURB"].data.max(), 8)

    def test_the_header_says_how_the_spectra_were_made(self):
        self.solve("--set", "law.powers.anchor=rate", "--set", "law.powers.anchor_rate=3e-9 s-1")
        header = fits.getheader(self.file)
        self.assertEqual((header["LAW"], header["LAWKIND"], header["ANCHOR"]), ("powers", "rigidity_power", "rate"))
        self.assertAlmostEqual(header["ANCVALUE"], 3e-9, delta=1e-21)
        self.assertAlmostEqual(header["ANCMET"] / 3e-9, 1, delta=1e-9)
        self.assertAlmostEqual(header["ANCFACT"], 3, delta=1e-9)  # the law has 1e-9 s-1 at 1 GV by default
        self.assertAlmostEqual(header["NU1GV"] / 3e-9, 1, delta=1e-9)
        self.assertAlmostEqual(header["NUEMPIR"], 1, delta=1e-9)
        self.assertAlmostEqual(header["EKINFROM"], 0.1, delta=1e-12)
        self.assertAlmostEqual(header["EKINTO"], 1000, delta=1e-9)
        self.assertEqual((header["BINSDEC"], header["LIMITER"], header["EDGEZ"]), (6, "square_root", "one_over_r"))
        self.assertLess(header["BUDGET"], 1e-10)
        history = list(header["HISTORY"])
        for line in ("[law.powers]", "slope = 0.5", "[transport.protons.source.remnants]"):
            self.assertIn(line, history)
        self.assertNotIn("[gas.hi]", history)

    def test_maps_from_the_file_are_those_of_the_scenario(self):
        self.solve()
        one = run("predict", self.scenario, "-o", self.folder / "one")
        self.assertEqual(one.returncode, 0, one.stderr)
        given = self.write("given.toml", 'input.grid = "halo.fits"\n' + MEDIA)
        two = run("predict", given, "-o", self.folder / "two")
        self.assertEqual(two.returncode, 0, two.stderr)
        names = sorted(path.name for path in (self.folder / "one" / "maps").glob("*.fits"))
        self.assertEqual(names, sorted(path.name for path in (self.folder / "two" / "maps").glob("*.fits")))
        self.assertIn("radio_1.4GHz.fits", names)
        self.assertIn("gamma.fits", names)
        for name in names:
            with fits.open(self.folder / "one" / "maps" / name) as a, fits.open(self.folder / "two" / "maps" / name) as b:
                if not a[0].header["NAXIS"]:
                    continue
                first, second = a[0].data.astype(float), b[0].data.astype(float)
                peak = np.nanmax(np.abs(first))
                self.assertGreater(peak, 0, name)
                # float32: spectra and field each once more
                self.assertLess(np.nanmax(np.abs(first - second)) / peak, 2e-6, name)
                bright = np.abs(first) > 1e-3 * peak
                self.assertGreater(bright.sum(), 20, name)
                self.assertLess(np.nanmax(np.abs(second[bright] / first[bright] - 1)), 2e-6, name)

    def test_a_file_that_replaced_the_formulas_can_be_solved_again(self):
        self.solve()
        with fits.open(self.file) as hdus:
            protons = hdus["CR_PROTON"].data
        media = MEDIA[MEDIA.index("[radiation.component"):]  # field and gas from the file alone
        again = self.write("again.toml", 'input.grid = "halo.fits"\nelectrons.source = "transport"\n'
                           'protons.source = "transport"\n' + media + TRANSPORT)
        second = self.folder / "second.fits"
        done = run("spectra", again, "-o", second)
        self.assertEqual(done.returncode, 0, done.stderr)
        np.testing.assert_allclose(fits.getdata(second, "CR_PROTON"), protons, rtol=2e-5)
        self.fails(6, "input of this run", arguments=[again, "-o", self.file, "--force"])

    def test_the_summary_adds_up(self):
        done = self.solve()
        self.assertEqual(done.stderr.count("error"), 0)
        for line in done.stdout.splitlines():
            if str(self.file) not in line:
                self.assertLessEqual(len(line), 80, line)
        rows = [line for line in done.stdout[done.stdout.index("\ninjected"):].splitlines() if line]
        table = [line[23:].split() for line in rows if re.match(r"injected|  [a-z]", line)]
        numbers = np.array([[0 if cell == "-" else float(cell) for cell in row] for row in table])
        self.assertEqual(numbers.shape[1], 4)
        np.testing.assert_allclose(numbers[1:].sum(0), numbers[0], rtol=len(numbers) * 5e-4)  # four digits printed
        rate = re.search(r"scattering rate +(\S+) s-1 at 1 GV, (\S+) of the empirical", done.stdout)
        self.assertAlmostEqual(float(rate.group(1)) / 1e-9, float(rate.group(2)), delta=2e-3)
        self.assertRegex(done.stdout, r"grammage there, g/cm2( +[0-9.e+-]+){3}\n")
        # the energy density of the protons, again from the file: T N dT over the cells around 8 kpc
        density = float(re.search(r"protons +(\S+) eV cm-3", done.stdout).group(1))
        with fits.open(self.file) as hdus:
            energy = hdus["E_PROTON"].data
            inner = np.searchsorted(hdus["R_EDGES"].data, 8.0) - 1
            spectra = hdus["CR_PROTON"].data[0, inner - 1:inner + 2]
        trapezoid = np.trapz(spectra * energy ** 2, np.log(energy)) * 1e9
        self.assertGreater(density, 0.98 * trapezoid.min())
        self.assertLess(density, 1.05 * trapezoid.max())

    def test_equal_input_gives_equal_bytes_on_one_thread_and_two(self):
        environment = dict(os.environ, SOURCE_DATE_EPOCH="1700000000")
        contents = []
        for threads in (1, 2):
            self.solve("--force", "--threads", threads, "--quiet", env=environment)
            with fits.open(self.file) as hdus:
                contents.append({hdu.name: hdu.header["DATASUM"] for hdu in hdus})
        self.assertEqual(*contents)
        first = self.file.read_bytes()
        self.solve("--force", "--threads", 2, "--quiet", env=environment)
        self.assertEqual(first, self.file.read_bytes())

    def test_a_cartesian_scenario_gives_a_cartesian_file(self):
        box = 'geometry = "XYZ"\nhalf_width = "10 kpc"\nheight = "8 kpc"\ncells_xy = 10\ncells_z = 8\n[field.ordered]'
        self.scenario.write_text("[grid]\n" + box + MEDIA[MEDIA.index("[field.ordered]") + 15:] + TRANSPORT)
        self.solve()
        self.assertEqual(fits.getheader(self.file)["GEOMETRY"], "XYZ")
        data = fits.getdata(self.file, "CR_ELECTRON")
        self.assertEqual(data.shape[:3], (8 if not fits.getheader(self.file)["ZMIRROR"] else data.shape[0], 10, 10))
        np.testing.assert_allclose(data, data[:, ::-1], rtol=1e-5)
        np.testing.assert_allclose(data, np.swapaxes(data, 1, 2), rtol=1e-5)
        self.assertEqual(run("inspect", self.file, "-q").stdout, "")

    def test_quiet_is_quiet_and_one_species_has_a_file_too(self):
        done = self.solve("-q", "--set", "transport.secondaries=false")
        self.assertEqual((done.stdout, done.stderr), ("", ""))
        with fits.open(self.file) as hdus:
            self.assertIn("CR_ELECTRON", hdus)
            self.assertNotIn("CR_POSITRON", hdus)
            self.assertFalse(hdus[0].header["SECONDAR"])

    def test_old_particles_of_young_sources_are_warned_of(self):
        done = self.solve("--set", "transport.source_age=1 Myr")
        self.assertIn("older than the sources (1 Myr)", done.stderr)

    def test_wrong_use_leaves_nothing_behind(self):
        self.fails(2, arguments=[self.scenario])
        self.fails(2, "nonsense", arguments=[self.scenario, "-o", self.file, "--nonsense"])
        self.fails(2, "powres", '"powers"', arguments=[self.scenario, "-o", self.file, "--law", "powres"])
        two = self.write("two.toml", MEDIA + TRANSPORT + SECOND_LAW)
        self.fails(2, "--law", "even, powers", arguments=[two, "-o", self.file])
        plain = self.write("plain.toml", MEDIA)
        self.fails(3, "[transport]", arguments=[plain, "-o", self.file])
        self.fails(3, "law.powers.slope", arguments=[self.scenario, "-o", self.file, "--set", "law.powers.slope=steep"])
        self.fails(4, "nowhere.toml", arguments=[self.folder / "nowhere.toml", "-o", self.file])
        self.fails(6, "input of this run", arguments=[self.scenario, "-o", self.scenario, "--force"])
        os.link(self.scenario, self.folder / "linked.fits")
        self.fails(6, "input of this run", arguments=[self.scenario, "-o", self.folder / "linked.fits", "--force"])
        self.fails(6, "no_such_folder", arguments=[self.scenario, "-o", self.folder / "no_such_folder" / "halo.fits"])
        self.file.write_text("mine")
        self.fails(6, "--force", arguments=[self.scenario, "-o", self.file])
        self.assertEqual(self.file.read_text(), "mine")
        self.solve("--force")
        self.assertEqual(fits.getheader(self.file)["FMTNAME"], "HALO-GRID")

    def test_a_law_that_does_not_settle_has_no_file(self):
        self.scenario.write_text(MEDIA + TRANSPORT[:TRANSPORT.index("[law")] + STREAMING)
        settled = 0
        for field in ("8 uG", "0.5 uG"):  # the second is hard for the iteration
            done = run("spectra", self.scenario, "-o", self.file, "--force", "--set", f"field.random.value={field}")
            self.assertEqual((done.returncode, self.file.exists()), (0, True) if done.returncode == 0 else (5, False), done.stderr)
            if done.returncode == 5:
                self.assertIn("law 'streaming'", done.stderr)
                self.assertIn("did not settle", done.stderr)
                self.assertEqual(done.stdout, "")
            else:
                settled += 1
                self.assertIn("unstable", done.stderr)
                self.assertLess(fits.getheader(self.file)["CONFLAST"], 1e-2)
                self.file.unlink()
        self.assertGreaterEqual(settled, 1)

    def test_an_interrupt_leaves_nothing(self):
        big = [word for key in ("grid.cells_r=120", "grid.cells_z=120", "transport.bins_per_decade=32")
               for word in ("--set", key)]
        before = sorted(os.listdir(self.folder))
        process = subprocess.Popen([PROGRAM, "spectra", self.scenario, "-o", self.file, "--threads", "1", *big],
                                   stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True)
        time.sleep(1.0)
        process.send_signal(signal.SIGINT)
        _, stderr = process.communicate(timeout=60)
        self.assertEqual(process.returncode, 130, stderr)
        self.assertEqual(sorted(os.listdir(self.folder)), before)


if __name__ == "__main__":
    result = unittest.main(argv=sys.argv[:1], exit=False).result
    sys.exit(0 if result.wasSuccessful() and result.testsRun > 0 else 1)
