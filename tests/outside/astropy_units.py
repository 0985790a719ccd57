#!/usr/bin/env python3
"""Compares every unit that aureole reads with astropy's reading of the same string.

Usage: astropy_units.py BUILD_DIR/tests/test_base
The test program prints its table under the hidden tag [print-units]. Exit code 1 if a size differs by more
than 1e-13 (1e-4 where a measured constant enters), or a dimension differs.
"""
import subprocess
import sys
import warnings

from astropy import units as u

BASE = (u.cm, u.g, u.s, u.K, u.G, u.rad, u.beam, u.pix)
MEASURED = ("solMass",)


def read(text):
    text = text.replace("^", "**")
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")
        try:
            return u.Unit(text, format="fits")
        except ValueError:
            return u.Unit(text)


def main():
    printed = subprocess.run([sys.argv[1], "[print-units]"], capture_output=True, text=True, check=True).stdout
    rows = [line.split("|")[1:] for line in printed.splitlines() if line.startswith("unit|")]
    worst, failures = 0.0, 0
    for text, factor, exponents in rows:
        expected = u.Unit("")
        for base, power in zip(BASE, exponents.split()):
            expected = expected * base ** int(power)
        unit = read(text)
        for particle in (u.ph, u.ct):  # pure numbers in aureole
            powers = dict(zip(unit.bases, unit.powers))
            if particle in powers:
                unit = unit / particle ** powers[particle]
        size = unit.to(expected) if unit.is_equivalent(expected) else None
        if size is None:
            print(f"{text}: astropy has {unit.physical_type}, aureole {expected}")
            failures += 1
            continue
        error = abs(float(factor) / size - 1)
        worst = max(worst, error)
        if error > (1e-4 if any(name in text for name in MEASURED) else 1e-13):
            print(f"{text}: astropy {size!r}, aureole {factor}")
            failures += 1
    print(f"{len(rows)} units, largest relative difference {worst:.1e}, {failures} failures")
    return 1 if failures or len(rows) < 50 else 0


if __name__ == "__main__":
    sys.exit(main())
