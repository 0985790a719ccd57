#!/usr/bin/env python3
"""Reads tables and JSON that aureole wrote with astropy and json: read_tables.py TEST_FILES_PROGRAM"""
import json
import math
import os
import pathlib
import subprocess
import sys
import tempfile

from astropy.table import Table


def check(condition, what):
    if not condition:
        sys.exit(f"failed: {what}")


def main():
    with tempfile.TemporaryDirectory() as folder:
        subprocess.run([sys.argv[1], "[write-tables]"], check=True, stdout=subprocess.DEVNULL,
                       env={**os.environ, "AUREOLE_TEST_OUTPUT": folder})
        place = pathlib.Path(folder)
        table = Table.read(place / "table.ecsv", format="ascii.ecsv")
        value = json.loads((place / "value.json").read_text(encoding="utf-8"))
    check(len(table) == 4 and table.colnames == ["height", "count", "name", "good", "flux"], "shape of the table")
    height = list(table["height"])
    check(height[0] == 0.1 and height[1] == 1 / 3 and math.isnan(height[2]) and height[3] == -math.inf, "heights")
    check(str(table["height"].unit) == "kpc" and str(table["flux"].unit) == "Jy / beam", "units")
    check(table["height"].description == 'distance: "above" the plane', "description")
    check(list(table["count"]) == [1, -2, 3000000000, 0] and table["count"].dtype.kind == "i", "counts")
    check(list(table["name"]) == ["plain", "two words, a comma", 'say "so"', "#start"], f"names {list(table['name'])}")
    check(list(table["good"]) == [True, False, True, False] and table["good"].dtype.kind == "b", "booleans")
    check(list(table["flux"]) == [1e-30, 1.4e9, 5e-324, 0.0], "fluxes")
    check(table.meta == {"object": "NGC 1", "a: key": '1.4e9, "quoted" \\ # text'}, f"meta {table.meta}")
    check(value["text"] == 'quote " backslash \\ tab \t line \n end \x01', "JSON text")
    check(value["letters"] == "\u03b1\u20ac\U0001f300", "JSON letters")
    check(value["broken"].endswith("\ufffd") and " end" in value["broken"] and value["broken"].startswith("\ufffd"),
          f"JSON broken bytes {value['broken']!r}")
    check(not any(0xD800 <= ord(c) < 0xE000 for c in value["broken"]), "JSON surrogates")
    check(value["numbers"] == [0.1, 1e300, 5e-324, 0.0, 42, 7, -3], "JSON numbers")
    check(value["nothing"] == [None, None, None] and value["flags"] == [True, False], "JSON nothing")
    check(value["empty"] == {"list": [], "object": {}}, "JSON empty")
    print("table and JSON read back")


if __name__ == "__main__":
    main()
