#!/usr/bin/python3
"""Writes an invented galaxy as a HALO-GRID file for benchmarks: make_grid.py FILE [CELLS [ENERGIES]].

Electrons and protons on CELLS^3 stretched cells, ordered and random field, three gas phases, two radiation components given as
energy densities by the scenario. Planes are written one after another, so that memory stays small at any size."""
import sys

import numpy as np
from astropy.io import fits


def edges(half, cells, stretch):
    """Symmetric edges, finer near 0."""
    t = np.linspace(-1, 1, cells + 1)
    return half * np.sinh(stretch * t) / np.sinh(stretch)


def image(name, shape, unit, axes, **cards):
    """Header of an image HDU whose data will be appended as bytes."""
    header = fits.Header()
    header["XTENSION"] = "IMAGE"
    header["BITPIX"] = -32
    header["NAXIS"] = len(shape)
    for i, n in enumerate(reversed(shape), 1):
        header[f"NAXIS{i}"] = n
    header["PCOUNT"] = 0
    header["GCOUNT"] = 1
    header["EXTNAME"] = name
    header["BUNIT"] = unit
    header["AXES"] = axes
    header.update(cards)
    return header


def main(path, cells=128, energies=64):
    x = edges(20.0, cells, 2.0)
    z = edges(12.0, cells, 3.0)
    xc, zc = 0.5 * (x[1:] + x[:-1]), 0.5 * (z[1:] + z[:-1])
    energy_e = np.geomspace(0.01, 1e4, energies)
    energy_p = np.geomspace(0.01, 1e6, energies)
    primary = fits.PrimaryHDU()
    primary.header.update(FMTNAME="HALO-GRID", FMTVERS="1.0", GEOMETRY="XYZ", ZMIRROR=False, OBJECT="INVENTED")
    hdus = [primary]
    for name, values, unit in (("X_EDGES", x, "kpc"), ("Y_EDGES", x, "kpc"), ("Z_EDGES", z, "kpc"),
                               ("E_LEPTON", energy_e, "GeV"), ("E_PROTON", energy_p, "GeV")):
        hdu = fits.ImageHDU(values, name=name)
        hdu.header["BUNIT"] = unit
        hdus.append(hdu)
    fits.HDUList(hdus).writeto(path, overwrite=True)

    radius = np.hypot(xc[None, :], xc[:, None])
    with open(path, "ab") as out:
        def write(header, planes):
            out.write(header.tostring(sep="", endcard=True, padding=True).encode("ascii"))
            size = 0
            for plane in planes:
                size += out.write(np.ascontiguousarray(plane, dtype=">f4").tobytes())
            out.write(b"\0" * (-size % 2880))

        shape = (cells, cells, cells)
        write(image("CR_ELECTRON", shape + (energies,), "cm-3 GeV-1", "E_LEPTON,X,Y,Z"),
              (1.5e-11 * np.exp(-radius / 6)[..., None] * np.exp(-abs(h) / (2.5 * energy_e ** -0.15))
               * energy_e ** -2.7 * np.exp(-energy_e / 3e3) for h in zc))
        write(image("CR_PROTON", shape + (energies,), "cm-3 GeV-1", "E_PROTON,X,Y,Z"),
              (9e-10 * np.exp(-radius / 6 - abs(h) / 4)[..., None] * (energy_p + 0.938) ** -2.7 for h in zc))
        ring = np.maximum(radius, 1e-6)
        write(image("B_VECTOR", shape + (3,), "uG", "COMP,X,Y,Z", COMPS="X,Y,Z"),
              (np.stack([-xc[:, None] / ring, xc[None, :] / ring, 0.3 * np.sign(h) + 0 * ring], -1)
               * (4 * np.exp(-radius / 12 - abs(h) / 5))[..., None] for h in zc))
        for name, peak, radial, height, unit in (("B_TURB", 6.0, 10.0, 3.0, "uG"), ("GAS_HI", 1.5, 6.0, 0.25, "cm-3"),
                                                 ("GAS_H2", 3.0, 3.0, 0.1, "cm-3"), ("GAS_HII", 0.05, 8.0, 1.5, "cm-3")):
            write(image(name, shape, unit, "X,Y,Z"),
                  (peak * np.exp(-radius / radial - abs(h) / height) for h in zc))


if __name__ == "__main__":
    main(sys.argv[1], *(int(a) for a in sys.argv[2:4]))
