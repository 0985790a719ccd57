"""What the figures of figures.py have in common: colours, dashes, markers, fonts, titles, ticks."""
import matplotlib
import numpy as np

# Wong 2011, Nat. Methods 8, 441, without the yellow, which is lost on white paper. Dashes and markers tell the lines apart in grey.
PALETTE = ("#000000", "#D55E00", "#0072B2", "#009E73", "#CC79A7", "#E69F00", "#56B4E9")
DASHES = ("-", "--", "-.", ":", (0, (5, 1, 1, 1, 1, 1)), (0, (7, 2)), (0, (2, 1)))
MARKERS = "osD^vPX*"
STYLE = {"font.family": "DejaVu Sans", "font.size": 9, "axes.titlesize": 9.5, "axes.labelsize": 9, "xtick.labelsize": 8,
         "ytick.labelsize": 8, "legend.fontsize": 8, "figure.titlesize": 11, "pdf.fonttype": 42, "image.cmap": "cividis",
         "xtick.direction": "in", "ytick.direction": "in", "legend.frameon": False, "savefig.dpi": 160}


def title(figure, summary, what):
    """Says of every figure that nothing in it was observed, and of which scattering law it is."""
    name = summary.get("object") or summary.get("title") or "unnamed galaxy"
    law = f"\nscattering law {summary['law']}" if summary.get("law") else ""
    figure.suptitle(f"{name} - model output - {what}{law}")


def plain_ticks(ax):
    """Ticks 1, 2, 5 in plain figures, so that even an axis of less than a decade has some."""
    for axis in (ax.xaxis, ax.yaxis):
        low, high = axis.get_view_interval()
        span = high / low
        steps = (1, 2, 5) if span > 8 else (1, 1.5, 2, 3, 4, 5, 7) if span > 2.5 else (1, 1.2, 1.4, 1.6, 1.8, *np.arange(2, 10, 0.5))
        axis.set_major_locator(matplotlib.ticker.LogLocator(subs=steps, numticks=20))
        axis.set_major_formatter(matplotlib.ticker.FuncFormatter(lambda value, _: f"{value:g}"))
        axis.set_minor_formatter(matplotlib.ticker.NullFormatter())
