"""What figures.py reads from an output folder of aureole, and the words it writes."""
import json
import pathlib
import sys
import warnings

import numpy as np
from astropy import units as u
from astropy.io import fits
from astropy.table import Table


class Missing(Exception):
    """Data of one figure are not in the folder: the figure is skipped."""


class Unusable(Exception):
    """The folder, or a file in it, cannot be read."""


def read_summary(folder):
    path = folder / "summary.json"
    if not folder.is_dir():
        raise Unusable(f"{folder}: no such folder")
    if not path.is_file():
        raise Unusable(f"{folder}: no summary.json in it; expected the output folder of 'aureole predict' or 'aureole heights'")
    try:
        summary = json.loads(path.read_text(encoding="utf-8"))
    except (OSError, ValueError) as error:
        raise Unusable(f"{path}: not readable as JSON: {error}") from None
    if not isinstance(summary, dict) or not isinstance(summary.get("maps", []), list):
        raise Unusable(f"{path}: found no summary of a run, expected an object with a list \"maps\"")
    return summary


def listed_laws(folder, summary):
    """(name, folder) of each law of a run of several; empty for other runs."""
    laws = summary.get("laws") or []
    if not isinstance(laws, list) or not all(isinstance(law, dict) and law.get("law") and law.get("folder") for law in laws):
        raise Unusable(f"{folder / 'summary.json'}: \"laws\": expected a list of objects with \"law\" and \"folder\"")
    return [(str(law["law"]), folder / str(law["folder"])) for law in laws]


def read_table(folder, name, needed):
    """The table, or Missing if there is none or it has no rows."""
    path = folder / "tables" / f"{name}.ecsv"
    if not path.is_file():
        raise Missing(f"no tables/{name}.ecsv")
    try:
        table = Table.read(path, format="ascii.ecsv")
    except Exception as error:  # astropy raises many kinds for broken tables
        raise Unusable(f"{path}: not readable as ECSV: {' '.join(str(error).split())[:200]}") from None
    absent = [column for column in needed if column not in table.colnames]
    if absent:
        raise Unusable(f"{path}: column {absent[0]} is missing")
    if len(table) == 0:
        raise Missing(f"tables/{name}.ecsv has no rows")
    return table


def numbers(table, column):
    return np.ma.filled(np.ma.asarray(table[column], dtype=float), np.nan)


def flags(table, column):
    return np.array([str(value).lower() in ("true", "1") for value in table[column]])


def texts(table, column):
    return np.array([str(value) for value in table[column]])


def read_map(path):
    """Planes [k, y, x] and header of the first image; the bands table as [(low, high)] in GeV, empty if there is none."""
    try:
        with warnings.catch_warnings():
            warnings.simplefilter("ignore")
            with fits.open(path, memmap=False) as hdus:
                header, data = hdus[0].header, hdus[0].data
                if data is None or data.ndim not in (2, 3, 4):
                    raise ValueError("the first HDU holds no image of 2 to 4 axes")
                bands = []
                if "ENERGIES" in hdus:
                    nodes = in_gev(hdus["ENERGIES"], "ENERGY")
                    bands = list(zip(nodes, nodes))
                elif "EBOUNDS" in hdus:
                    bands = list(zip(in_gev(hdus["EBOUNDS"], "E_MIN"), in_gev(hdus["EBOUNDS"], "E_MAX")))
                planes = data.reshape((-1,) + data.shape[-2:]).astype(float)
                if bands and len(bands) != len(planes):
                    raise ValueError(f"{len(planes)} planes, but {len(bands)} rows in the bands table")
                for key in ("CDELT1", "CDELT2", "CRPIX1", "CRPIX2"):
                    if key not in header:
                        raise ValueError(f"keyword {key} is missing")
                return planes, header, bands
    except (OSError, ValueError, TypeError, KeyError, IndexError) as error:
        raise Unusable(f"{path}: not readable as a FITS map: {' '.join(str(error).split())[:200]}") from None


def in_gev(hdu, column):
    unit = hdu.columns[column].unit or "keV"  # the gamma-ray formats say keV
    return np.asarray(hdu.data[column], float) * u.Unit(unit).to("GeV")


def listed_maps(folder, summary, band):
    """(path, entry) of the maps of a band, in the order of the summary, each file once. Paths count from the folder, else from here."""
    found, seen = [], set()
    for entry in summary.get("maps", []):
        if not isinstance(entry, dict) or entry.get("band") != band or not entry.get("file"):
            continue
        path = next((p for p in (folder / entry["file"], pathlib.Path(entry["file"])) if p.is_file()), None)
        if path is None:
            print(f"not found: {entry['file']}", file=sys.stderr)
        elif path not in seen:
            seen.add(path)
            found.append((path, entry))
    return found


def some_of(items, most=9):
    """At most `most`, evenly chosen with the first and the last."""
    if len(items) <= most:
        return list(items)
    return [items[round(i * (len(items) - 1) / (most - 1))] for i in range(most)]


def frequency_text(hertz):
    for size, unit in ((1e9, "GHz"), (1e6, "MHz"), (1e3, "kHz")):
        if hertz >= size:
            return f"{hertz / size:.4g} {unit}"
    return f"{hertz:.4g} Hz"


def energy_text(low, high):
    def one(gev):
        size, unit = next(((s, n) for s, n in ((1e6, "PeV"), (1e3, "TeV"), (1, "GeV"), (1e-3, "MeV")) if gev >= s * 0.9999), (1e-6, "keV"))
        return f"{gev / size:.3g} {unit}"
    return one(low) if high <= low * 1.000001 else f"{one(low)} - {one(high)}"


def unit_text(unit):
    """FITS unit string for a label: exponents raised, no TeX command left over."""
    words = []
    for word in unit.replace("**", "").replace("^", "").split():
        head = word.rstrip("0123456789+-")
        tail = word[len(head):]
        words.append(f"{head}$^{{{tail}}}$" if head and tail else word)
    return " ".join(words)


def scaled_unit(unit, peak):
    """Factor and label that bring the peak between about 0.1 and 1000."""
    if not unit:
        return 1.0, ""
    if not np.isfinite(peak) or peak <= 0:
        return 1.0, unit_text(unit)
    if unit.startswith("Jy"):
        for factor, prefix in ((1, ""), (1e3, "m"), (1e6, "\N{MICRO SIGN}"), (1e9, "n")):
            if peak * factor >= 0.3:
                break
        return factor, prefix + unit_text(unit)
    if 0.05 <= peak < 2000:
        return 1.0, unit_text(unit)
    power = int(np.floor(np.log10(peak)))
    return 10.0 ** -power, f"10$^{{{power}}}$ {unit_text(unit)}"


def process_text(process):
    proper = {"compton": "Compton", "cmb": "CMB", "hi": "HI", "h2": "H2", "hii": "HII"}
    return ", ".join(" ".join(proper.get(word, word) for word in part.split("_")) for part in process.split(":"))
