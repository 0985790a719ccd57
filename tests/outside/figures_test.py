#!/usr/bin/python3
"""Checks scripts/figures.py with an invented output folder and with broken ones: figures_test.py FIGURES.PY. Exits 1 on a failure."""
import contextlib
import importlib
import io
import pathlib
import subprocess
import sys
import tempfile

import numpy as np
from astropy.io import fits
from matplotlib import image

sys.dont_write_bytecode = True
import fake_laws
import fake_results

ALL = ("radio_maps", "gamma_maps", "gamma_maps_pion_decay", "gamma_maps_inverse_compton_cmb", "profiles", "heights", "spectrum",
       "spectral_index_144MHz_1.4GHz")
LAW_FIGURES = ("law_pressure", "law_spectra", "law_budgets", "law_numbers")
failures = []


def check(truth, what):
    if not truth:
        failures.append(what)
        print("FAILED:", what)


def draw(*arguments):
    """Runs the script inside this process, which saves the seconds of importing matplotlib each time."""
    out, err = io.StringIO(), io.StringIO()
    sys.argv = ["figures.py", *map(str, arguments)]
    with contextlib.redirect_stdout(out), contextlib.redirect_stderr(err):
        try:
            code = script.main()
        except SystemExit as left:
            code = left.code
    return subprocess.CompletedProcess(sys.argv, code, out.getvalue(), err.getvalue())


def refused(folder, word, what):
    """Exit 2 with one line on stderr that names `word`, and no trace of Python."""
    result = draw(folder, "-o", scratch / "refused")
    check(result.returncode == 2, f"{what}: exit code {result.returncode}, expected 2")
    check(len(result.stderr.strip().splitlines()) == 1 and word in result.stderr, f"{what}: message {result.stderr!r} lacks {word!r}")


def spread(path):
    """Number of different grey levels: a blank page has one."""
    return len(np.unique(image.imread(path)[..., :3].mean(-1).round(3)))


def all_figures_come_out(folder):
    result = subprocess.run([figures, folder, "-o", scratch / "one"], capture_output=True, text=True)
    check(result.returncode == 0 and result.stderr == "", f"full folder: exit {result.returncode}, {result.stderr!r}")
    check(sorted(pathlib.Path(line).stem for line in result.stdout.splitlines()) == sorted(ALL), f"paths printed: {result.stdout!r}")
    for name in ALL:
        path = scratch / "one" / f"{name}.png"
        check(path.is_file() and path.stat().st_size > 15000 and spread(path) > 20, f"{name}.png is missing or empty")


def figures_are_the_same_twice():
    folder = scratch / "nomaps"
    fake_results.write(folder, without=("gamma", "radio"))
    for form in ("png", "pdf"):
        one, two = scratch / f"one{form}", scratch / f"two{form}"
        for target in (one, two):
            check(draw(folder, "-o", target, "--format", form).returncode == 0, f"{form}: not exit 0")
        names = sorted(p.name for p in one.iterdir())
        check(names == sorted(f"{n}.{form}" for n in ALL if "maps" not in n), f"{form}: found {names}")
        for name in names:
            check((one / name).read_bytes() == (two / name).read_bytes(), f"{name} differs between two runs")
            check(form == "png" or (one / name).read_bytes().startswith(b"%PDF"), f"{name} is no PDF")


def the_beam_is_turned_from_north_through_east():
    header = {"CDELT1": -0.01, "CDELT2": 0.01, "CRPIX1": 50.0, "CRPIX2": 50.0, "BMAJ": 0.1, "BMIN": 0.02, "BPA": 30.0}
    sky = script.Sky(header, (100, 100))
    figure, axes = script.plt.subplots(figsize=(4, 4))
    sky.draw(axes, np.zeros((100, 100)), None, "cividis")
    sky.beam(axes)
    ellipse = axes.patches[-1]
    axes.apply_aspect()
    far = ellipse.get_transform().transform((1, 0)) - axes.transData.transform(ellipse.center)  # end of the major axis, on the page
    angle = np.degrees(np.arctan2(-far[0], far[1])) % 180  # left is East
    check(abs(angle - 30) < 1e-6, f"the major axis of a beam at 30 deg is drawn at {angle}")


def east_is_to_the_left(folder):
    """A map that is bright only in its eastern half must be bright on the left of the panel, also where the pixel axes are turned."""
    ny, nx = fits.getdata(folder / "maps/radio_1.4GHz.fits").shape[1:]
    for turned in (False, True):
        half = np.zeros((ny, nx), "f4")
        half[:, nx // 2 if turned else 0:nx if turned else nx // 2] = 1
        other = scratch / f"half{turned}"
        fake_results.write(other, without=("gamma", "index", "channels", "profiles", "heights"))
        for path in (other / "maps").iterdir():
            with fits.open(path, mode="update") as hdus:
                hdus[0].data[0] = half
                if turned:  # by 180 deg: East is at high pixel numbers
                    hdus[0].header.update(PC1_1=-1.0, PC1_2=0.0, PC2_1=0.0, PC2_2=-1.0)
        result = draw(other, "-o", scratch / f"turn{turned}")
        check(result.returncode == 0, f"half map: {result.stderr!r}")
        picture = image.imread(scratch / f"turn{turned}" / "radio_maps.png")[..., :3]
        yellow = (picture[..., 0] > 0.9) & (picture[..., 1] > 0.8) & (picture[..., 2] < 0.5)
        rows = yellow[len(yellow) // 8:len(yellow) // 4]  # through the upper panels
        columns = np.flatnonzero(rows.mean(0) > 0.5)
        left = columns[columns < picture.shape[1] * 0.25]
        middle = columns[(columns > picture.shape[1] * 0.25) & (columns < picture.shape[1] * 0.42)]
        check(len(left) > 100 and len(middle) < len(left) / 5, f"East is not to the left (turned: {turned}): {len(left)}, {len(middle)}")


def absent_parts_are_skipped_with_one_line_each():
    folder = scratch / "few"
    fake_results.write(folder, without=("gamma", "index", "profiles"))
    result = draw(folder, "--contours")
    check(result.returncode == 0, f"incomplete folder: exit {result.returncode}, {result.stderr!r}")
    for word in ("gamma-ray maps", "spectral index", "profiles"):
        check(sum(f"skipped {word}" in line for line in result.stdout.splitlines()) == 1, f"no single line about {word}: {result.stdout!r}")
    check(sorted(p.stem for p in (folder / "figures").iterdir()) == ["heights", "radio_maps", "spectrum"], "wrong figures of few")
    bare = scratch / "bare"
    fake_results.write(bare, without=("radio", "gamma", "index", "channels", "profiles", "heights"))
    refused(bare, "nothing to draw", "folder without data")


def broken_folders_are_refused(folder):
    refused(scratch / "nowhere", "no such folder", "missing folder")
    refused(folder / "maps", "summary.json", "folder of something else")
    check(draw().returncode == 2, "no argument is not exit 2")
    check(draw(folder, "--format", "gif").returncode == 2, "unknown format is not exit 2")
    for name, part, content, word in (("json", "summary.json", b"{", "summary.json"),
                                      ("list", "summary.json", b"[1]", "summary.json"),
                                      ("cut", "maps/radio_144MHz.fits", None, "radio_144MHz.fits"),
                                      ("text", "maps/gamma.fits", b"SIMPLE is not this", "gamma.fits"),
                                      ("ecsv", "tables/heights.ecsv", b"# %ECSV 1.0\n# ---\n# nonsense: [\nmap\n", "heights.ecsv"),
                                      ("column", "tables/profiles.ecsv", None, "profiles.ecsv")):
        broken = scratch / name
        fake_results.write(broken, without=() if "maps" in part else ("radio", "gamma", "index"))
        path = broken / part
        if name == "cut":
            content = path.read_bytes()[:20000]
        elif name == "column":
            content = path.read_bytes().replace(b"fitted", b"fittet")
        path.write_bytes(content)
        refused(broken, word, f"broken {part} ({name})")
    (scratch / "file").write_text("in the way")
    result = draw(folder, "-o", scratch / "file")
    check(result.returncode == 6 and "cannot write" in result.stderr, f"unwritable: {result.returncode}, {result.stderr!r}")


def names(folder, form="png"):
    return sorted(p.stem for p in pathlib.Path(folder).glob(f"*.{form}"))


def law_figure(what, folder):
    """The one figure of a function of law_figures.py, not yet saved."""
    summary = script.read_summary(folder)
    return next(iter(getattr(script.law_figures, what)(folder, summary, None)))[1]


def laws_have_figures_that_compare_them_and_figures_of_their_own(folder):
    result = draw(folder, "-o", scratch / "laws1")
    check(result.returncode == 0 and result.stderr == "", f"several laws: exit {result.returncode}, {result.stderr!r}")
    check(names(scratch / "laws1") == sorted((*LAW_FIGURES, "law_heights")), f"figures of the laws: {names(scratch / 'laws1')}")
    for law in fake_laws.LAWS:
        check(names(scratch / "laws1" / law) == ["heights", "spectrum"], f"figures of {law}: {names(scratch / 'laws1' / law)}")
        check(f"skipped profiles of {law}" in result.stdout, f"no line about the profiles of {law}")
    again = draw(folder, "-o", scratch / "laws2", "--laws")
    check(again.returncode == 0 and not (scratch / "laws2" / "even").exists(), "--laws draws more than the laws")
    for name in names(scratch / "laws1"):
        one, two = (scratch / f"laws{i}" / f"{name}.png" for i in (1, 2))
        check(one.read_bytes() == two.read_bytes(), f"{name}.png differs between two runs")
        check(spread(one) > 20, f"{name}.png is empty")


def one_law_alone_has_all_figures_in_one_folder():
    fake_laws.write(scratch / "alone", laws=("even",))
    result = draw(scratch / "alone", "--format", "pdf")
    check(result.returncode == 0, f"one law: exit {result.returncode}, {result.stderr!r}")
    drawn = names(scratch / "alone" / "figures", "pdf")
    check(drawn == sorted((*LAW_FIGURES, "heights", "profiles", "spectrum")), f"one law: {drawn}")
    fake_results.write(scratch / "lawless", without=fake_laws.MAPS)
    refused_laws = draw(scratch / "lawless", "--laws")
    check(refused_laws.returncode == 2 and "nothing to draw" in refused_laws.stderr, "--laws of a run without laws is not refused")


def budgets_are_stacked_to_their_shares(folder):
    """Widths of the bars of electrons, by group, and gains to the left of 0."""
    figure = law_figure("budgets", folder)
    for ax, shares in zip(figure.axes, fake_laws.SHARES.values()):
        bars = [p for p in ax.patches if abs(p.get_y() + p.get_height() / 2) < 1e-9 and p.get_width() != 0]  # of the first law
        widths = [p.get_width() for p in bars]
        check(abs(sum(widths) - 100) < 1e-9, f"the shares drawn add up to {sum(widths)}, expected 100")
        left = min(p.get_x() + min(p.get_width(), 0) for p in bars)
        right = max(p.get_x() + max(p.get_width(), 0) for p in bars)
        gain = -sum(min(s, 0) for s in shares.values())
        check(abs(left + gain) < 1e-9 and abs(right - 100 - gain) < 1e-9, f"bars from {left} to {right}, a gain of {gain}")
    drawn = [round(p.get_width(), 6) for p in figure.axes[1].patches if abs(p.get_y() + p.get_height() / 2) < 1e-9]
    check(drawn == [20, 21, 7, 7, 0, 0, 40, 3, 2], f"electrons: groups of {drawn}")
    reach = figure.axes[1].get_xlim()
    check(reach[0] < -10 and reach[1] > 110, f"the axis {reach} cuts the bars")


def a_law_looks_the_same_in_all_figures_and_like_no_other(folder):
    looks = {law: set() for law in fake_laws.LAWS}
    for what in ("pressure", "spectra"):
        for ax in law_figure(what, folder).axes:
            for law, line in zip(fake_laws.LAWS, [one for one in ax.lines if one.get_marker() not in ("", "None", None)]):
                looks[law].add((line.get_color(), line.get_linestyle(), line.get_marker()))
    check(all(len(one) == 1 for one in looks.values()), f"a law has several looks: {looks}")
    for part in range(3):
        check(len({next(iter(one))[part] for one in looks.values()}) == 3, f"laws are alike in colour, dash or marker: {looks}")


def the_guide_falls_as_one_over_distance(folder):
    for ax in law_figure("pressure", folder).axes:
        x, y = next(line for line in ax.lines if line.get_color() == "0.45").get_data()
        slope = np.log(y[-1] / y[0]) / np.log(x[-1] / x[0])
        check(abs(slope + 1) < 1e-12, f"the guide 1/distance has the slope {slope}")


def heights_of_different_models_are_told_apart(folder):
    legend = law_figure("heights", folder).axes[0].get_legend()
    labels = [text.get_text() for text in legend.get_texts()]
    check(labels == ["even: exponential", "steep: two exponential, component 1", "steep: two exponential, component 2",
                     f"{fake_laws.LAWS[2]}: exponential"], f"legend of the heights: {labels}")
    notes = legend.get_title().get_text()
    check("do not compare" in notes and "numerical error: 1.5 %" in notes and "distance, not drawn: 8 %" in notes, f"notes: {notes!r}")


def broken_law_folders_are_refused(folder):
    for name, part, change, word in (("entry", "summary.json", lambda b: b.replace(b'"folder"', b'"place"'), "laws"),
                                     ("gone", "summary.json", lambda b: b.replace(b'"folder": "steep"', b'"folder": "gone"'), "gone"),
                                     ("short", "tables/budgets.ecsv", lambda b: b.replace(b"share", b"shore"), "budgets.ecsv")):
        broken = scratch / f"laws_{name}"
        fake_laws.write(broken)
        (broken / part).write_bytes(change((broken / part).read_bytes()))
        refused(broken, word, f"laws with a broken {part} ({name})")


if __name__ == "__main__":
    figures = pathlib.Path(sys.argv[1]).resolve()
    sys.path.insert(0, str(figures.parent))
    script = importlib.import_module(figures.stem)
    with tempfile.TemporaryDirectory() as name:
        scratch = pathlib.Path(name)
        full = scratch / "full"
        fake_results.write(full)
        all_figures_come_out(full)
        figures_are_the_same_twice()
        the_beam_is_turned_from_north_through_east()
        east_is_to_the_left(full)
        absent_parts_are_skipped_with_one_line_each()
        broken_folders_are_refused(full)
        laws = scratch / "laws"
        script.STYLE["savefig.dpi"] = 70  # takes half the time
        fake_laws.write(laws)
        laws_have_figures_that_compare_them_and_figures_of_their_own(laws)
        one_law_alone_has_all_figures_in_one_folder()
        budgets_are_stacked_to_their_shares(laws)
        a_law_looks_the_same_in_all_figures_and_like_no_other(laws)
        the_guide_falls_as_one_over_distance(laws)
        heights_of_different_models_are_told_apart(laws)
        broken_law_folders_are_refused(laws)
    print("failures:", len(failures))
    sys.exit(1 if failures else 0)
