#!/usr/bin/python3
"""Writes an invented output folder in the form `aureole predict` leaves it, for tests of readers: fake_results.py DIR.

The galaxy is a pair of exponential layers with closed-form maps; nothing here comes from the program. Options of `write` leave parts
out, so that readers can be tested with incomplete folders.
"""
import json
import pathlib
import sys

import numpy as np
from astropy.io import fits
from astropy.table import Table

FREQUENCIES = (144e6, 1.4e9, 4.85e9, 10e9)  # Hz
ENERGIES = (0.03, 0.1, 1.0, 10.0, 100.0, 1000.0)  # GeV
PROCESSES = ("inverse_compton:cmb", "inverse_compton:dust", "inverse_compton:stars", "bremsstrahlung:hi", "pion_decay")
DISTANCE, PIXELS, PIXEL_KPC, BEAM_KPC = 11000.0, 192, 0.25, (1.9, 1.1, 30.0)  # kpc, -, kpc, kpc kpc deg
H0, ETA, POSITION_ANGLE = 1.6, -0.22, 62.0  # kpc at 1.4 GHz, -, deg
NAME = "Lorimel"


def label(frequency):
    return f"{frequency / 1e6:g} MHz" if frequency < 1e9 else f"{frequency / 1e9:g} GHz"


def scale_height(frequency):
    return H0 * (frequency / 1.4e9) ** ETA


def layer(height, length=4.0):
    """Edge-on layer turned to POSITION_ANGLE, brighter towards one end; peak near 1; [y, x] with East to the left."""
    step = np.arange(PIXELS) - (PIXELS - 1) / 2
    east, north = -step[None, :] * PIXEL_KPC, step[:, None] * PIXEL_KPC
    angle = np.radians(POSITION_ANGLE)
    along = east * np.sin(angle) + north * np.cos(angle)
    above = east * np.cos(angle) - north * np.sin(angle)
    return np.exp(-np.hypot(along, 1) / length - np.hypot(above, 0.3) / height) * (1 + 0.3 * np.tanh(along / 3)) * 1.5


def sky_header(unit, third):
    degree = np.degrees(PIXEL_KPC / DISTANCE)
    cards = {"BUNIT": unit, "OBJECT": NAME, "ORIGIN": "invented", "RADESYS": "ICRS", "DISTKPC": DISTANCE, "INCLDEG": 90.0,
             "PADEG": POSITION_ANGLE}
    for axis, kind, sign in ((1, "RA---TAN", -1), (2, "DEC--TAN", 1)):
        cards |= {f"CTYPE{axis}": kind, f"CUNIT{axis}": "deg", f"CRVAL{axis}": 40.0 * axis, f"CRPIX{axis}": (PIXELS + 1) / 2,
                  f"CDELT{axis}": sign * degree}
    cards |= third
    cards["WCSNAMEA"] = "PHYSICAL_KPC"
    for axis, sign in ((1, -1), (2, 1)):
        cards |= {f"CTYPE{axis}A": "OFFSET_" + "XY"[axis - 1], f"CUNIT{axis}A": "kpc", f"CRVAL{axis}A": 0.0,
                  f"CRPIX{axis}A": (PIXELS + 1) / 2, f"CDELT{axis}A": sign * PIXEL_KPC}
    return fits.Header(cards)


def beam_cards():
    return {"BMAJ": np.degrees(BEAM_KPC[0] / DISTANCE), "BMIN": np.degrees(BEAM_KPC[1] / DISTANCE), "BPA": BEAM_KPC[2]}


def write_radio(folder, noise):
    listed = []
    for frequency in FREQUENCIES:
        peak = 4e-3 * (frequency / 1.4e9) ** -0.8
        image = peak * (layer(scale_height(frequency)) + noise.normal(0, 2e-3, (PIXELS, PIXELS)))
        name = f"maps/radio_{label(frequency).replace(' ', '')}.fits"
        header = sky_header("Jy/beam", {"CTYPE3": "FREQ", "CUNIT3": "Hz", "CRVAL3": frequency, "CRPIX3": 1.0, "CDELT3": 1e6})
        header.update(beam_cards(), BTYPE="Intensity", RESTFRQ=frequency, RMSNOISE=2e-3 * peak)
        fits.PrimaryHDU(image[None].astype("f4"), header).writeto(folder / name)
        listed.append({"file": name, "band": "radio", "process": "total", "label": label(frequency), "frequency_hz": frequency,
                       "unit": "Jy/beam", "peak": float(image.max()), "flux": 1.0, "flux_unit": "Jy"})
    return listed


def write_gamma(folder):
    listed = []
    for process, share in (("total", 1.0), ("pion_decay", 0.4), ("inverse_compton:cmb", 0.25)):
        cube = np.array([share * 2e-11 * e ** -2.3 * layer(1.2 + 0.3 * np.log10(e) + 2 * ("compton" in process)) for e in ENERGIES])
        name = "maps/gamma.fits" if process == "total" else f"maps/gamma_{process.replace(':', '_')}.fits"
        header = sky_header("cm-2 s-1 sr-1 MeV-1", {"CTYPE3": "ENER-LOG", "CUNIT3": "MeV", "CRVAL3": 30.0, "CRPIX3": 1.0, "CDELT3": 30.0})
        header["BANDSHDU"] = "ENERGIES"
        nodes = fits.BinTableHDU.from_columns([fits.Column("ENERGY", "D", unit="MeV", array=1e3 * np.array(ENERGIES))], name="ENERGIES")
        fits.HDUList([fits.PrimaryHDU(cube.astype("f4"), header), nodes]).writeto(folder / name)
        listed += [{"file": name, "band": "gamma", "process": process, "label": f"{e:g} GeV", "energy_from_gev": e, "energy_to_gev": e,
                    "unit": "cm-2 s-1 sr-1 MeV-1", "peak": float(c.max()), "flux": 1e-12, "flux_unit": "cm-2 s-1 MeV-1"}
                   for e, c in zip(ENERGIES, cube)]
    return listed


def write_index(folder):
    low, high = FREQUENCIES[0], FREQUENCIES[1]
    one, two = layer(scale_height(low)), layer(scale_height(high))
    index = -0.8 + np.log(two / one) / np.log(high / low)
    index[one < 4e-3] = np.nan
    header = sky_header("", {"CTYPE3": "FREQ", "CUNIT3": "Hz", "CRVAL3": np.sqrt(low * high), "CRPIX3": 1.0, "CDELT3": 1e6})
    header.update(beam_cards(), BTYPE="Spectral index")
    fits.PrimaryHDU(index[None].astype("f4"), header).writeto(folder / "maps/spectral_index_144MHz_1.4GHz.fits")


def save(folder, name, columns, rows, units):
    table = Table(rows=rows, names=columns)
    for column, unit in units.items():
        table[column].unit = unit
    table.write(folder / "tables" / f"{name}.ecsv", delimiter=",")


def write_channels(folder):
    rows = []

    def row(band, name, frequency, energy, process, value, unit):
        above = 0.15 if energy > 300 else 0.001
        rows.append((band, name, frequency, energy, energy, process, value * 1e-53, "Jy" if band == "radio" else "cm-2 s-1 MeV-1", value,
                     unit, above, 0.0, 1e-4, 1e-3, 1e-3, 0.01))

    for frequency in FREQUENCIES:
        row("radio", label(frequency), frequency, np.nan, "total", 3e28 * (frequency / 1.4e9) ** -0.8, "erg s-1 Hz-1")
    slopes = {"inverse_compton:cmb": (2e38, 0.15), "inverse_compton:dust": (4e37, 0.1), "inverse_compton:stars": (1.5e38, -0.05),
              "bremsstrahlung:hi": (9e37, -0.7), "pion_decay": (6e38, -0.3)}
    for energy in ENERGIES:
        parts = {p: a * energy ** s * (energy / (energy + 0.3) if p == "pion_decay" else 1) for p, (a, s) in slopes.items()}
        for process, power in {"total": sum(parts.values()), **parts}.items():
            photons = power / (1.602176634e-3 * energy) / (energy * 1e3)  # erg s-1 -> s-1 MeV-1
            row("gamma", f"{energy:g} GeV", np.nan, energy, process, photons, "s-1 MeV-1")
    save(folder, "channels", ["band", "label", "frequency", "energy_from", "energy_to", "process", "flux", "flux_unit", "luminosity",
                              "luminosity_unit", "missing_above", "missing_below", "error_energy", "error_sight", "error_cells",
                              "flux_outside"], rows, {"frequency": "Hz", "energy_from": "GeV", "energy_to": "GeV"})


def write_profiles(folder, noise):
    rows = []
    for frequency in FREQUENCIES:
        for strip in (-1, 0, 1):
            peak, h = 4e-3 * (frequency / 1.4e9) ** -0.8, scale_height(frequency)
            for height in np.arange(-9, 9.01, 0.75):
                model = peak * np.exp(-np.hypot(height, 0.7) / h)
                error = peak * (2e-3 if strip < 0 else 4e-3)
                rows.append((label(frequency), frequency, strip, height, 0.75, model + noise.normal(0, error), error, model, "Jy/beam",
                             bool(1 <= abs(height) <= 6.5)))
    save(folder, "profiles", ["map", "frequency", "strip", "height", "width", "mean", "error", "model", "unit", "fitted"], rows,
         {"frequency": "Hz", "height": "kpc", "width": "kpc"})


def write_heights(folder, noise):
    rows, summary = [], []
    for frequency in FREQUENCIES:
        for strip in (-1, 0, 1):
            for model in ("exponential", "gaussian"):
                h = scale_height(frequency) * (1.0 if model == "exponential" else 1.5) * (1 + noise.normal(0, 0.015))
                rows.append((label(frequency), frequency, strip, model, False, "both", 0, model == "exponential", h, 0.02 * h, 0.05 * h,
                             0.09 * h, 0.004 * h, 1e-3, 14.0, 12.0, 20.0, "ok"))
        summary.append({"map": label(frequency), "frequency_hz": frequency, "h_kpc": scale_height(frequency)})
    save(folder, "heights", ["map", "frequency", "strip", "model", "forward", "side", "component", "chosen", "h", "error_noise",
                             "error_scatter", "error_distance", "error_numerical", "amplitude", "chi2", "dof", "aicc", "status"], rows,
         {"frequency": "Hz", **{c: "kpc" for c in ("h", "error_noise", "error_scatter", "error_distance", "error_numerical")}})
    save(folder, "exponents", ["model", "forward", "side", "component", "strip", "maps", "frequency", "h0", "h0_error", "eta", "eta_error",
                               "chi2", "dof"],
         [("exponential", False, "both", 0, -1, len(FREQUENCIES), 1.4e9, H0, 0.02, ETA, 0.012, 3.0, 2.0)],
         {"frequency": "Hz", "h0": "kpc", "h0_error": "kpc"})
    return summary


def write(folder, without=()):
    """Writes the folder (must not exist); `without` names parts of {radio, gamma, index, channels, profiles, heights}."""
    folder = pathlib.Path(folder)
    for part in ("maps", "tables"):
        (folder / part).mkdir(parents=True)
    noise = np.random.default_rng(20240817)
    maps, heights = [], []
    if "radio" not in without:
        maps += write_radio(folder, noise)
    if "gamma" not in without:
        maps += write_gamma(folder)
    if "index" not in without:
        write_index(folder)
    if "channels" not in without:
        write_channels(folder)
    if "profiles" not in without:
        write_profiles(folder, noise)
    if "heights" not in without:
        heights = write_heights(folder, noise)
    summary = {"aureole": "0.0.0", "title": "invented layers", "command": "fake_results.py", "scenario_hash": "0" * 64, "object": NAME,
               "view": {"inclination_deg": 90.0, "position_angle_deg": POSITION_ANGLE, "distance_kpc": DISTANCE,
                        "distance_error_kpc": 990.0},
               "maps": maps, "heights": heights, "exponent": {"eta": ETA, "eta_error": 0.012, "h0_kpc": H0, "frequency_hz": 1.4e9},
               "numerical_error": {}, "warnings": [], "leaves_out": []}
    (folder / "summary.json").write_text(json.dumps(summary, indent=2) + "\n")


if __name__ == "__main__":
    if len(sys.argv) != 2:
        sys.exit(__doc__)
    write(sys.argv[1])
