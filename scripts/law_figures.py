"""Figures that compare scattering laws, from the tables of a run that solved for them (docs/results.md). Used by figures.py."""
import matplotlib.pyplot as plt
import numpy as np
from matplotlib import lines, patches

from figure_input import Missing, flags, frequency_text, numbers, read_table, texts
from figure_style import DASHES, MARKERS, PALETTE, plain_ticks, title

# Ways for energy to go, as one colour and hatch each; what comes first takes what it names or what starts with it.
GROUPS = (("synchrotron", ("synchrotron",), "#0072B2", ""), ("inverse Compton", ("inverse compton",), "#56B4E9", "////"),
          ("bremsstrahlung", ("bremsstrahlung",), "#009E73", "...."), ("ionisation, Coulomb", ("ionisation", "coulomb"), "#E69F00", ""),
          ("pions", ("pions", "catastrophic"), "#CC79A7", "xxxx"), ("adiabatic, waves", ("adiabatic", "streaming"), "#D55E00", "\\\\\\\\"),
          ("escape", ("escape",), "0.88", ""), ("cooled below the lowest energy", ("cooled",), "0.6", "----"), ("other", ("",), "white", ""))
NOT_A_LOSS = ("injected", "defect of the sum")


def law_styles(laws):
    """Colour, dash and marker of each law, in the order of the run, so that a law looks the same in all figures."""
    return {law: {"color": PALETTE[i % len(PALETTE)], "linestyle": DASHES[i % len(DASHES)], "marker": MARKERS[i % len(MARKERS)]}
            for i, law in enumerate(laws)}


def styles_of(folder):
    return law_styles(dict.fromkeys(texts(read_table(folder, "laws", ("law",)), "law")))


def law_legend(figure, handles, columns=3):
    """Below the axes, as wide as the figure allows."""
    rows = -(-len(handles) // columns)
    figure.legend(handles=handles, loc="lower center", ncol=columns, handlelength=3.5)
    foot = (0.12 + 0.19 * rows) / figure.get_figheight()
    figure.get_layout_engine().set(rect=(0, foot, 1, 1 - foot))


def law_handles(styles):
    return [lines.Line2D([], [], label=law, linewidth=1.5, markersize=5, **style) for law, style in styles.items()]


def plain_numbers(axis, between=True):
    """0.1, 1, 10 in place of powers of ten, where they stay short; on a short axis also the 2 and 5 between them."""
    low, high = axis.get_view_interval()
    steps = (1.0, 2.0, 5.0) if between and high / low < 40 else (1.0,)
    axis.set_major_locator(plt.LogLocator(subs=steps, numticks=20))
    axis.set_minor_locator(plt.LogLocator(subs=np.arange(2, 10), numticks=200))
    axis.set_major_formatter(plt.FuncFormatter(lambda value, _: f"{value:g}" if 1e-3 <= value < 1e5 else powers_of_ten(value, 0)))
    axis.set_minor_formatter(plt.NullFormatter())


def same(values, unit, otherwise):
    """The value where it is the same for all laws."""
    return f"{values[0]:.2g} {unit}" if np.ptp(values) < 1e-6 * abs(values[0]) + 1e-12 else otherwise


# ---- pressure and spectra ----------------------------------------------------------------------------------------------------------------

def pressure(folder, summary, _):
    table = read_table(folder, "pressure", ("law", "axis", "R", "z", "pressure"))
    styles = styles_of(folder)
    figure, axes = plt.subplots(1, 2, sharey=True, figsize=(8.0, 4.4), constrained_layout=True)
    shown = numbers(table, "pressure") > 0
    for ax, axis, along, fixed in ((axes[0], "radius", "R", "z"), (axes[1], "height", "z", "R")):
        here = shown & (texts(table, "axis") == axis)
        if not here.any():
            raise Missing(f"tables/pressure.ecsv has no pressure above 0 against {axis}")
        for law, style in styles.items():
            one = here & (texts(table, "law") == law)
            x, p = abs(numbers(table, along))[one], numbers(table, "pressure")[one]
            order = np.argsort(x, kind="stable")
            ax.plot(x[order], p[order], markersize=4, linewidth=1.5, markevery=max(1, len(x) // 9), **style)
        x = abs(numbers(table, along))[here]
        inverse_distance(ax, x.max(), numbers(table, "pressure")[here & (abs(numbers(table, along)) == x.max())].max())
        ax.set_xscale("log")
        ax.set_yscale("log")
        plain_numbers(ax.xaxis)
        ax.set_xlabel("distance from the axis R (kpc)" if axis == "radius" else "height |z| (kpc)")
        where = same(abs(numbers(table, fixed))[here], "kpc", "the reference place of each law")
        ax.set_title(f"at {'|z|' if fixed == 'z' else 'R'} = {where}" if "kpc" in where else f"through {where}")
        ax.tick_params(top=True, right=True, which="both")
    axes[0].set_ylabel("pressure of cosmic-ray protons (eV cm$^{-3}$)")
    plain_numbers(axes[0].yaxis)
    guide = lines.Line2D([], [], color="0.45", linewidth=2.6, label="guide: 1/distance")
    law_legend(figure, [*law_handles(styles), guide], 4 if len(styles) == 3 else 3)
    title(figure, summary, "pressure against radius and height")
    yield "law_pressure", figure


def inverse_distance(ax, end, value):
    """A thick grey piece of a 1/x line over the outer half decade, above the highest curve."""
    x = np.array([end / 4, end])
    ax.plot(x, 1.5 * value * end / x, color="0.45", linewidth=2.6, solid_capstyle="butt", zorder=1)


def spectra(folder, summary, _):
    table = read_table(folder, "local_spectra", ("law", "particles", "energy", "density"))
    styles = styles_of(folder)
    energy = numbers(table, "energy")
    power = energy ** 2 * numbers(table, "density") * 1e9  # eV cm-3
    kinds = [k for k in ("protons", "electrons", "positrons") if (texts(table, "particles") == k).any()]
    figure, axes = plt.subplots(1, len(kinds), squeeze=False, figsize=(0.6 + 3.4 * max(len(kinds), 1.6), 4.6), constrained_layout=True)
    for ax, kind in zip(axes.flat, kinds):
        here = (texts(table, "particles") == kind) & (power > 0)
        for law in dict.fromkeys(texts(table, "law")[here]):
            one = here & (texts(table, "law") == law)
            x, y = energy[one], power[one]
            if law in styles:
                ax.plot(x, y, markersize=4, linewidth=1.5, markevery=(0, max(1, len(x) // 7)), **styles[law])
            else:
                label = law.replace(", ", ",\n") + ("\n(electrons alone)" if kind == "electrons" else "")
                ax.plot(x, y, color="0.7", linewidth=5, zorder=0, solid_capstyle="butt", label=label)
                ax.legend(loc="lower left")
        ax.set_xscale("log")
        ax.set_yscale("log")
        if here.any():
            ax.set_ylim(max(power[here].min(), 1e-5 * power[here].max()) / 2, 2 * power[here].max())
        ax.set_title({"electrons": "electrons and positrons"}.get(kind, kind))
        ax.set_xlabel("kinetic energy (GeV)")
        ax.tick_params(top=True, right=True, which="both")
    axes[0, 0].set_ylabel("$E^2\\,dn/dE$ at the reference place (eV cm$^{-3}$)")
    law_legend(figure, law_handles(styles), 4 if len(kinds) > 2 else 3)
    title(figure, summary, "local spectra")
    yield "law_spectra", figure


# ---- heights -----------------------------------------------------------------------------------------------------------------------------

def heights(folder, summary, _):
    if len(summary.get("laws") or []) < 2:
        return
    table = read_table(folder, "law_heights", ("law", "frequency", "strip", "model", "forward", "side", "component", "chosen", "h",
                                               "error_noise", "error_scatter", "error_distance", "error_numerical", "status"))
    h = numbers(table, "h")
    table = table[flags(table, "chosen") & (numbers(table, "strip") == -1) & (h > 0) & (numbers(table, "frequency") > 0)
                  & np.isin(texts(table, "status"), ("ok", "unresolved"))]
    if len(table) == 0:
        raise Missing("tables/law_heights.ecsv has no usable height of a chosen model with a frequency")
    figure, ax = plt.subplots(figsize=(6.4, 4.8), constrained_layout=True)
    styles, handles = styles_of(folder), []
    series = list(zip(*(texts(table, c) for c in ("law", "model", "forward", "side", "component"))))
    for key in dict.fromkeys(series):
        law, model, forward, side, component = key
        parts = {k[4] for k in series if k[:4] == key[:4]}
        label = f"{law}: {model.replace('_', ' ')}" + (", disc" if forward.lower() in ("true", "1") else "")
        label += ("" if side == "both" else f", {side}") + (f", component {int(component) + 1}" if len(parts) > 1 else "")
        handles.append(height_series(ax, table[np.array([k == key for k in series])], styles[law], component == max(parts), label))
    ax.set_xscale("log")
    ax.set_yscale("log")
    low, high = ax.get_ylim()
    ax.set_ylim(low / 1.04, high * 1.04)
    plain_ticks(ax)
    ax.set_xlabel("frequency (GHz)")
    ax.set_ylabel("scale height (kpc)")
    ax.tick_params(top=True, right=True, which="both")
    largest = {c: 100 * np.max(np.nan_to_num(numbers(table, c)) / numbers(table, "h")) for c in ("error_numerical", "error_distance")}
    notes = ["bars, where they are larger than the points: scatter and numerical error, added in squares"]
    notes.append(f"largest numerical error: {largest['error_numerical']:.2g} %" if largest["error_numerical"] > 0 else
                 "numerical error: not stated")
    if largest["error_distance"] > 0:
        notes.append(f"common error of the distance, not drawn: {largest['error_distance']:.2g} %")
    if len({key[1:3] for key in series}) > 1:
        notes.append("the laws have different models: heights of different models do not compare")
    ax.legend(handles=handles, title="\n".join(notes), title_fontsize=8, loc="upper center", bbox_to_anchor=(0.5, -0.13),
              alignment="left", ncol=1 if len(handles) < 4 else 2, handlelength=3.5)
    title(figure, summary, "scale height against frequency")
    yield "law_heights", figure


def height_series(ax, rows, style, thickest, label):
    rows = rows[np.argsort(numbers(rows, "frequency"), kind="stable")]
    x, h = numbers(rows, "frequency") / 1e9, numbers(rows, "h")
    error = np.hypot(*(np.nan_to_num(numbers(rows, c)) for c in ("error_scatter", "error_numerical")))
    face = style["color"] if thickest else "white"
    ax.errorbar(x, h, yerr=np.minimum(error, 0.95 * h), elinewidth=1.1, capsize=3, markersize=5, linewidth=1.2, markerfacecolor=face,
                **style)
    return lines.Line2D([], [], label=label, markersize=5, linewidth=1.2, markerfacecolor=face, **style)


# ---- energy ------------------------------------------------------------------------------------------------------------------------------

def group_of(process):
    return next(i for i, (_, names, _, _) in enumerate(GROUPS) if any(process.startswith(name) for name in names))


def shares(table, law, kind):
    """Share of the injected power per group; NaN where nothing of the kind is injected."""
    total = np.zeros(len(GROUPS))
    rows = (texts(table, "law") == law) & (texts(table, "particles") == kind)
    for process, share in zip(texts(table, "process")[rows], numbers(table, "share")[rows]):
        if process not in NOT_A_LOSS:
            total[group_of(process)] += share
    return total


def budgets(folder, summary, _):
    table = read_table(folder, "budgets", ("law", "particles", "process", "power", "share"))
    laws = list(dict.fromkeys(texts(table, "law")))
    kinds = list(dict.fromkeys(texts(table, "particles")))
    all_shares = {(law, kind): shares(table, law, kind) for law in laws for kind in kinds}
    figure, axes = plt.subplots(len(kinds), 1, sharex=True, squeeze=False, figsize=(8.0, 1.3 + len(kinds) * (0.45 + 0.3 * len(laws))),
                                constrained_layout=True)
    for ax, kind in zip(axes.flat, kinds):
        for row, law in enumerate(laws):
            draw_shares(ax, row, all_shares[law, kind])
            power = [p for p in numbers(table, "power")[(texts(table, "law") == law) & (texts(table, "particles") == kind)
                                                       & (texts(table, "process") == "injected")]]
            if power:
                ax.annotate(powers_of_ten(power[0]), (1, row), xycoords=("axes fraction", "data"), xytext=(5, 0),
                            textcoords="offset points", va="center", fontsize=8)
        ax.set_yticks(range(len(laws)), laws)
        ax.set_ylim(len(laws) - 0.5, -0.5)
        ax.tick_params(axis="y", length=0)
        ax.set_title(kind, loc="left")
        ax.set_title("injected (erg s$^{-1}$)", loc="right", fontsize=8)
        ax.axvline(0, color="black", linewidth=0.8)
    everything = np.nan_to_num(np.array(list(all_shares.values())))
    low, high = 100 * np.minimum(everything, 0).sum(1).min(), 100 * np.maximum(everything, 0).sum(1).max()
    axes[-1, 0].set_xlim(1.02 * low if low < -0.5 else 0, max(100.0, 1.02 * high if high > 101 else 100))
    axes[-1, 0].set_xlabel("share of the injected power (%)" + ("; below 0: energy gained" if low < -0.5 else ""))
    used = (abs(everything) > 5e-4).any(0)
    handles = [patches.Patch(facecolor=colour, hatch=hatch, edgecolor="black", linewidth=0.5, label=name)
               for (name, _, colour, hatch), drawn in zip(GROUPS, used) if drawn]
    law_legend(figure, handles, 4)
    title(figure, summary, "where the energy went")
    yield "law_budgets", figure


def draw_shares(ax, row, share):
    """One stacked bar; gains to the left of 0; figures where a piece is wide enough for them."""
    right = left = 0.0
    for (_, _, colour, hatch), value in zip(GROUPS, 100 * np.nan_to_num(share)):
        start = right if value >= 0 else left
        ax.barh(row, value, left=start, height=0.72, color=colour, hatch=hatch, edgecolor="black", linewidth=0.5)
        if abs(value) >= 5:
            ax.text(start + value / 2, row, f"{value:.0f}", ha="center", va="center", fontsize=7,
                    bbox={"boxstyle": "round,pad=0.12", "facecolor": "white", "edgecolor": "none"})
        right, left = (right + value, left) if value >= 0 else (right, left + value)


def powers_of_ten(value, decimals=2):
    if not value > 0:
        return "none"
    power = int(np.floor(np.log10(value) + 1e-9))
    return f"{value / 10.0 ** power:.{decimals}f} $\\times$ 10$^{{{power}}}$".removeprefix("1 $\\times$ ")


# ---- numbers -----------------------------------------------------------------------------------------------------------------------------

RIGIDITIES = (("1gv", 1.0), ("10gv", 10.0), ("100gv", 100.0))


def in_numbers(folder, summary, _):
    needed = ("gamma_luminosity", "radio_luminosity", "radio_frequency", "energy_density")
    by_rigidity = (("grammage", "grammage (g cm$^{-2}$)"), ("age", "mean age (Myr)"), ("residence", "time in the galaxy (Myr)"))
    table = read_table(folder, "laws", ("law", *needed, *(f"{q}_{r}" for q, _ in by_rigidity for r, _ in RIGIDITIES)))
    styles = styles_of(folder)
    laws = list(styles)
    figure, axes = plt.subplots(2, 3, figsize=(9.0, 3.6 + 0.22 * len(laws) + 1.2), constrained_layout=True,
                                gridspec_kw={"height_ratios": [0.9 + 0.25 * len(laws), 2.6]})
    frequency = numbers(table, "radio_frequency")
    radio = frequency_text(frequency[0]) if np.isfinite(frequency[0]) else "radio"
    for ax, column, what in zip(axes[0], ("gamma_luminosity", "radio_luminosity", "energy_density"),
                                ("gamma rays of pion decay, 0.1-100 GeV\n(erg s$^{-1}$)", f"synchrotron, {radio}\n(erg s$^{{-1}}$ Hz$^{{-1}}$)",
                                 "cosmic-ray protons\nat the reference place (eV cm$^{-3}$)")):
        error = numbers(table, f"{column}_error") if f"{column}_error" in table.colnames else np.zeros(len(table))
        dots(ax, numbers(table, column), np.nan_to_num(error), styles, what)
        ax.set_yticks(range(len(laws)), laws if ax is axes[0, 0] else [])
    for ax, (quantity, what) in zip(axes[1], by_rigidity):
        x = np.array([r for _, r in RIGIDITIES])
        for row, law in enumerate(laws):
            y = np.array([numbers(table, f"{quantity}_{r}")[row] for r, _ in RIGIDITIES])
            ax.plot(x[y > 0], y[y > 0], markersize=5, linewidth=1.5, **styles[law])
        ax.set_xscale("log")
        ax.set_yscale("log")
        plain_numbers(ax.xaxis)
        plain_numbers(ax.yaxis)
        ax.set_xlabel("rigidity (GV)")
        ax.set_ylabel(what)
        ax.set_title({"grammage": "of protons at the reference place", "age": "of protons at the reference place",
                      "residence": "protons in the grid / injected"}[quantity], fontsize=8)
        ax.tick_params(top=True, right=True, which="both")
    law_legend(figure, law_handles(styles))
    title(figure, summary, "scattering laws in numbers")
    yield "law_numbers", figure


def dots(ax, values, errors, styles, what):
    """One point per law on a logarithmic axis of at least a decade, with its value and its numerical error."""
    good = np.isfinite(values) & (values > 0)
    ax.set_xscale("log")
    if good.any():
        low, high = values[good].min(), values[good].max()
        wide = max(1.0, 10 / (high / low)) ** 0.5
        ax.set_xlim(low / wide / 2.2, high * wide * 2.2)
        plain_numbers(ax.xaxis, between=False)
        middle = np.sqrt(low * high)
    for row, ((_, style), value) in enumerate(zip(styles.items(), values)):
        if not good[row]:
            continue
        error = min(errors[row], 0.95 * value)
        ax.errorbar(value, row, xerr=error, elinewidth=1.1, capsize=3, markersize=6, **style | {"linestyle": "none"})
        right = value <= middle
        clear = value + error if right else value - error
        ax.annotate(powers_of_ten(value) if value > 1e4 or value < 1e-3 else f"{value:#.3g}", (clear, row),
                    xytext=(7 if right else -7, 0), textcoords="offset points", ha="left" if right else "right", va="center", fontsize=7.5)
    ax.set_ylim(len(styles) - 0.5, -0.5)
    ax.set_title(what, fontsize=8.5)
    ax.tick_params(axis="y", length=0)
    ax.tick_params(axis="x", top=True, which="both")
    ax.grid(axis="y", color="0.88", linewidth=0.8)
    ax.set_axisbelow(True)
    if not good.any():
        ax.text(0.5, 0.5, "not in this run", transform=ax.transAxes, ha="center", fontsize=8)
