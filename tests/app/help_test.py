#!/usr/bin/python3
"""Compares the help texts of the program with its manual pages, its completion and the documents, and the documents with
the results of a small run: help_test.py PROGRAM SOURCE_FOLDER."""
import json
import math
import os
import pathlib
import re
import shutil
import subprocess
import sys
import tempfile
import unittest

sys.dont_write_bytecode = True
PROGRAM = os.path.abspath(sys.argv.pop(1))
SOURCE = pathlib.Path(sys.argv.pop(1)).resolve()
COMPLETION = SOURCE / "scripts/completion/aureole.bash"
VERBS = ("predict", "spectra", "scenario", "laws", "inspect", "heights")
LONG = re.compile(r"(?<![\w-])--[a-z][a-z-]*")
skipped = []


def run(*arguments):
    return subprocess.run([PROGRAM, *arguments], capture_output=True, text=True, timeout=60)


def options_of_help(*verb):
    """Long options at the start of a line, with their other names."""
    found = set()
    for line in run(*verb, "--help").stdout.splitlines():
        names = re.match(r"  (-[-\w,]+)(\s|$)", line)
        if names:
            found |= {name for name in names.group(1).split(",") if name.startswith("--")}
    return found


def page_of(verb):
    return SOURCE / "docs/man" / (f"aureole-{verb}.1" if verb else "aureole.1")


def options_of_page(verb):
    """Long options in the tag line of a .TP entry."""
    lines = page_of(verb).read_text().replace("\\-", "-").splitlines()
    return {name for above, line in zip(lines, lines[1:]) if above == ".TP" for name in LONG.findall(line)}


def names_of_laws():
    """First words of the lines of the list; what goes on below is indented."""
    return {line.split()[0] for line in run("laws").stdout.splitlines() if not line.startswith(" ")}


def completions(*words, folder=None):
    """What the completion offers for the last word."""
    script = (f'source "{COMPLETION}"; COMP_WORDS=("$@"); COMP_CWORD=$(($# - 1)); _aureole; '
              'printf "%s\\n" "${COMPREPLY[@]}"')
    done = subprocess.run(["bash", "-c", script, "bash", *words], capture_output=True, text=True, timeout=60, cwd=folder)
    assert done.returncode == 0, done.stderr
    assert done.stderr == "", done.stderr
    return {line for line in done.stdout.splitlines() if line}


class Help(unittest.TestCase):
    def test_help_goes_to_standard_output_and_fits_80_columns(self):
        for verb in ((), *((v,) for v in VERBS)):
            for option in ("--help", "-h"):
                done = run(*verb, option)
                self.assertEqual((done.returncode, done.stderr), (0, ""), verb)
                self.assertGreater(len(done.stdout.splitlines()), 5, verb)
                for line in done.stdout.splitlines():
                    self.assertLessEqual(len(line), 80, line)

    def test_help_of_the_program_names_every_verb(self):
        text = run("--help").stdout
        listed = re.findall(r"^  ([a-z]+) ", text[text.index("Subcommands:"):], re.M)
        self.assertEqual(sorted(listed), sorted(VERBS))

    def test_version_is_a_name_and_three_numbers(self):
        done = run("--version")
        self.assertEqual((done.returncode, done.stderr), (0, ""))
        self.assertRegex(done.stdout.splitlines()[0], r"^aureole \d+\.\d+\.\d+$")

    def test_wrong_use_ends_with_2_and_says_what_was_wrong(self):
        for arguments in (("--nonsense",), ("nonsense",), (), ("predict",), ("predict", "--nonsense", "a.toml"),
                          ("heights",), ("inspect",), ("spectra",), ("spectra", "a.toml"), ("scenario", "--nonsense"), ("scenario", "nonsense"), ("laws", "--nonsense"),
                          ("laws", "nonsense")):
            done = run(*arguments)
            self.assertEqual((done.returncode, done.stdout), (2, ""), arguments)
            self.assertNotEqual(done.stderr, "", arguments)
        self.assertIn("nonsense", run("predict", "--nonsense", "a.toml").stderr)
        self.assertIn('"falling"', run("laws", "faling").stderr)


class Pages(unittest.TestCase):
    def test_pages_and_help_name_the_same_options(self):
        for verb in VERBS:
            shown = options_of_help(verb)
            self.assertIn("--help", shown)
            self.assertEqual(shown, options_of_page(verb), verb)
        self.assertEqual(options_of_help(), options_of_page(""))

    def test_pages_carry_the_version_of_the_program(self):
        version = run("--version").stdout.splitlines()[0]
        for verb in ("", *VERBS):
            self.assertIn(f'"{version}"', page_of(verb).read_text().splitlines()[0])

    def test_every_starter_has_its_line_in_the_page(self):
        text = page_of("scenario").read_text()
        starters = [line.split()[0] for line in run("scenario").stdout.splitlines()]
        self.assertGreaterEqual(len(starters), 3)
        for name in starters:
            self.assertIn(f".B {name}\n", text)

    def test_every_law_has_its_line_in_the_page_and_80_columns(self):
        text = page_of("laws").read_text()
        laws = names_of_laws()
        self.assertGreaterEqual(len(laws), 14)
        for name in laws:
            self.assertIn(f".B {name}\n", text)
            done = run("laws", name)
            self.assertEqual((done.returncode, done.stderr), (0, ""), name)
            self.assertTrue(done.stdout.startswith(f"{name}: ") and done.stdout.isascii(), name)
            for line in (*done.stdout.splitlines(), *run("laws").stdout.splitlines()):
                self.assertLessEqual(len(line), 80, line)

    def test_pages_render_without_warnings(self):
        if shutil.which("man"):
            command = ["man", "--warnings", "-E", "UTF-8", "-l", "-Tutf8", "-Z"]
        elif shutil.which("groff"):
            command = ["groff", "-man", "-ww", "-Tutf8", "-Z"]
        else:
            skipped.append("rendering of the manual pages (neither man nor groff)")
            self.skipTest(skipped[-1])
        for verb in ("", *VERBS):
            done = subprocess.run([*command, str(page_of(verb))], capture_output=True, text=True, timeout=60,
                                  env={**os.environ, "MANROFFSEQ": "", "LC_ALL": "C.UTF-8"})
            self.assertEqual((done.returncode, done.stderr), (0, ""), page_of(verb))
            self.assertIn("aureole", done.stdout)

    def test_no_line_of_the_pages_is_hard_to_render(self):
        for verb in ("", *VERBS):
            text = page_of(verb).read_text()
            self.assertTrue(text.isascii())
            for number, line in enumerate(text.splitlines(), 1):
                self.assertNotEqual(line.strip(), "", f"{page_of(verb)}:{number}: blank line")


class Completion(unittest.TestCase):
    def test_the_script_is_sound_bash(self):
        self.assertEqual(subprocess.run(["bash", "-n", str(COMPLETION)], capture_output=True).stderr, b"")

    def test_completion_and_help_name_the_same_options(self):
        for verb in VERBS:
            self.assertEqual(completions(PROGRAM, verb, "--"), options_of_help(verb), verb)
        self.assertEqual(completions(PROGRAM, "--"), options_of_help())

    def test_verbs_and_starters_are_offered(self):
        self.assertEqual(completions(PROGRAM, ""), set(VERBS))
        self.assertEqual(completions(PROGRAM, "pr"), {"predict"})
        starters = {line.split()[0] for line in run("scenario").stdout.splitlines()}
        self.assertEqual(completions(PROGRAM, "scenario", ""), starters)
        self.assertEqual(completions(PROGRAM, "laws", ""), names_of_laws())
        self.assertEqual(completions(PROGRAM, "laws", "pa"), {"patchy"})

    def test_choices_are_those_of_the_help(self):
        for verb, option in (("predict", "--color"), ("heights", "--noise"), ("heights", "--sides")):
            text = run(verb, "--help").stdout
            choices = re.search(rf"{option} TEXT:\{{([^}}]*)\}}", text).group(1)
            self.assertEqual(completions(PROGRAM, verb, option, ""), set(choices.split(",")), option)
        listed = re.search(r"--model TEXT \.\.\.\s+(.*?);", run("heights", "--help").stdout, re.S).group(1)
        models = set(re.findall(r"\w+", listed)) - {"or"}
        self.assertEqual(completions(PROGRAM, "heights", "--model", ""), models)
        self.assertEqual(completions(PROGRAM, "predict", "--color", "=", "al"), {"always"})

    def test_files_that_fit_are_offered_with_blanks_in_their_names(self):
        with tempfile.TemporaryDirectory() as folder:
            for name in ("a.toml", "two words.toml", "map.fits", "notes.txt"):
                pathlib.Path(folder, name).touch()
            os.mkdir(os.path.join(folder, "sub"))
            self.assertEqual(completions(PROGRAM, "predict", "", folder=folder), {"a.toml", "two words.toml", "sub"})
            self.assertEqual(completions(PROGRAM, "spectra", "", folder=folder), {"a.toml", "two words.toml", "sub"})
            self.assertEqual(completions(PROGRAM, "spectra", "a.toml", "-o", "m", folder=folder), {"map.fits"})
            self.assertEqual(completions(PROGRAM, "heights", "m", folder=folder), {"map.fits"})
            self.assertEqual(completions(PROGRAM, "inspect", "", folder=folder),
                             {"a.toml", "two words.toml", "map.fits", "sub"})
            self.assertEqual(completions(PROGRAM, "predict", "-o", "s", folder=folder), {"sub"})


def header_keywords(path):
    """Keywords and names of table columns of all HDUs of a FITS file, read without a FITS library."""
    data, at, found = path.read_bytes(), 0, set()
    while at < len(data):
        cards = {}
        while "END" not in cards:
            for card in (data[i:i + 80].decode("ascii") for i in range(at, at + 2880, 80)):
                cards[card[:8].strip()] = card[10:].split("/")[0].strip()
            at += 2880
        found |= set(cards) | {value.split("'")[1].strip() for key, value in cards.items() if key.startswith("TTYPE")}
        axes = [int(cards[f"NAXIS{i + 1}"]) for i in range(int(cards["NAXIS"]))]
        size = abs(int(cards["BITPIX"])) // 8 * (math.prod(axes) if axes else 0) + int(cards.get("PCOUNT", 0))
        at += -(-size // 2880) * 2880
    return found - {""}


class Documents(unittest.TestCase):
    def test_commands_of_the_documents_use_options_that_exist(self):
        seen = 0
        for name in ("README.md", "docs/heights.md", "docs/results.md", "docs/grid_file.md", "docs/scenario.md", "docs/laws.md", "DEVELOPERS.md"):
            text = (SOURCE / name).read_text().replace("\\\n", " ")
            for verb, rest in re.findall(r"aureole (predict|spectra|scenario|laws|inspect|heights)\b([^`#\n]*)", text):
                seen += 1
                for option in LONG.findall(rest):
                    self.assertIn(option, options_of_help(verb), f"{name}: aureole {verb}{rest}")
        self.assertGreater(seen, 12)

    def test_links_between_the_documents_lead_somewhere(self):
        for path in (SOURCE / "README.md", SOURCE / "DEVELOPERS.md", *SOURCE.glob("docs/*.md")):
            for target in re.findall(r"\]\(([^)#:]+)\)", path.read_text()):
                self.assertTrue((path.parent / target).exists(), f"{path.name} links {target}")

    def test_the_page_of_results_names_every_column_keyword_and_member(self):
        words = set(re.findall(r"\w+", (SOURCE / "docs/results.md").read_text()))
        numbered = re.compile(r"(NAXIS|CTYPE|CRPIX|CRVAL|CDELT|CUNIT|PC|TTYPE|TFORM|TUNIT)[1-9_]*A?$")
        of_every_file = {"SIMPLE", "BITPIX", "EXTEND", "XTENSION", "PCOUNT", "GCOUNT", "TFIELDS", "EXTNAME", "NAXIS", "END"}
        with tempfile.TemporaryDirectory() as folder:
            scenario = pathlib.Path(folder, "a.toml")
            scenario.write_text(run("scenario", "edge_on_disc").stdout)
            small = ["grid.cells_r=6", "grid.cells_z=6", "map.pixel=30 arcsec", "radio.beam_major=60 arcsec", "map.polarisation=true",
                     "heights.strips=1", "heights.rms=", "heights.models=gaussian", "heights.to=0 kpc", "radio.frequencies=1 GHz, 3 GHz"]
            for gamma, more in (("energies", []), ("bands", ["gamma.energies=", "gamma.band_edges=1 GeV, 3 GeV, 20 GeV"])):
                out = pathlib.Path(folder, gamma)
                done = run("predict", str(scenario), "-o", str(out), *(word for key in (*small, *more) for word in ("--set", key)))
                self.assertEqual(done.returncode, 0, done.stderr)
                for path in out.glob("maps/*.fits"):
                    keywords = {k for k in header_keywords(path) if not numbered.match(k)}
                    self.assertIn("DATASUM", keywords)
                    self.assertEqual(keywords - of_every_file - words, set(), path.name)
                for path in out.glob("tables/*.ecsv"):
                    columns = next(line for line in path.read_text().splitlines() if not line.startswith("#")).split(",")
                    self.assertEqual(set(columns) - words, set(), path.name)
                summary = json.loads((out / "summary.json").read_text())
                self.assertEqual({*summary, *summary["view"], *summary["maps"][0]} - words, set())
                self.assertEqual(len(list(out.glob("tables/*.ecsv"))), 4)
                left_out = [re.sub(r"\W+", " ", line).strip().lower() for line in summary["leaves_out"]]
                readme = re.sub(r"\W+", " ", (SOURCE / "README.md").read_text()).lower()
                for line in left_out:
                    self.assertIn(line, readme)


if __name__ == "__main__":
    outcome = unittest.main(exit=False, verbosity=1).result
    print(f"{len(skipped)} parts skipped" + "".join(f"\n  {part}" for part in skipped))
    sys.exit(0 if outcome.wasSuccessful() else 1)
