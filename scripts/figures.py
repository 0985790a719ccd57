#!/usr/bin/python3
"""Draws the results of `aureole predict` or `aureole heights`: figures.py DIR [-o FIGDIR] [--format png|pdf] [--contours]
[--laws].

Reads the folder DIR (summary.json, maps/, tables/) and writes into FIGDIR (default DIR/figures): radio_maps, gamma_maps and one more
per process with its own cube, profiles, heights, spectrum, spectral_index_*. Of a run that solved for scattering laws it draws
law_pressure, law_spectra, law_budgets, law_numbers and, of several laws, law_heights; the figures before then go into a folder per law.
Prints the path of each file written; a figure whose data are not there is skipped with one line. The same folder gives the same bytes.
Exit codes: 0 done, 2 wrong use or no usable folder, 6 figures cannot be written. Needs python3-numpy, python3-matplotlib, python3-astropy.
"""
import argparse
import os
import pathlib
import sys
import textwrap

import matplotlib

matplotlib.use("Agg")
import matplotlib.pyplot as plt
import numpy as np
from astropy import units as u
from matplotlib import colors, patches, patheffects, transforms

sys.dont_write_bytecode = True  # leave nothing beside the installed scripts
import law_figures
from figure_input import (Missing, Unusable, energy_text, flags, frequency_text, listed_laws, listed_maps, numbers, process_text, read_map,
                          read_summary, read_table, scaled_unit, some_of, texts)
from figure_style import DASHES, MARKERS, PALETTE, STYLE, plain_ticks, title

# ---- maps ------------------------------------------------------------------------------------------------------------------------------

class Sky:
    """Offsets of a map from its reference point, in one angular unit, East growing to the left."""

    def __init__(self, header, shape):
        self.header = header
        step = np.array([header["CDELT1"], header["CDELT2"]])
        turn = np.array([[header.get(f"PC{i}_{j}", float(i == j)) for j in (1, 2)] for i in (1, 2)])
        self.matrix = turn * step[:, None]  # pixel -> (east, north), deg
        self.reference = np.array([header["CRPIX1"], header["CRPIX2"]])
        ny, nx = shape
        corners = np.array([[x, y] for x in (0.5, nx + 0.5) for y in (0.5, ny + 0.5)]) - self.reference
        offsets = corners @ self.matrix.T
        widest = np.ptp(offsets, axis=0).max()
        self.scale, self.unit = next(((s, n) for s, n in ((1, "deg"), (60, "arcmin"), (3600, "arcsec")) if widest * s >= 3), (3.6e6, "mas"))
        offsets *= self.scale
        self.east = (offsets[:, 0].min(), offsets[:, 0].max())
        self.north = (offsets[:, 1].min(), offsets[:, 1].max())
        self.aspect = (self.east[1] - self.east[0]) / (self.north[1] - self.north[0])

    def draw(self, axes, image, norm, cmap):
        ny, nx = image.shape
        matrix, start = self.matrix * self.scale, self.reference
        shift = matrix @ (0.5 - start)
        affine = transforms.Affine2D(np.array([[*matrix[0], shift[0]], [*matrix[1], shift[1]], [0, 0, 1]]))
        drawn = axes.imshow(image, origin="lower", extent=(0, nx, 0, ny), norm=norm, cmap=cmap, interpolation="nearest")
        drawn.set_transform(affine + axes.transData)
        axes.set_xlim(self.east[1], self.east[0])
        axes.set_ylim(*self.north)
        axes.set_aspect("equal")
        axes.tick_params(color="white", top=True, right=True)
        return drawn

    def contours(self, axes, image, levels):
        ny, nx = image.shape
        x, y = np.meshgrid(np.arange(1, nx + 1) - self.reference[0], np.arange(1, ny + 1) - self.reference[1])
        east, north = np.tensordot(self.matrix * self.scale, np.array([x, y]), 1)
        if len(levels):
            axes.contour(east, north, image, levels=sorted(levels), colors="white", linewidths=0.6, linestyles=["-"])

    def beam(self, axes):
        """The ellipse of the beam at the lower left, in a white box so that it is seen on any map."""
        if "BMAJ" not in self.header:
            return
        major = self.header["BMAJ"] * self.scale
        minor = self.header.get("BMIN", self.header["BMAJ"]) * self.scale
        width, height = self.east[1] - self.east[0], self.north[1] - self.north[0]
        margin = 0.03 * max(width, height)
        centre = (self.east[1] - margin - 0.5 * major, self.north[0] + margin + 0.5 * major)
        half = 0.5 * major + 0.4 * margin
        axes.add_patch(patches.Rectangle((centre[0] - half, centre[1] - half), 2 * half, 2 * half, facecolor="white",
                                         edgecolor="black", linewidth=0.6, zorder=4))
        angle = 90.0 - self.header.get("BPA", 0.0)  # BPA from North through East; the x axis grows to the East
        axes.add_patch(patches.Ellipse(centre, major, minor, angle=angle, facecolor="0.45", edgecolor="black", linewidth=0.6,
                                       zorder=5))

    def scale_bar(self, axes, distance_kpc):
        if not distance_kpc or not np.isfinite(distance_kpc):
            return
        width, height = self.east[1] - self.east[0], self.north[1] - self.north[0]
        per_kpc = np.degrees(1 / distance_kpc) * self.scale
        wished = 0.3 * width / per_kpc
        power = 10.0 ** np.floor(np.log10(wished))
        length = max(n for n in (1, 2, 5) if n * power <= wished) * power
        right, low = self.east[0] + 0.05 * width, self.north[0] + 0.06 * height
        rim = [patheffects.withStroke(linewidth=4, foreground="black")]
        axes.plot([right, right + length * per_kpc], [low, low], color="white", linewidth=2, solid_capstyle="butt", path_effects=rim,
                  zorder=5)
        axes.text(right + 0.5 * length * per_kpc, low + 0.02 * height, f"{length:g} kpc", color="white", ha="center", va="bottom",
                  fontsize=8, zorder=5, path_effects=[patheffects.withStroke(linewidth=1.5, foreground="black")])


def distance_of(header, summary):
    value = header.get("DISTKPC", (summary.get("view") or {}).get("distance_kpc"))
    return float(value) if value else None


def stretch(image, noise):
    """asinh from a negative rim to the peak: straight below the noise (or 1/1000 of the peak), logarithmic above; with its ticks."""
    peak = np.nanmax(image) if np.isfinite(image).any() else 1.0
    if not peak > 0:
        return colors.Normalize(min(np.nanmin(image), -1.0) if np.isfinite(image).any() else -1.0, 1.0), None
    knee = max(noise or 0.0, 1e-3 * peak)
    low = max(min(np.nanmin(image), 0.0), -2 * knee)
    top = int(np.floor(np.log10(peak)))
    ticks = [0.0] + [10.0 ** k for k in range(top - 3, top + 1) if 10.0 ** k >= knee]
    return colors.AsinhNorm(linear_width=knee, vmin=low, vmax=peak), ticks


def panel_grid(count, aspect, panel=2.9):
    """Figure and axes for `count` maps with colour bars, at most three in a row; surplus axes removed."""
    columns = min(count, 3) if count != 4 else 2
    rows = -(-count // columns)
    if count == 1:
        panel = 4.6
    height = panel / max(aspect, 0.4)
    figure, axes = plt.subplots(rows, columns, figsize=(columns * (panel + 1.25), rows * (min(height, 6.0) + 0.55) + 0.6), squeeze=False,
                                constrained_layout=True)
    for surplus in axes.flat[count:]:
        surplus.remove()
    return figure, axes, columns, rows


def draw_maps(summary, panels, what, contours, beam):
    """panels: [(image, header, heading)], of one sky frame or several."""
    skies = [Sky(header, image.shape) for image, header, _ in panels]
    figure, axes, columns, _ = panel_grid(len(panels), skies[0].aspect)
    for index, ((image, header, heading), sky) in enumerate(zip(panels, skies)):
        ax = axes.flat[index]
        factor, unit = scaled_unit(str(header.get("BUNIT", "")).strip(), np.nanmax(image) if np.isfinite(image).any() else np.nan)
        norm, ticks = stretch(image * factor, header.get("RMSNOISE", 0.0) * factor)
        drawn = sky.draw(ax, image * factor, norm, plt.get_cmap().copy())
        if contours and np.isfinite(image).any() and np.nanmax(image) > 0:
            levels = np.nanmax(image) * 0.5 ** (2.0 * np.arange(5) + 1)
            sky.contours(ax, image * factor, factor * levels[levels >= 4 * header.get("RMSNOISE", 0.0)])
        bar = figure.colorbar(drawn, ax=ax, fraction=0.046 * min(1.0, 1 / sky.aspect), pad=0.02)
        if ticks:
            bar.set_ticks(ticks, labels=[f"{t:g}" for t in ticks])
        bar.minorticks_off()
        bar.set_label(unit, fontsize=8)
        ax.set_title(heading)
        if beam:
            sky.beam(ax)
        sky.scale_bar(ax, distance_of(header, summary))
        if index % columns == 0:
            ax.set_ylabel(f"North offset ({sky.unit})")
        if index + columns >= len(panels):
            ax.set_xlabel(f"East offset ({sky.unit})")
    title(figure, summary, what + (", contours at 1/2, 1/8, 1/32, ... of the peak" if contours else ""))
    return figure


def radio_maps(folder, summary, options):
    maps = [(p, e) for p, e in listed_maps(folder, summary, "radio") if e.get("process", "total") in ("total", "", None)]
    if not maps:
        raise Missing("no radio maps in the summary")
    panels = []
    for path, entry in some_of(sorted(maps, key=lambda m: m[1].get("frequency_hz") or 0)):
        planes, header, _ = read_map(path)
        frequency = entry.get("frequency_hz") or header.get("CRVAL3")
        panels.append((planes[0], header, frequency_text(frequency) if frequency else entry.get("label", path.stem)))
    yield "radio_maps", draw_maps(summary, panels, "radio maps", options.contours, True)


def gamma_maps(folder, summary, options):
    maps = listed_maps(folder, summary, "gamma")
    if not maps:
        raise Missing("no gamma-ray maps in the summary")
    for path, entry in maps:
        planes, header, bands = read_map(path)
        bands = bands or [(entry.get("energy_from_gev") or 0, entry.get("energy_to_gev") or 0)] * len(planes)
        panels = some_of([(plane, header, energy_text(*band)) for plane, band in zip(planes, bands)])
        process = entry.get("process", "total")
        total = process in ("total", "", None)
        what = "gamma-ray maps" + ("" if total else f", {process_text(process)}")
        yield "gamma_maps" + ("" if total else "_" + process.replace(":", "_")), draw_maps(summary, panels, what, options.contours, False)


def spectral_index(folder, summary, options):
    paths = sorted((folder / "maps").glob("spectral_index*.fits"))
    if not paths:
        raise Missing("no maps/spectral_index_*.fits")
    for path in paths:
        planes, header, _ = read_map(path)
        image, sky = planes[0], Sky(header, planes[0].shape)
        if not np.isfinite(image).any():
            raise Missing(f"maps/{path.name} is blank everywhere")
        mean = float(np.nanmean(image))
        reach = max(float(np.nanpercentile(abs(image - mean), 98)), 0.01)
        figure, axes, _, _ = panel_grid(1, sky.aspect)
        ax = axes.flat[0]
        ax.set_facecolor("0.55")
        drawn = sky.draw(ax, image, colors.Normalize(mean - reach, mean + reach), "RdBu_r")
        bar = figure.colorbar(drawn, ax=ax, fraction=0.046 * min(1.0, 1 / sky.aspect), pad=0.02, extend="both")
        bar.set_label(f"spectral index, S ~ frequency$^\\alpha$; white = mean of the map, {mean:.2f}")
        sky.beam(ax)
        sky.scale_bar(ax, distance_of(header, summary))
        ax.set_xlabel(f"East offset ({sky.unit})")
        ax.set_ylabel(f"North offset ({sky.unit})")
        between = path.stem.removeprefix("spectral_index_").split("_")
        ax.set_title(("between " + " and ".join(between) if len(between) == 2 else "") + " (grey: blank)")
        title(figure, summary, "spectral index")
        yield path.stem, figure


# ---- profiles and heights --------------------------------------------------------------------------------------------------------------

def runs(mask):
    """(first, last) of each unbroken run of True."""
    edges = np.flatnonzero(np.diff(np.concatenate(([0], np.asarray(mask, int), [0]))))
    return list(zip(edges[::2], edges[1::2] - 1))


def profile_panel(upper, lower, rows, heading, first):
    rows = rows[np.argsort(numbers(rows, "height"), kind="stable")]
    height, width, mean, error, model = (numbers(rows, c) for c in ("height", "width", "mean", "error", "model"))
    fitted = flags(rows, "fitted")
    peak = np.nanmax(np.where(mean > 0, mean, np.nan)) if (mean > 0).any() else np.nan
    factor, unit = scaled_unit(texts(rows, "unit")[0], peak)
    noisy = np.isfinite(error) & (error > 0)
    for a, b in runs(fitted):
        for ax in (upper, lower):
            ax.axvspan(height[a] - width[a] / 2, height[b] + width[b] / 2, color="0.9", zorder=0, linewidth=0)
    for mask, face, what in ((fitted, PALETTE[2], "fitted"), (~fitted, "white", "not fitted")):
        shown = mask & (mean > 0)
        if not shown.any():
            continue
        upper.errorbar(height[shown], mean[shown] * factor, yerr=np.where(noisy, error, 0)[shown] * factor, fmt="o", markersize=3.6,
                       color=PALETTE[2], markerfacecolor=face, elinewidth=1, capsize=0, label=f"mean, {what}")
    limit = (mean <= 0) & noisy
    if limit.any():
        upper.plot(height[limit], (np.maximum(mean, 0) + 2 * error)[limit] * factor, "v", color=PALETTE[2], markerfacecolor="none",
                   markersize=4.5, label="upper limit, 2 sigma")
    curve = np.isfinite(model) & (model > 0)
    if curve.any():
        upper.plot(height[curve], model[curve] * factor, "--", color=PALETTE[1], linewidth=1.4, label="model fitted")
    upper.set_yscale("log")
    if np.isfinite(peak):
        least = np.nanmin(np.where(mean > 0, mean, np.nan))
        upper.set_ylim(max(least * 0.5, peak * 1e-5) * factor, peak * 2.2 * factor)
    upper.set_title(heading)
    upper.tick_params(labelbottom=False, top=True, right=True, which="both")
    upper.set_ylabel(f"mean ({unit})" if unit else "mean")
    difference = mean - model
    if noisy.any():
        residual, what = np.where(noisy, difference / np.where(noisy, error, 1), np.nan), "residual\n(sigma)"
    else:
        residual, what = 100 * difference / np.where(model > 0, model, np.nan), "residual\n(%)"
    lower.axhline(0, color=PALETTE[1], linestyle="--", linewidth=1)
    good = np.isfinite(residual)
    reach = max(3.2, 1.15 * np.max(np.abs(residual[good & fitted]), initial=0.0)) if noisy.any() else \
        max(1e-3, 1.3 * np.max(np.abs(residual[good & fitted]), initial=0.0))
    for mask, face in ((fitted, PALETTE[2]), (~fitted, "white")):
        inside = mask & good & (abs(residual) <= reach)
        beyond = mask & good & (abs(residual) > reach)
        lower.plot(height[inside], residual[inside], "o", markersize=3.2, color=PALETTE[2], markerfacecolor=face)
        for side, marker in ((1, "^"), (-1, "v")):
            out = beyond & (np.sign(residual) == side)
            lower.plot(height[out], np.full(out.sum(), 0.9 * side * reach), marker, markersize=4, color=PALETTE[2],
                       markerfacecolor=face, linestyle="none")
    lower.set_ylim(-reach, reach)
    lower.set_ylabel(what if first else "")
    lower.tick_params(top=True, right=True)


def profiles(folder, summary, _):
    table = read_table(folder, "profiles", ("map", "frequency", "strip", "height", "width", "mean", "error", "model", "unit", "fitted"))
    table = table[numbers(table, "strip") == -1]
    if len(table) == 0:
        raise Missing("tables/profiles.ecsv has no profile of all strips as one")
    radio = numbers(table, "frequency") > 0
    for name, what, rows in (("profiles", "radio", table[radio]), ("gamma_profiles", "gamma-ray", table[~radio])):
        if len(rows) > 0:
            yield name, draw_profiles(summary, rows, f"mean {what} intensity against height")


def draw_profiles(summary, table, what):
    names = list(dict.fromkeys(zip(texts(table, "map"), np.nan_to_num(numbers(table, "frequency")))))
    names = some_of(sorted(names, key=lambda n: n[1]))
    columns = min(len(names), 3) if len(names) != 4 else 2
    bands = -(-len(names) // columns)
    figure = plt.figure(figsize=(0.7 + 3.0 * max(columns, 1.5), 1.2 + 3.1 * bands), constrained_layout=True)
    cells = figure.add_gridspec(2 * bands, columns, height_ratios=[3, 1.1] * bands)
    legend = {}
    for index, (name, frequency) in enumerate(names):
        row, column = divmod(index, columns)
        upper = figure.add_subplot(cells[2 * row, column])
        lower = figure.add_subplot(cells[2 * row + 1, column], sharex=upper)
        one = (texts(table, "map") == name) & (np.nan_to_num(numbers(table, "frequency")) == frequency)
        profile_panel(upper, lower, table[one], frequency_text(frequency) if frequency > 0 else name, column == 0)
        legend |= dict(reversed(pair) for pair in zip(*upper.get_legend_handles_labels()))
        if index + columns >= len(names):
            lower.set_xlabel("height (kpc)")
    legend["range fitted"] = patches.Patch(color="0.9")
    figure.legend(legend.values(), legend.keys(), loc="lower center", ncol=min(len(legend), 3 if columns < 3 else 5))
    foot = (0.55 if columns < 3 else 0.35) / figure.get_figheight()
    figure.get_layout_engine().set(rect=(0, foot, 1, 1 - foot))
    title(figure, summary, what)
    return figure


def heights(folder, summary, _):
    table = read_table(folder, "heights", ("map", "frequency", "strip", "model", "forward", "side", "component", "chosen", "h",
                                           "error_noise", "error_scatter", "error_distance", "error_numerical"))
    all_h, frequency = numbers(table, "h"), numbers(table, "frequency")
    use = flags(table, "chosen") & (numbers(table, "strip") == -1) & np.isfinite(all_h) & (all_h > 0) & (frequency > 0)
    if "status" in table.colnames:
        use &= np.isin(texts(table, "status"), ("ok", "unresolved", ""))
    if not use.any():
        raise Missing("tables/heights.ecsv has no usable height of the chosen model with a frequency")
    table, all_h = table[use], all_h[use]
    try:
        exponents = read_table(folder, "exponents", ("model", "forward", "side", "component", "strip", "frequency", "h0", "h0_error", "eta",
                                                     "eta_error"))
    except Missing:
        exponents = None
    figure, ax = plt.subplots(figsize=(6.0, 4.8), constrained_layout=True)
    keys = list(dict.fromkeys(zip(texts(table, "model"), flags(table, "forward"), texts(table, "side"), texts(table, "component"))))
    for index, key in enumerate(keys):
        colour, marker = PALETTE[index % len(PALETTE)], MARKERS[index % len(MARKERS)]
        draw_heights(ax, table[matching(table, key)], key, colour, marker, len(keys))
        if exponents is not None:
            line = exponents[matching(exponents, key) & (numbers(exponents, "strip") == -1)]
            draw_exponent(ax, line, numbers(table, "frequency") / 1e9, colour, DASHES[(index + 1) % len(DASHES)])
    ax.set_xscale("log")
    ax.set_yscale("log")
    plain_ticks(ax)
    ax.set_xlabel("frequency (GHz)")
    ax.set_ylabel("scale height (kpc)")
    ax.tick_params(top=True, right=True, which="both")
    numerical, distance = (np.max(np.nan_to_num(numbers(table, c)) / all_h) for c in ("error_numerical", "error_distance"))
    notes = ["thick bars: noise; thin bars: scatter",
             "numerical error: " + (f"at most {100 * numerical:.2g} %" if numerical > 0 else "not stated")]
    if distance > 0:
        notes.append(f"common error of the distance, not drawn: {100 * distance:.2g} %")
    handles, labels = ax.get_legend_handles_labels()
    order = sorted(range(len(labels)), key=lambda i: labels[i].startswith("h ="))
    ax.legend([handles[i] for i in order], [labels[i] for i in order], title="\n".join(notes), title_fontsize=8,
              loc="upper center", bbox_to_anchor=(0.5, -0.14), alignment="left", ncol=2 if len(keys) > 2 else 1)
    title(figure, summary, "scale height against frequency")
    yield "heights", figure


def matching(table, key):
    model, forward, side, component = key
    return ((texts(table, "model") == model) & (flags(table, "forward") == forward) & (texts(table, "side") == side)
            & (texts(table, "component") == component))


def draw_heights(ax, rows, key, colour, marker, count):
    x, h = numbers(rows, "frequency") / 1e9, numbers(rows, "h")
    noise, scatter = (np.nan_to_num(numbers(rows, c)) for c in ("error_noise", "error_scatter"))
    model, forward, side, component = key
    label = model.replace("_", " ") + (", forward" if forward else "") + ("" if side in ("both", "") else f", {side}")
    if count > 1 and component not in ("", "--"):
        label += f", component {int(float(component)) + 1}"
    ax.errorbar(x, h, yerr=np.minimum(scatter, 0.95 * h), fmt="none", ecolor=colour, elinewidth=0.9, capsize=3)
    ax.errorbar(x, h, yerr=np.minimum(noise, 0.95 * h), fmt=marker, color=colour, markersize=5, elinewidth=2.8, capsize=0,
                markerfacecolor="white", label=label)


def draw_exponent(ax, rows, x, colour, dash):
    for row in rows[:1]:
        h0, h0_error, nu0, eta, eta_error = (float(row[c]) for c in ("h0", "h0_error", "frequency", "eta", "eta_error"))
        if not (np.isfinite([h0, nu0, eta]).all() and h0 > 0 and nu0 > 0):
            return
        at = np.geomspace(x.min() / 1.15, x.max() * 1.15, 100)
        line = h0 * (at * 1e9 / nu0) ** eta
        law = f"h = ({h0:.3g} $\\pm$ {h0_error:.2g}) kpc ($\\nu$ / {frequency_text(nu0)})$^\\eta$"
        ax.plot(at, line, linestyle=dash, color=colour, linewidth=1.2, label=f"{law}, $\\eta$ = {eta:.3f} $\\pm$ {eta_error:.2g}")
        if np.isfinite([h0_error, eta_error]).all():
            spread = line * np.hypot(h0_error / h0, eta_error * np.log(at * 1e9 / nu0))
            ax.fill_between(at, line - spread, line + spread, color=colour, alpha=0.13, linewidth=0)


# ---- spectrum --------------------------------------------------------------------------------------------------------------------------

def power_per_decade(table):
    """nu L_nu or E^2 dL/dE in erg/s of each row, L_E counting photons; NaN where the unit says neither."""
    power = np.full(len(table), np.nan)
    frequency, low, high, luminosity = (numbers(table, c) for c in ("frequency", "energy_from", "energy_to", "luminosity"))
    for i, text in enumerate(texts(table, "luminosity_unit")):
        try:
            unit = u.Unit(text, format="fits")
        except ValueError:
            continue
        energy = np.sqrt(low[i] * high[i]) * u.GeV
        band = high[i] > low[i] * 1.000001
        value = luminosity[i] * unit
        if unit.is_equivalent("erg s-1 Hz-1") and np.isfinite(frequency[i]):
            power[i] = (value * frequency[i] * u.Hz).to_value("erg s-1")
        elif unit.is_equivalent("s-1 MeV-1"):
            power[i] = (value * energy ** 2).to_value("erg s-1")
        elif unit.is_equivalent("s-1") and band:
            power[i] = (value * energy ** 2 / ((high[i] - low[i]) * u.GeV)).to_value("erg s-1")
        elif unit.is_equivalent("erg s-1") and band:
            power[i] = value.to_value("erg s-1") / np.log(high[i] / low[i])
    return power


def spectrum(folder, summary, _):
    table = read_table(folder, "channels", ("band", "frequency", "energy_from", "energy_to", "process", "luminosity", "luminosity_unit"))
    power, band, process = power_per_decade(table), texts(table, "band"), texts(table, "process")
    good = np.isfinite(power) & (power > 0) & ~np.isin(process, ("synchrotron_q", "synchrotron_u"))
    x = np.where(band == "radio", numbers(table, "frequency") / 1e9, np.sqrt(numbers(table, "energy_from") * numbers(table, "energy_to")))
    bands = [b for b in ("radio", "gamma") if (good & (band == b)).any()]
    if not bands:
        raise Missing("tables/channels.ecsv has no luminosity in a known unit")
    short = np.zeros(len(table), bool)
    for column in ("missing_above", "missing_below"):
        if column in table.colnames:
            short |= np.nan_to_num(numbers(table, column)) > 0.1
    order = list(dict.fromkeys(process[good]))
    order.sort(key=lambda p: p != "total")
    spans = [max(np.ptp(np.log10(x[good & (band == b)])), 1.0) for b in bands]
    figure, axes = plt.subplots(1, len(bands), sharey=True, squeeze=False, figsize=(8.0 if len(bands) == 2 else 5.6, 4.6),
                                constrained_layout=True, gridspec_kw={"width_ratios": [max(s, 0.5 * max(spans)) for s in spans]})
    lines = {}
    for ax, name in zip(axes.flat, bands):
        for index, one in enumerate(order):
            here = good & (band == name) & (process == one)
            here = np.flatnonzero(here)[np.argsort(x[here], kind="stable")]
            if len(here) == 0:
                continue
            colour = PALETTE[index % len(PALETTE)]
            style = {"color": colour, "linestyle": DASHES[index % len(DASHES)], "marker": MARKERS[index % len(MARKERS)], "markersize": 4.5,
                     "linewidth": 2.2 if one == "total" else 1.3}
            ax.plot(x[here], power[here], **style)
            ax.plot(x[here][short[here]], power[here][short[here]], linestyle="none", marker=style["marker"], markersize=4.5, color=colour,
                    markerfacecolor="white")
            lines[process_text(one)] = matplotlib.lines.Line2D([], [], **style)
        ax.set_xscale("log")
        ax.set_yscale("log")
        ax.set_xlabel("frequency (GHz)" if name == "radio" else "photon energy (GeV)")
        ax.set_title("radio" if name == "radio" else "gamma rays")
        ax.tick_params(top=True, right=True, which="both")
        if name == "radio":
            ax.xaxis.set_major_formatter(matplotlib.ticker.FuncFormatter(lambda value, _: f"{value:g}"))
    peak = power[good].max()
    axes[0, 0].set_ylim(max(power[good].min() / 2, peak * 1e-6), peak * 2)
    axes[0, 0].set_ylabel({"radio": "$\\nu L_\\nu$ (erg s$^{-1}$)", "gamma": "$E^2 dL/dE$ (erg s$^{-1}$)"}[bands[0]] if len(bands) == 1
                          else "$\\nu L_\\nu$ or $E^2 dL/dE$ (erg s$^{-1}$)")
    if (short & good).any():
        lines["over 10 % missing: spectra end"] = matplotlib.lines.Line2D([], [], linestyle="none", marker="o", markersize=4.5, color="0.3",
                                                                         markerfacecolor="white")
    axes[0, -1].legend(lines.values(), lines.keys(), loc="center left", bbox_to_anchor=(1.02, 0.5), handlelength=3.5)
    title(figure, summary, "broadband spectrum")
    yield "spectrum", figure


# ---- run -------------------------------------------------------------------------------------------------------------------------------

FIGURES = (("radio maps", radio_maps), ("gamma-ray maps", gamma_maps), ("profiles", profiles), ("heights", heights), ("spectrum", spectrum),
           ("spectral index", spectral_index))
LAW_FIGURES = (("pressure", law_figures.pressure), ("local spectra", law_figures.spectra), ("heights of the laws", law_figures.heights),
               ("energy budgets", law_figures.budgets), ("laws in numbers", law_figures.in_numbers))


def save(figure, path):
    """Same bytes for the same data: no date, no version of the library."""
    metadata = {"Software": None} if path.suffix == ".png" else {"CreationDate": None, "Creator": "figures.py", "Producer": None}
    temporary = path.with_name(f".{path.name}.tmp{os.getpid()}")
    try:
        figure.savefig(temporary, format=path.suffix[1:], metadata=metadata)
        temporary.replace(path)
    finally:
        plt.close(figure)
        temporary.unlink(missing_ok=True)
    print(path, flush=True)


def tasks(folder, target, only_laws):
    """(figures, folder, summary, folder of the figures) of a run; of one with several laws also those of each law."""
    summary = read_summary(folder)
    laws = listed_laws(folder, summary)
    if (folder / "tables/laws.ecsv").is_file():
        yield LAW_FIGURES, folder, summary, target
    if only_laws:
        return
    if not laws:
        yield FIGURES, folder, summary, target
    for law, part in laws:
        yield FIGURES, part, read_summary(part) | {"law": law}, target / part.name


def draw_all(figures, folder, summary, target, options):
    """Draws what has data; how many files that made."""
    drawn = 0
    for what, draw in figures:
        try:
            for name, figure in draw(folder, summary, options):
                save(figure, target / f"{name}.{options.format}")
                drawn += 1
        except Missing as reason:
            of_law = f" of {summary['law']}" if summary.get("law") else ""
            print(f"skipped {what}{of_law}: {reason}", flush=True)
    return drawn


def main():
    parser = argparse.ArgumentParser(description=textwrap.fill(__doc__.split("\n\n")[1], 79),
                                     formatter_class=argparse.RawDescriptionHelpFormatter)
    parser.add_argument("folder", metavar="DIR", type=pathlib.Path, help="output folder of aureole predict or aureole heights")
    parser.add_argument("-o", "--output", metavar="FIGDIR", type=pathlib.Path, help="folder of the figures (default DIR/figures)")
    parser.add_argument("--format", choices=("png", "pdf"), default="png", help="file format (default png)")
    parser.add_argument("--contours", action="store_true", help="contours on the maps")
    parser.add_argument("--laws", action="store_true", help="only the figures that compare scattering laws")
    options = parser.parse_args()
    plt.rcParams.update(STYLE)
    target = options.output or options.folder / "figures"
    drawn = 0
    try:
        for figures, folder, summary, into in list(tasks(options.folder, target, options.laws)):
            into.mkdir(parents=True, exist_ok=True)
            drawn += draw_all(figures, folder, summary, into, options)
    except Unusable as error:
        print(f"figures.py: {error}", file=sys.stderr)
        return 2
    except OSError as error:
        print(f"figures.py: cannot write {error.filename or target}: {error.strerror or error}", file=sys.stderr)
        return 6
    if drawn == 0:
        print(f"figures.py: {options.folder}: nothing to draw in it", file=sys.stderr)
        return 2
    return 0


if __name__ == "__main__":
    sys.exit(main())
