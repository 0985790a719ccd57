#!/usr/bin/python3
"""Checks FITS maps, tables and headers against other programs: fitsverify, astropy, WCSLIB (wcsware), spectral-cube.

usage: fits_standards.py PATH/OF/make_sample_maps
A part whose program is missing is counted and named; anything wrong ends with exit code 1.
"""
import json
import pathlib
import shutil
import subprocess
import sys
import tempfile
import warnings

skipped = []
try:
    import numpy as np
    from astropy import units as u
    from astropy.coordinates import SkyCoord
    from astropy.io import fits
    from astropy.table import Table
    from astropy.wcs import WCS
except ImportError:
    print("skipped: 1 part (astropy cannot be imported)")
    sys.exit(77)

program = sys.argv[1]
checks = 0


def check(truth, what):
    global checks
    checks += 1
    if not truth:
        sys.exit(f"failed: {what}")


def run(*words, code=0):
    done = subprocess.run([program, *map(str, words)], capture_output=True, text=True)
    check(done.returncode == code, f"{words}: exit code {done.returncode}, expected {code}: {done.stderr}")
    return done.stdout if code == 0 else done.stderr


def rows(*words):
    """Lines of `positions`: i, j, longitude, latitude, value, error there and back, frequency, beam, unit."""
    return [line.split(" ", 8) for line in run("positions", *words).splitlines()]


def tool(name, path):
    """Other programs take brackets in a path for something else: they see the bare file name."""
    done = subprocess.run([*name.split(), path.name], capture_output=True, text=True, cwd=path.parent, stdin=subprocess.DEVNULL)
    return done.stdout + done.stderr


def verify_with_tools(path):
    if shutil.which("fitsverify"):
        said = tool("fitsverify -q", path)
        check("verification OK" in said, f"fitsverify: {said}")
    else:
        skipped.append("fitsverify")
    if path.name == "channels.fits":
        return
    if shutil.which("wcsware"):
        said = tool("wcsware -l", path)
        check("No invalid WCS keyrecords" in said, f"wcsware {path.name}: {said}")
    else:
        skipped.append("wcsware")


def verify_with_astropy(path):
    with fits.open(path, checksum=True) as hdus:
        hdus.verify("exception")
        for hdu in hdus:
            check("CHECKSUM" in hdu.header and "DATASUM" in hdu.header and "DATE" in hdu.header, f"{path}: {hdu.name}")
            if "BUNIT" in hdu.header:
                u.Unit(hdu.header["BUNIT"], format="fits")
        if hdus[0].data is None:
            return
        header = hdus[0].header
        wcs = WCS(header)
        values = hdus[0].data.reshape(-1, *hdus[0].data.shape[-2:])
        kpc = WCS(header, key="A")
        check(list(kpc.wcs.ctype)[:2] == ["OFFSET_X", "OFFSET_Y"], "alternate coordinates")
        place = kpc.sub(2).wcs_pix2world([[0, 0]], 0)[0]
        sky = wcs.celestial.pixel_to_world(0, 0)
        centre = wcs.celestial.pixel_to_world(19.5, 14.5)
        distance = np.tan(centre.separation(sky).rad) if "TAN" in header["CTYPE1"] else np.sin(centre.separation(sky).rad)
        check(abs(np.hypot(*place) - 10000 * distance) < 1e-9, f"{path.name}: kpc {np.hypot(*place)} {10000 * distance}")
        east = np.sin(centre.position_angle(sky).rad)
        check(east * place[0] < 0, f"{path.name}: OFFSET_X grows to the West")
    if header["BUNIT"] == "":
        return  # a spectral index is no brightness, and not read back
    found = rows(path)
    check(len(found) == len(values) * 30, f"{path.name}: {len(found)} places")
    for row, (i, j, lon, lat, value, back, frequency, major, unit) in enumerate(found):
        expected = wcs.celestial.wcs_pix2world([[int(i), int(j)]], 0)[0]
        check(np.allclose([float(lon), float(lat)], expected, rtol=0, atol=1e-10), f"{path.name}: {lon} {lat} {expected}")
        check(float(back) < 1e-8, f"{path.name}: pixel and back: {back}")
        here = values[row * len(values) // len(found), int(j), int(i)]
        check(np.float32(value) == np.float32(here) or (value == "nan" and np.isnan(here)), f"{path.name}: {value} {here}")
        check(unit == header["BUNIT"], f"{path.name}: unit {unit}")


def verify_cube(path):
    try:
        from spectral_cube import SpectralCube
    except ImportError:
        skipped.append("spectral_cube")
        return
    cube = SpectralCube.read(path)
    check(cube.shape == (1, 30, 40), f"spectral-cube: {cube.shape}")
    check(abs(cube.beam.major.to_value("arcsec") - 80) < 1e-9, f"spectral-cube: {cube.beam}")
    check(cube.spectral_axis.unit == u.Hz and cube.spectral_axis[0].value == 1.4e9, f"spectral-cube: {cube.spectral_axis}")


def verify_headers(folder):
    header = fits.getheader(folder / "radio.fits")
    check(header["TITLE"].startswith("Gal?xia 'sample', a title"), header["TITLE"])
    check(len(header["TITLE"]) > 68, header["TITLE"])
    check(header["RMSNOISE"] == 1 / 3 and header["NSAMP"] == 4, "numbers read back exactly")
    check("FLUXCHK" not in header, "a NaN is left out")
    check(abs(header["BPA"] - np.degrees(0.3)) < 1e-12, "BPA")
    table = Table.read(folder / "even.fits", hdu="ENERGIES")
    check(np.allclose(table["ENERGY"].quantity.to_value("GeV"), [1, 10, 100], rtol=1e-14, atol=0), "ENERGIES")
    wcs = WCS(fits.getheader(folder / "even.fits"))
    nodes = (wcs.wcs_pix2world([[0, 0, k] for k in range(3)], 0)[:, 2] * u.Unit(wcs.wcs.cunit[2])).to_value("GeV")
    # WCSLIB turns MeV into joule with an older electronvolt, 8e-8 off.
    check(np.allclose(nodes, [1, 10, 100], rtol=1e-6, atol=0), f"ENER-LOG: {nodes}")
    bounds = Table.read(folder / "bands.fits", hdu="EBOUNDS")
    check(np.allclose(bounds["E_MAX"].quantity.to_value("GeV"), [3, 9, 27], rtol=1e-14, atol=0), "EBOUNDS")
    check(fits.getheader(folder / "uneven.fits")["CTYPE3"] == "ENERBAND", "uneven energies make no ENER-LOG axis")
    channels = Table.read(folder / "channels.fits", hdu="CHANNELS")
    check(list(channels["FREQ"]) == [1e8, 3e8] and channels["FREQ"].unit == u.Hz, "CHANNELS")


def verify_texts(folder):
    table = Table.read(folder / "table.ecsv", format="ascii.ecsv")
    check(table["h"][0] == 1 / 3 and np.isnan(table["h"][1]) and table["h"][2] == 1e-300, "ECSV numbers")
    check(table["h"].unit == u.kpc and table["fitted"].dtype == bool and table["n"].dtype == np.int64, "ECSV types")
    check(table["label"][0] == "144 MHz" and table["label"][2] == 'a,"b" # c', f"ECSV texts: {table['label']}")
    check(table.meta["command"] == 'aureole predict "a b.toml"' and table.meta["odd: key"] == "1.4e9", f"{table.meta}")
    summary = json.loads((folder / "summary.json").read_text(encoding="utf-8"))
    check(summary["third"] == 1 / 3 and summary["nan"] is None and summary["empty"] == [], f"JSON: {summary}")
    check(summary["text"] == 'a "b"\n\\ \u00e9 \ufffd' and summary["list"] == [1, True, None], f"JSON: {summary}")


def foreign_header(kind):
    header = fits.Header()
    frame = ("GLON-", "GLAT-") if kind.startswith("galactic") else ("RA---", "DEC--")
    projection = "SIN" if "sin" in kind else "TAN"
    header["CTYPE1"], header["CTYPE2"] = frame[0] + projection, frame[1] + projection
    header["CRPIX1"], header["CRPIX2"] = 21.25, 14.5
    header["CRVAL1"], header["CRVAL2"] = (121.2, -21.6) if kind.startswith("galactic") else (10.7, 41.3)
    header["BUNIT"] = "JY/BEAM"
    header["BMAJ"], header["BMIN"], header["BPA"] = 0.02, 0.01, 30.0
    if "cd" in kind:
        turn = np.radians(35)
        cd = 0.004 * np.array([[-np.cos(turn), np.sin(turn)], [np.sin(turn), np.cos(turn)]])
        for i in (0, 1):
            for j in (0, 1):
                header[f"CD{i + 1}_{j + 1}"] = cd[i, j]
    else:
        header["CDELT1"], header["CDELT2"] = -0.004, 0.004
        if "crota" in kind:
            header["CROTA2"] = 25.0
            header["EPOCH"] = 2000.0
    return header


def sky_function(coordinates):
    icrs = SkyCoord(coordinates.icrs.ra, coordinates.icrs.dec)
    place = SkyCoord(10.7 * u.deg, 41.3 * u.deg)
    east, north = place.spherical_offsets_to(icrs)
    return np.exp(-((east.deg / 0.03) ** 2) - ((north.deg - 0.01) / 0.02) ** 2)


def verify_foreign(folder):
    for kind in ("icrs tan", "icrs tan crota", "icrs sin cd", "galactic tan cd", "galactic sin"):
        header = foreign_header(kind)
        path = folder / (kind.replace(" ", "_") + "[1].fits")
        wcs = WCS(header)
        j, i = np.mgrid[0:30, 0:40]
        data = sky_function(wcs.pixel_to_world(i, j))
        cube = data[None, None]
        header.update(CTYPE3="FREQ", CRVAL3=4.85e9, CDELT3=1e6, CRPIX3=1.0, CUNIT3="Hz", CTYPE4="STOKES", CRVAL4=1.0,
                      CDELT4=1.0, CRPIX4=1.0)
        fits.PrimaryHDU(cube.astype(">f4"), header).writeto(path, overwrite=True, checksum=True)
        for a, b, lon, lat, value, back, frequency, major, unit in rows(path):
            expected = wcs.wcs_pix2world([[int(a), int(b)]], 0)[0]
            check(np.allclose([float(lon), float(lat)], expected, rtol=0, atol=1e-10), f"{kind}: {lon} {lat} {expected}")
            check(np.float32(value) == np.float32(data[int(b), int(a)]), f"{kind}: value {value}")
            check(float(frequency) == 4.85e9 and unit == "Jy/beam" and abs(float(major) - 0.02) < 1e-15,
                  f"{kind}: {frequency} {unit} {major}")
        if kind.startswith("galactic"):  # other frames are refused by name
            said = run("regrid", path, folder / "icrs_tan[1].fits", code=4)
            check("GALACTIC" in said and "ICRS" in said, f"{kind}: {said}")
            continue
        values = np.array(run("regrid", path, folder / "icrs_tan[1].fits").split(), dtype=float).reshape(30, 40)
        target = WCS(foreign_header("icrs tan"))
        expected = sky_function(target.pixel_to_world(i, j))
        inside = np.isfinite(values)
        error = np.abs(values - expected)
        # Towards the borders fewer pixels carry the interpolation. FK5 is taken for ICRS, 0.02 arcsec off.
        worst, middle = error[inside].max(), error[10:20, 13:27].max()
        check(inside.sum() > 900 and worst < 1e-3, f"{kind}: regrid, {inside.sum()} pixels, error {worst}")
        # Six points: 0.0049 of the sixth derivative, 3.7e-5 for exp(-(x/5)^2).
        check(middle < (5e-4 if "crota" in kind else 3.7e-5), f"{kind}: regrid, error {middle} in the middle")
        print(f"{kind}: regridded {inside.sum()} pixels, largest error {worst:.1e} of the peak, {middle:.1e} in the middle")


def verify_storage(folder):
    header = foreign_header("icrs tan")
    data = np.arange(1200, dtype=np.float64).reshape(30, 40)
    blank = data.copy()
    blank[0, 0] = np.nan
    scaled = fits.ImageHDU(np.where(np.isnan(blank), -32768, blank).astype(np.int16), header, name="MAP")
    scaled.header["BLANK"] = -32768
    scaled.header["BSCALE"], scaled.header["BZERO"] = 0.5, 10.0
    raw = folder / "stored.fits"
    fits.HDUList([fits.PrimaryHDU(), scaled]).writeto(raw, overwrite=True, checksum=False)
    with fits.open(raw) as opened:
        expected = opened["MAP"].data.copy()
    packed = folder / "stored.fits.gz"
    fits.HDUList([fits.PrimaryHDU(), fits.ImageHDU(expected.astype("f4"), header, name="MAP")]).writeto(packed, overwrite=True)
    tiled = folder / "tiled.fits"
    fits.HDUList([fits.PrimaryHDU(), fits.CompImageHDU(expected.astype("f4"), header, name="MAP", compression_type="GZIP_2",
                                                       quantize_level=0)]).writeto(tiled, overwrite=True)
    for path in (raw, packed, tiled):
        for i, j, lon, lat, value, *rest in rows(path):
            here = expected[int(j), int(i)]
            check((value == "nan" and np.isnan(here)) or np.float32(value) == np.float32(here), f"{path.name}: {value} {here}")


with tempfile.TemporaryDirectory() as name:
    place = pathlib.Path(name) / "sample [maps] \u00e9"
    place.mkdir()
    run("write", place)
    warnings.simplefilter("error")
    for file in sorted(place.glob("*.fits")):
        verify_with_tools(file)
        verify_with_astropy(file)
    verify_headers(place)
    verify_texts(place)
    verify_cube(place / "radio.fits")
    warnings.simplefilter("default")
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")
        verify_foreign(place)
        verify_storage(place)

print(f"{checks} checks passed; skipped: {len(skipped)} {', '.join(sorted(set(skipped)))}")
