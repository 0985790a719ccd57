#!/usr/bin/python3
"""Runs the commands of docs/three_laws.md on a coarser grid and compares what it quotes: tutorial_test.py AUREOLE PROJECT.

The page's numbers are those of 48 x 64 cells, these of 24 x 40: integrals and heights change by up to 2 %, which is why TOLERANCE is
3 %. Words and the number of figures in a block must agree exactly. Exits 1 on a failure.
"""
import pathlib
import re
import shlex
import subprocess
import sys
import tempfile

from astropy.table import Table

TOLERANCE = 0.03
COARSER = ("grid.cells_r=24", "grid.cells_z=40", "transport.bins_per_decade=6", 'map.pixel="5 arcsec"', "accuracy.estimate=false")
NUMBER = re.compile(r"[-+]?\d+(?:\.\d+)?(?:[eE][-+]?\d+)?$")
failures = []


def check(truth, what):
    if not truth:
        failures.append(what)
        print("FAILED:", what)


def blocks(page):
    """(kind, text) of each fenced block."""
    return [(m[1], m[2]) for m in re.finditer(r"^```(\w+)\n(.*?)^```$", page, re.M | re.S)]


def here(commands, aureole, project):
    """The commands as they are run in the test: this program, these scripts, a coarser grid, only the figures that compare laws."""
    coarse = " ".join("--set " + shlex.quote(one) for one in COARSER)
    text = re.sub(r"(predict (?!.*--dry-run).*)$", rf"\1 {coarse}", commands, flags=re.M)
    text = re.sub(r"(scripts/figures\.py \S+)$", r"\1 --laws", text, flags=re.M)
    return text.replace("build/aureole", shlex.quote(aureole)).replace("scripts/figures.py", shlex.quote(f"{project}/scripts/figures.py"))


def compare(found, quoted, what):
    """Words alike, numbers to TOLERANCE or half of the last digit quoted."""
    ours, theirs = found.split(), quoted.split()
    check(len(ours) == len(theirs), f"{what}: found {len(ours)} words, the page has {len(theirs)}")
    for mine, page in zip(ours, theirs):
        if NUMBER.match(page) and NUMBER.match(mine):
            check(close(float(mine), page), f"{what}: found {mine}, the page has {page}")
        else:
            check(mine == page, f"{what}: found {mine!r}, the page has {page!r}")


def close(value, text):
    mantissa, _, power = text.lower().partition("e")
    digit = 10.0 ** (int(power or 0) - len(mantissa.partition(".")[2]))
    return abs(value - float(text)) <= max(TOLERANCE * abs(float(text)), 0.51 * digit)


def ratio(values):
    return max(values) / min(values)


def prose(page, folder):
    """Numbers in the text between the tables."""
    def laws(run):
        return Table.read(folder / run / "tables/laws.ecsv")

    def heights(run, name):
        table = Table.read(folder / run / "tables/law_heights.ecsv")
        return [row["h"] for row in table if row["map"] == name and row["strip"] == -1 and row["chosen"]]

    page = " ".join(page.split())
    before, after = laws("results"), laws("same_density")
    low, high = heights("same_density", "144 MHz"), heights("same_density", "6 GHz")
    falls = [100 * (1 - b / a) for a, b in zip(low, high)]
    percent = {c: 100 * (ratio(after[c]) - 1) for c in ("grammage_10gv", "radio_luminosity", "gamma_luminosity")}
    # What the page says, the values, and by how much they may differ: shares of small differences in points of a percent.
    for pattern, values, margin in (
            (r"at 10 GV differs by a factor ([\d.]+), the gamma-ray luminosity by ([\d.]+) and the radio luminosity by ([\d.]+)\.",
             [ratio(before[c]) for c in ("grammage_10gv", "gamma_luminosity", "radio_luminosity")], None),
            (r"at 10 GV agrees within ([\d.]+) %, the radio luminosity within ([\d.]+) % and the gamma-ray luminosity within ([\d.]+) %",
             [percent[c] for c in ("grammage_10gv", "radio_luminosity", "gamma_luminosity")], 3),
            (r"needs ([\d.]+) times the rate, `mine` ([\d.]+) times", after["factor"][1:], None),
            (r"still differ: ([\d.]+), ([\d.]+) and ([\d.]+) kpc", low, None),
            (r"heights fall by ([\d.]+) %, ([\d.]+) % and ([\d.]+) %", falls, 2),
            (r"Ages differ by a factor ([\d.]+)", [ratio(after["age_10gv"])], 0.2)):
        said = re.search(pattern, page)
        check(said is not None, f"the page no longer says {pattern}")
        for value, text in zip(values, said.groups() if said else ()):
            good = close(value, text) if margin is None else abs(value - float(text)) <= margin
            check(good, f"the page says {text} in {pattern}, found {value:.4g}")


def main():
    aureole, project = str(pathlib.Path(sys.argv[1]).resolve()), pathlib.Path(sys.argv[2]).resolve()
    page = (project / "docs/three_laws.md").read_text(encoding="utf-8")
    with tempfile.TemporaryDirectory() as name:
        folder, output, quotes = pathlib.Path(name), "", 0
        for kind, text in blocks(page):
            if kind == "text":
                compare(output, text, f"block {quotes + 1} of the output")
                quotes += 1
                continue
            check(kind == "sh", f"a block of {kind}, expected sh or text")
            done = subprocess.run(["bash", "-e"], input=here(text, aureole, project), cwd=folder, capture_output=True, text=True)
            check(done.returncode == 0, f"exit {done.returncode} of {text!r}: {done.stderr[-600:]}")
            # A block may begin with a run; what it quotes is what its last command prints.
            output = done.stdout[done.stdout.rfind("law               factor"):] if "laws.py" in text else done.stdout
        check(quotes == 2, f"the page quotes {quotes} outputs, expected 2")
        if not failures:
            prose(page, folder)
        for run in ("results", "same_density"):
            for figure in ("pressure", "spectra", "heights", "budgets", "numbers"):
                check((folder / run / f"figures/law_{figure}.png").is_file(), f"{run}: no law_{figure}.png")
    print("failures:", len(failures))
    return 1 if failures else 0


if __name__ == "__main__":
    sys.exit(main())
