#!/usr/bin/python3
"""Independent NumPy/SciPy pipeline from a HALO-GRID file to maps: an oracle for the results of aureole, and a reference for speed.

  numpy_pipeline.py GRID.fits OUT.npz --frequencies HZ ... --energies GEV ... --radiation T:U ... --inclination DEG --distance KPC
                    --pixels N --pixel-size KPC [--azimuth DEG] [--rows] [--plane-block N] [--step F] [--renormalise] [--eps-n 1.8]
                    [--helium 0.1]

GRID must be an XYZ grid without mirror. --radiation gives diluted blackbodies: temperature in K, energy density in eV cm-3 (omit U for
an undiluted one). Prints wall and processor seconds of each stage as JSON. OUT.npz holds
  radio [frequency, y, x] erg s-1 cm-2 Hz-1 sr-1, gamma [energy, y, x] cm-2 s-1 sr-1 MeV-1 (sum of the processes), with
  x to the right along the major axis and y up (towards the galaxy's +z side), pixel centres `axis` in kpc;
  luminosity_radio (erg s-1 Hz-1, 4 pi sum j V), luminosity_<process> (s-1 MeV-1); flux_radio (erg s-1 cm-2 Hz-1) and flux_gamma
  (cm-2 s-1 MeV-1) of the maps.

How it is done
- Synchrotron: trapezium in ln E on the energy nodes (gamma = 1 + T/mc2 for kinetic nodes). Kernels tabulated by SciPy in ln x and read
  with np.interp, cell by cell and node by node. Ordered and random field together: the Rice average of F over the field across the
  view (Gaussian components of B_TURB/sqrt3), tabulated at 25 shares t = b/(b + sqrt2 sigma) of the ordered field b from 0 to 1, linear
  between the two neighbouring shares; x counts with the rms field across, sqrt(b^2 + 2 sigma^2).
- Inverse Compton (Jones 1968), pion decay (Kafexhiu et al. 2014: Geant4 to 50 GeV, Pythia 8 above), bremsstrahlung: weights on the
  energy nodes, from the trapezium on a sub-grid of `FINE` points per interval, where the spectrum is a power law times straight lines
  between the nodes of E^s N (s = 2.75; linear basis); then one matrix product per plane block and process.
- Projection: rays along the line of sight, one per pixel centre, nearest cell at equal steps of `step` times the smallest cell width
  (default 1); all pixels at once, one step after another. --rows takes the same samples, but uses that at azimuth 0 a row of pixels
  shares its way through y and z: faster, not general. Error: first order in the step, no refinement in the pixel.
The matrix products run on as many threads as the BLAS behind NumPy uses (OpenBLAS: OPENBLAS_NUM_THREADS); all else on one.
"""
import argparse
import contextlib
import json
import time

import numpy as np
from astropy.io import fits
from scipy import special

KPC, EV = 3.0856775814913673e21, 1.602176634e-12  # cm, erg
C, E_CHARGE, MC2, ALPHA, R_E = 2.99792458e10, 4.80320471e-10, 0.51099895e-3, 1 / 137.035999084, 2.8179403262e-13  # CODATA 2018; MC2 in GeV
SIGMA_T = 8 * np.pi / 3 * R_E ** 2
M_E = 9.1093837015e-28
SYNC = np.sqrt(3) * E_CHARGE ** 3 / (4 * np.pi * M_E * C * C)
NU_1 = 3 * E_CHARGE / (4 * np.pi * M_E * C)
M_P, M_PI = 0.93827209, 0.1349768  # GeV
FINE, SLOPE = 48, 2.75


class Stages:
    """Wall and processor seconds by name; processor time is what counts on a shared machine."""

    def __init__(self):
        self.wall, self.cpu = {}, {}

    @contextlib.contextmanager
    def stage(self, name):
        wall, cpu = time.perf_counter(), time.process_time()
        yield
        self.wall[name] = self.wall.get(name, 0.0) + time.perf_counter() - wall
        self.cpu[name] = self.cpu.get(name, 0.0) + time.process_time() - cpu


# ---- kernels ---------------------------------------------------------------------------------------------------------------------------

def kernel_f(x):
    """x int_x^inf K_{5/3}, Westfold 1959, as an integral over hyperbolic functions."""
    t = np.arange(0, 30 * 32 + 1) / 32
    weight = np.full(t.size, 1 / 32)
    weight[0] /= 2
    x = np.asarray(x)
    with np.errstate(over="ignore", under="ignore"):
        value = np.exp(-np.minimum(x[..., None] * np.cosh(t), 745)) @ (weight * np.cosh(5 * t / 3) / np.cosh(t))
    return np.where(x < 700, x * value, 0)


def rice_tables(shares, ln_x):
    """Rice mean of (B/B_rms) F(x B_rms/B) against ln x = ln nu/nu_c(rms field across) for each share of the ordered field."""
    table = np.empty((len(shares), len(ln_x)))
    plain = kernel_f(np.exp(ln_x))
    for row, t in zip(table, shares):
        if t == 1:
            row[:] = plain
            continue
        b = t / (1 - t) * np.sqrt(2)  # ordered field in units of sigma
        rms = np.sqrt(b * b + 2)
        low, high = max(0.0, b - 9), b + 9
        node, weight = np.polynomial.legendre.leggauss(240)
        field = low + (high - low) * 0.5 * (node + 1)
        density = field * np.exp(-0.5 * (field - b) ** 2) * special.i0e(field * b) * weight * 0.5 * (high - low)
        row[:] = sum(d * f / rms * np.interp(ln_x + np.log(rms / f), ln_x, plain, right=0) for d, f in zip(density, field))
    return table


def ic_rate(energy, gamma, temperature, density):
    """dN/(dt dE) per electron [s-1 GeV-1] for photons of `energy` (GeV), a blackbody diluted to `density` (eV cm-3)."""
    kt = 8.617333262e-5 * temperature * 1e-9 / MC2  # of m c2
    eps = np.exp(np.linspace(np.log(1e-5), np.log(35), 400)) * kt
    step = np.log(eps[1] / eps[0])
    shape = eps ** 2 / np.expm1(eps / kt)
    shape *= density * 1e-9 / MC2 / (np.sum(shape * eps * eps) * step)  # photons cm-3 per unit eps
    z = (energy / MC2 / gamma)[:, None]
    big = 4 * eps * gamma[:, None]
    with np.errstate(divide="ignore", invalid="ignore", over="ignore"):
        q = z / (big * (1 - z))
        inside = (z < 1) & (q <= 1) & (q >= 1 / (4 * gamma[:, None] ** 2))
        q = np.where(inside, q, 1)
        bracket = 2 * q * np.log(q) + (1 + 2 * q) * (1 - q) + (big * q) ** 2 * (1 - q) / (2 * (1 + big * q))
    rate = np.where(inside, bracket, 0) * 3 * SIGMA_T * C / (4 * gamma[:, None] ** 2 * eps)
    return (rate * shape * eps).sum(1) * step / MC2


def pion_cross_section(energy, kinetic, renormalise):
    """dsigma/dE of p + p -> pi0 -> gamma [cm2/GeV]; rows kinetic energy (GeV), columns photon energy."""
    return np.array([pion_row(energy, t, renormalise) for t in kinetic])


def sigma_inelastic(t):
    ratio = np.log(t / 0.27966)
    return (30.7 - 0.96 * ratio + 0.18 * ratio ** 2) * (1 - np.exp(-1.9 * ratio)) ** 3


def sigma_pi0(t):
    """Inclusive pi0 cross-section in mb, Kafexhiu et al. 2014: Geant4 to 50 GeV, Pythia 8 above (coefficients from memory)."""
    s = 2 * M_P * (t + 2 * M_P)
    if t < 2:
        resonance, width, root = 1.1883, 0.2264, np.sqrt(s)
        eta = np.sqrt(max((s - M_PI ** 2 - 4 * M_P ** 2) ** 2 - 16 * M_PI ** 2 * M_P ** 2, 0)) / (2 * M_PI * root)
        g = np.sqrt(resonance ** 2 * (resonance ** 2 + width ** 2))
        k = np.sqrt(8) * resonance * width * g / (np.pi * np.sqrt(resonance ** 2 + g))
        breit_wigner = M_P * k / (((root - M_P) ** 2 - resonance ** 2) ** 2 + (resonance * width) ** 2)
        one = 7.66e-3 * eta ** 1.95 * (1 + eta + eta ** 5) * breit_wigner ** 1.86
        return one + (5.7 / (1 + np.exp(-9.3 * (t - 1.4))) if t >= 0.56 else 0)
    if t < 5:
        q = (t - 0.27966) / M_P
        return sigma_inelastic(t) * (-6e-3 + 0.237 * q - 0.023 * q * q)
    a = (0.728, 0.596, 0.491, 0.2503, 0.117) if t <= 50 else (0.652, 0.0016, 0.488, 0.1928, 0.483)
    xi = (t - 3) / M_P
    return sigma_inelastic(t) * a[0] * xi ** a[3] * (1 + np.exp(-a[1] * xi ** a[4])) * (1 - np.exp(-a[2] * xi ** 0.25))


def pion_row(energy, t, renormalise):
    s = 2 * M_P * (t + 2 * M_P)
    if t <= 0.27966 or s <= (2 * M_P + M_PI) ** 2:
        return np.zeros_like(energy)
    root, theta = np.sqrt(s), t / M_P
    e_cm = (s - 4 * M_P ** 2 + M_PI ** 2) / (2 * root)
    p_cm = np.sqrt(max(e_cm ** 2 - M_PI ** 2, 0))
    g_cm = (t + 2 * M_P) / root
    e_max = g_cm * (e_cm + p_cm * np.sqrt(1 - g_cm ** -2))
    top = 0.5 * e_max * (1 + np.sqrt(max(1 - (M_PI / e_max) ** 2, 0)))
    q = (t - 1) / M_P
    mu = 1.25 * max(q, 0) ** 1.25 * np.exp(-1.25 * q)
    if t <= 1:
        peak, (lam, a, b, g) = 5.9 / e_max, (1, 1, 3.29 - 0.2 * theta ** -1.5, 0)
    else:
        b1, b2, b3 = (9.53, 0.52, 0.054) if t < 5 else (9.13, 0.35, 9.7e-3) if t <= 50 else (9.06, 0.3795, 0.01105)
        peak = b1 * theta ** -b2 * np.exp(b3 * np.log(theta) ** 2) / M_P
        lam, a, b, g = ((3, 1, mu + 2.45, mu + 1.45) if t <= 4 else (3, 1, 1.5 * mu + 4.95, mu + 1.5) if t <= 20
                        else (3, 0.5, 4.2, 1) if t <= 50 else (3.5, 0.5, 4.0, 1))

    def shape(e):
        y, y_max = e + M_PI ** 2 / (4 * e), top + M_PI ** 2 / (4 * top)
        x = (y - M_PI) / (y_max - M_PI)
        inside = (x < 1) & (x >= 0)
        x = np.where(inside, x, 0.5)
        return np.where(inside, (1 - x ** a) ** b / (1 + x * y_max / (lam * M_PI)) ** g, 0)

    sigma = sigma_pi0(t)
    if renormalise:  # two photons per pion; trapezium over ln E, even about half the pion's mass
        e = np.exp(np.linspace(np.log(M_PI ** 2 / (4 * top)), np.log(top), 801))
        peak = 2 / np.trapz(shape(e) * e, np.log(e))
    return peak * sigma * shape(energy) * 1e-27


def brems_atomic(energy, total, screening, z, electrons):
    """(B4) of Blumenthal & Gould 1970 with tabulated phi(Delta); unscreened beyond Delta = 2. cm2/GeV; rows electrons, columns photons."""
    k, e0 = energy[None, :] / MC2, total[:, None] / MC2
    e = e0 - k
    inside = e > 1
    e = np.where(inside, e, 2.0)
    delta = k / (4 * ALPHA * e0 * e)
    phi1, phi2 = (np.interp(np.log(delta + 1e-4), np.log(screening[0] + 1e-4), column) for column in screening[1:])
    ratio = e / e0
    screened = ALPHA * R_E ** 2 / k * ((1 + ratio ** 2) * phi1 - 2 / 3 * ratio * phi2)
    bare = unscreened(k, e0, e) * (z * z + electrons)
    return np.where(inside, np.where(delta < 2, screened, bare), 0) / MC2


def unscreened(k, e0, e):
    """(B1), relativistic Bethe-Heitler for Z = 1; zero where the logarithm turns negative."""
    return 4 * ALPHA * R_E ** 2 / k * (1 + (e / e0) ** 2 - 2 / 3 * e / e0) * np.maximum(np.log(2 * e0 * e / k) - 0.5, 0)


def brems_ionised(energy, total, helium):
    """Per H nucleus of ionised gas: Z^2 of the nuclei and one for each free electron, (B1) for both."""
    k, e0 = energy[None, :] / MC2, total[:, None] / MC2
    inside = e0 - k > 1
    e = np.where(inside, e0 - k, 2.0)
    return np.where(inside, unscreened(k, e0, e) * ((1 + 4 * helium) + (1 + 2 * helium)), 0) / MC2


def screening_functions(z, electrons, power):
    """Table Delta, phi1, phi2 from the form factor F = [1 + q^2/(4 a^2)]^-2 with S = 2(1-F) for H, 2(1-F)(3-F) for He."""
    deltas = np.concatenate(([0], np.geomspace(1e-4, 2.2, 60)))
    phi = np.empty((2, deltas.size))
    node, weight = np.polynomial.legendre.leggauss(400)
    for i, delta in enumerate(deltas):
        d = max(2 * ALPHA * delta, 1e-12)
        ln_q = 0.5 * np.log(d) * (1 - node)
        q, w = np.exp(ln_q), weight * -0.5 * np.log(d)
        f = (1 + q * q / (4 * (ALPHA * power) ** 2)) ** -2
        source = 2 * (1 - f) * (1 if electrons == 1 else 3 - f)
        phi[0, i] = 4 * (z * z + electrons + np.sum(w * (q - d) ** 2 * source / q ** 2))
        phi[1, i] = 4 * (5 / 6 * (z * z + electrons)
                         + np.sum(w * (q ** 3 - 6 * d * d * q * np.log(q / d) + 3 * d * d * q - 4 * d ** 3) * source / q ** 3))
    return np.vstack((deltas, phi))


# ---- weights ---------------------------------------------------------------------------------------------------------------------------

def fine_grid(nodes):
    """Sub-grid in ln E with its trapezium weights dE, and the linear basis: N(fine) = basis @ N(nodes), straight in E^SLOPE N."""
    ln = np.log(nodes)
    fine = np.concatenate([np.linspace(ln[i], ln[i + 1], FINE, endpoint=False) for i in range(len(ln) - 1)] + [ln[-1:]])
    energy = np.exp(fine)
    half = np.diff(fine, prepend=fine[0])
    weight = 0.5 * (half + np.append(half[1:], 0)) * energy
    index = np.minimum(np.searchsorted(ln, fine, side="right") - 1, len(ln) - 2)
    share = (fine - ln[index]) / (ln[index + 1] - ln[index])
    basis = np.zeros((fine.size, len(ln)))
    rows = np.arange(fine.size)
    basis[rows, index] = (1 - share) * (nodes[index] / energy) ** SLOPE
    basis[rows, index + 1] += share * (nodes[index + 1] / energy) ** SLOPE
    return energy, weight, basis


def weights(options, leptons, protons):
    """[process -> matrix [photon energies, nodes]] for emissivities per sr [cm-3 s-1 sr-1 MeV-1], before gas density."""
    photon = np.array(options.energies)
    result = {}
    if leptons is not None:
        kinetic, dw, basis = fine_grid(leptons)
        gamma = 1 + kinetic / MC2
        speed = C * np.sqrt(1 - gamma ** -2.0)
        for temperature, density in options.radiation:
            rate = np.array([ic_rate(e, gamma, temperature, density) for e in photon])
            result[f"inverse_compton:{temperature:g}"] = (rate * dw) @ basis / (4 * np.pi) * 1e-3
        total = kinetic + MC2
        hydrogen = brems_atomic(photon, total, screening_functions(1, 1, 1), 1, 1)
        helium = brems_atomic(photon, total, screening_functions(2, 2, 27 / 16), 2, 2)
        for name, cross in (("neutral", hydrogen + options.helium * helium), ("ionised", brems_ionised(photon, total, options.helium))):
            result[f"bremsstrahlung:{name}"] = (cross.T * (speed * dw)) @ basis / (4 * np.pi) * 1e-3
    if protons is not None:
        kinetic, dw, basis = fine_grid(protons)
        speed = C * np.sqrt(1 - (1 + kinetic / M_P) ** -2.0)
        cross = pion_cross_section(photon, kinetic, options.renormalise)
        result["pion_decay"] = options.eps_n * (cross.T * (speed * dw)) @ basis / (4 * np.pi) * 1e-3
    return result


# ---- cells -----------------------------------------------------------------------------------------------------------------------------

class Synchrotron:
    def __init__(self, frequencies, nodes):
        self.ln_x = np.linspace(np.log(1e-9), np.log(800), 6000)
        self.shares = 1 - np.linspace(0, 1, 25)[::-1] ** 2  # from the random to the ordered end, denser there
        self.tables = rice_tables(self.shares, self.ln_x)
        ln = np.log(nodes)
        weight = np.zeros(len(ln))
        weight[:-1] += 0.5 * np.diff(ln)
        weight[1:] += 0.5 * np.diff(ln)
        self.weight = weight * nodes
        self.ln_gamma_c = np.log(NU_1) + 2 * np.log(1 + nodes / MC2)
        self.frequencies = np.array(frequencies)

    def emissivity(self, ordered, sigma, density):
        """[cells, frequencies]; ordered field across the view and standard deviation in G, density [cells, nodes] cm-3 GeV-1."""
        rms = np.sqrt(ordered ** 2 + 2 * sigma ** 2)
        share = ordered / np.maximum(ordered + np.sqrt(2) * sigma, 1e-300)
        low = np.minimum(np.searchsorted(self.shares, share, side="right") - 1, len(self.shares) - 2)
        between = ((share - self.shares[low]) / np.diff(self.shares)[low])[:, None]
        with np.errstate(divide="ignore"):
            ln_nu_c = np.log(rms)[:, None] + self.ln_gamma_c
        weighted = density * self.weight
        out = np.empty((len(rms), len(self.frequencies)))
        groups = [np.flatnonzero(low == k) for k in range(len(self.shares) - 1)]
        for f, frequency in enumerate(self.frequencies):
            x = np.log(frequency) - ln_nu_c
            for k, cells in enumerate(groups):
                if len(cells) == 0:
                    continue
                one, two = (np.interp(x[cells], self.ln_x, self.tables[j], right=0) for j in (k, k + 1))
                out[cells, f] = (weighted[cells] * (one + between[cells] * (two - one))).sum(1)
        return SYNC * rms[:, None] * out


class Grid:
    """Opened HALO-GRID file; arrays stay on disk and are read by planes."""

    def __init__(self, path):
        self.hdus = fits.open(path, memmap=True, do_not_scale_image_data=True)
        header = self.hdus[0].header
        if header.get("GEOMETRY") != "XYZ" or header.get("ZMIRROR"):
            raise SystemExit("numpy_pipeline.py: only GEOMETRY XYZ without ZMIRROR")
        self.edges = [np.asarray(self.hdus[f"{a}_EDGES"].data, float) for a in "XYZ"]

    def nodes(self, name):
        return np.asarray(self.hdus[name].data, float) if name in self.hdus else None

    def planes(self, name, a, b):
        return np.asarray(self.hdus[name].data[a:b], float) if name in self.hdus else 0.0


def emit(grid, options, stages):
    """Emissivities [z, y, x, channel] float32 over their units; luminosities."""
    leptons, protons = grid.nodes("E_LEPTON"), grid.nodes("E_PROTON")
    with stages.stage("weights"):
        matrices = weights(options, leptons, protons)
    with stages.stage("synchrotron tables"):
        synchrotron = Synchrotron(options.frequencies, leptons)
    nx, ny, nz = (len(e) - 1 for e in grid.edges)
    volume = np.diff(grid.edges[2])[:, None, None] * np.diff(grid.edges[1])[:, None] * np.diff(grid.edges[0]) * KPC ** 3
    radio = np.zeros((nz, ny, nx, len(options.frequencies)), "f4")
    gamma = np.zeros((nz, ny, nx, len(options.energies)), "f4")
    luminosity = {name: np.zeros(len(options.energies)) for name in matrices} | {"radio": np.zeros(len(options.frequencies))}
    view = -galaxy_axes(options)[2]  # unit vector to the observer
    for a in range(0, nz, options.plane_block):
        b = min(a + options.plane_block, nz)
        block = (b - a, ny, nx)

        def scalar(*names):
            return np.broadcast_to(sum(grid.planes(n, a, b) for n in names), block).reshape(-1)

        with stages.stage("read"):
            field = grid.planes("B_VECTOR", a, b) * 1e-6
            sigma = scalar("B_TURB") * 1e-6 / np.sqrt(3)
            neutral, ionised = scalar("GAS_HI", "GAS_H2"), scalar("GAS_HII")
            electrons = sum(grid.planes(f"CR_{n}", a, b) for n in ("ELECTRON", "POSITRON", "LEPTON")).reshape(-1, len(leptons))
            nuclei = grid.planes("CR_PROTON", a, b).reshape(-1, len(protons)) if protons is not None else None
        with stages.stage("synchrotron"):
            across = np.linalg.norm(np.cross(np.broadcast_to(field, block + (3,)).reshape(-1, 3), view), axis=1)
            j = synchrotron.emissivity(across, sigma, electrons)
            radio[a:b] = (j * options.scale_radio).reshape(block + (-1,))
            luminosity["radio"] += 4 * np.pi * volume[a:b].reshape(-1) @ j
        with stages.stage("products"):
            scalars = {"bremsstrahlung:neutral": neutral, "bremsstrahlung:ionised": ionised, "pion_decay": neutral + ionised}
            total = 0
            for name, matrix in matrices.items():
                q = (nuclei if name == "pion_decay" else electrons) @ matrix.T
                if name in scalars:
                    q *= scalars[name][:, None]
                luminosity[name] += 4 * np.pi * volume[a:b].reshape(-1) @ q
                total = total + q
            gamma[a:b] = (total * options.scale_gamma).reshape(block + (-1,))
    return radio, gamma, luminosity


def galaxy_axes(options):
    """Unit vectors of the sky (right, up) and away from the observer, in the galaxy frame."""
    i, turn = np.radians(options.inclination), np.radians(options.azimuth)
    y = np.array([np.sin(turn), np.cos(turn), 0.0])  # the turned y axis
    z = np.array([0.0, 0.0, 1.0])
    return np.array([np.cos(turn), -np.sin(turn), 0.0]), np.cos(i) * y + np.sin(i) * z, np.sin(i) * y - np.cos(i) * z


def way(grid, options):
    """Sky axis in kpc, depths of the samples in kpc and the step in kpc."""
    n = options.pixels
    axis = (np.arange(n) - 0.5 * (n - 1)) * options.pixel_size
    reach = np.sqrt(sum(np.abs(e).max() ** 2 for e in grid.edges))
    steps = int(np.ceil(2 * reach / (options.step * min(np.diff(e).min() for e in grid.edges))))
    step = 2 * reach / steps
    return axis, -reach + (np.arange(steps) + 0.5) * step, step


def march(grid, cubes, options):
    """Nearest-cell value times step, summed along the rays, all pixels at once: [channels, y, x] in (cube unit) cm."""
    axis, depths, step = way(grid, options)
    right, up, away = galaxy_axes(options)
    shape = (len(axis), len(axis))
    flat = [cube.reshape(-1, cube.shape[-1]) for cube in cubes]
    sums = [np.zeros((len(axis) ** 2, f.shape[-1])) for f in flat]
    counts = [len(e) - 1 for e in grid.edges]
    for depth in depths:
        index, inside = np.zeros((1, 1), int), np.ones((1, 1), bool)
        for k in (2, 1, 0):  # x fastest; an axis that does not see the columns (or rows) stays a vector
            position = np.full((1, 1), depth * away[k])
            for vector, sky in ((right, axis[None, :]), (up, axis[:, None])):
                if abs(vector[k]) > 1e-12:
                    position = position + sky * vector[k]
            cell = np.searchsorted(grid.edges[k], position, side="right") - 1
            inside = inside & (cell >= 0) & (cell < counts[k])
            index = index * counts[k] + cell
        pixels = np.flatnonzero(np.broadcast_to(inside, shape))
        if len(pixels):
            cells = np.broadcast_to(index, shape).reshape(-1)[pixels]
            for total, values in zip(sums, flat):
                total[pixels] += values[cells]
    return axis, [(total.T * (step * KPC)).reshape(-1, *shape) for total in sums]


def share_rows(grid, cubes, options):
    """The same samples for azimuth 0, where a row of pixels shares its way through y and z: one product per row."""
    axis, depths, step = way(grid, options)
    _, up, away = galaxy_axes(options)
    xs, ys, zs = grid.edges
    ix = np.searchsorted(xs, axis, side="right") - 1
    columns = np.flatnonzero((ix >= 0) & (ix < len(xs) - 1))
    images = [np.zeros((cube.shape[-1], len(axis), len(axis))) for cube in cubes]
    for row, height in enumerate(axis):
        iy = np.searchsorted(ys, height * up[1] + depths * away[1], side="right") - 1
        iz = np.searchsorted(zs, height * up[2] + depths * away[2], side="right") - 1
        inside = (iy >= 0) & (iy < len(ys) - 1) & (iz >= 0) & (iz < len(zs) - 1)
        if not inside.any():
            continue
        cells, counts = np.unique(iz[inside] * (len(ys) - 1) + iy[inside], return_counts=True)
        for image, cube in zip(images, cubes):
            lines = cube.reshape(-1, cube.shape[2] * cube.shape[3])[cells]  # [cells, x * channel]
            line = (counts * (step * KPC)) @ lines
            image[:, row, columns] = line.reshape(cube.shape[2], -1)[ix[columns]].T
    return axis, images


def rounded(seconds):
    return {name: round(value, 3) for name, value in (seconds | {"total": sum(seconds.values())}).items()}


def main():
    parser = argparse.ArgumentParser(description=__doc__.split("\n")[0])
    parser.add_argument("grid")
    parser.add_argument("out")
    parser.add_argument("--frequencies", type=float, nargs="+", required=True, help="Hz")
    parser.add_argument("--energies", type=float, nargs="+", required=True, help="GeV")
    parser.add_argument("--radiation", nargs="*", default=["2.7255"], metavar="T[:U]", help="K : eV cm-3")
    parser.add_argument("--inclination", type=float, default=90.0)
    parser.add_argument("--azimuth", type=float, default=0.0)
    parser.add_argument("--rows", action="store_true", help="projection by shared rows (azimuth 0)")
    parser.add_argument("--distance", type=float, default=10000.0, help="kpc")
    parser.add_argument("--pixels", type=int, default=512)
    parser.add_argument("--pixel-size", type=float, default=0.1, help="kpc")
    parser.add_argument("--plane-block", type=int, default=4)
    parser.add_argument("--step", type=float, default=1.0, help="of the smallest cell width")
    parser.add_argument("--renormalise", action="store_true", help="two photons per inclusive pi0 at every proton energy")
    parser.add_argument("--eps-n", type=float, default=1.8)
    parser.add_argument("--helium", type=float, default=0.1)
    options = parser.parse_args()
    if options.rows and options.azimuth != 0:
        parser.error("--rows needs azimuth 0")
    parts = [r.split(":") for r in options.radiation]
    options.radiation = [(float(p[0]), float(p[1]) if len(p) > 1 else 4.722159274e-3 * float(p[0]) ** 4) for p in parts]  # a T^4 in eV cm-3
    options.scale_radio, options.scale_gamma = 1e40, 1e30  # float32 holds nothing below 1e-38
    stages = Stages()
    grid = Grid(options.grid)
    radio, gamma, luminosity = emit(grid, options, stages)
    with stages.stage("projection"):
        axis, (map_radio, map_gamma) = (share_rows if options.rows else march)(grid, (radio, gamma), options)
    map_radio /= options.scale_radio
    map_gamma /= options.scale_gamma
    solid_angle = (options.pixel_size / options.distance) ** 2
    np.savez(options.out, axis=axis, frequencies=options.frequencies, energies=options.energies, radio=map_radio, gamma=map_gamma,
             flux_radio=map_radio.sum((1, 2)) * solid_angle, flux_gamma=map_gamma.sum((1, 2)) * solid_angle,
             **{f"luminosity_{name}": value for name, value in luminosity.items()})
    print(json.dumps({"wall": rounded(stages.wall), "cpu": rounded(stages.cpu)}))


if __name__ == "__main__":
    main()
