"""Recomputes kernels of the physics room with SciPy, by direct quadrature of their definitions.

usage: scipy_kernels.py PRINT_KERNELS      (the program built from tests/physics/print_kernels.cpp)

Nothing is shared with the C++ code but the formulas of the papers: F is an integral over K_{5/3}, R an integral over
directions, the mixed field an integral over both components of the Gaussian field (polar) or the Rice distribution, inverse Compton an
integral over the Planck spectrum, screening an integral over the form factor. Prints the largest relative difference
for each kernel; exit code 1 if one is above its limit.
"""
import csv
import io
import math
import subprocess
import sys

import numpy as np
from scipy import constants as si
from scipy import integrate, special

MC2_EV = 9.1093837015e-31 * si.c ** 2 / si.e
SIGMA_T_C = 6.6524587321e-25 * 2.99792458e10
ALPHA = 7.2973525693e-3
RE2_MB = (2.8179403262e-13) ** 2 / 1e-27
MC2_GEV = MC2_EV * 1e-9


def quad(f, a, b, **options):
    return integrate.quad(f, a, b, epsabs=0, epsrel=1e-12, limit=500, **options)[0]


def f(x):
    # x K_{5/3} integrated, in steps so that the exponential tail is resolved
    top = x + 60
    edges = np.unique(np.concatenate([np.geomspace(x, top, 12), [min(top, x + 5), min(top, x + 20)]]))
    return x * sum(quad(lambda y: special.kv(5 / 3, y), a, b) for a, b in zip(edges[:-1], edges[1:]))


def g(x):
    return x * special.kv(2 / 3, x)


def fast_f(x):
    # integral representation, trapezium: independent of the Chebyshev series in the program
    if x > 700:
        return 0.0
    t = np.arange(0, np.arccosh(1 + 745 / x), 1 / 40)
    y = np.exp(-x * np.cosh(t)) * np.cosh(5 * t / 3) / np.cosh(t)
    return x * (y.sum() - y[0] / 2) / 40


def random(x):
    return quad(lambda u: fast_f(x * math.cosh(u)) / math.cosh(u) ** 3, 0, 12, points=[0.5, 1, 2, 4])


def mixed(x, t, kernel, harmonic):
    b0, var = math.sqrt(t), (1 - t) / 2

    def integrand(y):
        b = math.exp(y)
        z = b * b0 / var
        return b * b * b / var * math.exp(-(b - b0) ** 2 / (2 * var)) * special.ive(harmonic, z) * kernel(x / b)

    top = math.log(b0 + 10 * math.sqrt(var) + 2 * (x * var) ** (1 / 3))
    edges = np.linspace(-13, top, 14)
    return sum(quad(integrand, a, b) for a, b in zip(edges[:-1], edges[1:]))


def inverse_compton(gamma, eps1_ev, temperature):
    thermal = si.k * temperature / si.e / MC2_EV  # over m c^2
    z = eps1_ev / MC2_EV / gamma

    def integrand(y):
        eps = thermal * math.exp(y)
        gam = 4 * eps * gamma
        q = z / (gam * (1 - z))
        if q >= 1 or q < 1 / (4 * gamma * gamma):
            return 0.0
        bracket = 2 * q * math.log(q) + (1 + 2 * q) * (1 - q) + (gam * q) ** 2 * (1 - q) / (2 * (1 + gam * q))
        kernel = 3 * SIGMA_T_C / (4 * gamma ** 2 * eps) * bracket
        density = 15 / math.pi ** 4 / thermal ** 2 * math.exp(2 * y) / math.expm1(math.exp(y))
        return thermal * math.exp(y) * kernel * density

    first = math.log(z / (4 * gamma * (1 - z)) / thermal)
    high = max(math.exp(first), 1) + 60
    edges = np.linspace(first, math.log(high), 12)
    total = sum(quad(integrand, a, b) for a, b in zip(edges[:-1], edges[1:]))
    erg = MC2_EV * si.e * 1e7
    # energies over m c^2: the density per unit energy density counts U/(m c^2), the rate is per eps1
    return total / erg / erg


def bethe_heitler(e0, fraction):
    k, e = fraction * e0, (1 - fraction) * e0
    value = 4 * ALPHA * RE2_MB / k * (1 + (e / e0) ** 2 - 2 / 3 * e / e0) * (math.log(2 * e0 * e / k / MC2_GEV) - 0.5)
    return max(0.0, value)


def screened(e0, fraction, s, total):
    k, e = fraction * e0, (1 - fraction) * e0
    d = k * MC2_GEV / (2 * e0 * e)
    one = lambda y: (1 - d * math.exp(-y)) ** 2 * s(math.exp(y))
    two = lambda y: (1 - 6 * (d * math.exp(-y)) ** 2 * (y - math.log(d)) + 3 * (d * math.exp(-y)) ** 2
                     - 4 * (d * math.exp(-y)) ** 3) * s(math.exp(y))
    edges = np.linspace(math.log(d), 0, 12)
    phi1 = 4 * (total + sum(quad(one, a, b) for a, b in zip(edges[:-1], edges[1:])))
    phi2 = 4 * (5 / 6 * total + sum(quad(two, a, b) for a, b in zip(edges[:-1], edges[1:])))
    return ALPHA * RE2_MB / k * ((1 + (e / e0) ** 2) * phi1 - 2 / 3 * e / e0 * phi2)


def form(q, charge):
    return (1 + (q / (2 * ALPHA * charge)) ** 2) ** -2


def s_hydrogen(q):
    w = (q / (2 * ALPHA)) ** 2
    return 2 * w * (2 + w) / (1 + w) ** 2


def s_helium(q):
    w = (q / (2 * ALPHA * 27 / 16)) ** 2
    return 2 * w * (2 + w) / (1 + w) ** 2 * (3 - form(q, 27 / 16))


MP, MPI = 0.938272, 0.134976
TTH = 2 * MPI + MPI ** 2 / (2 * MP)


def sigma_inelastic(t):
    l = math.log(t / TTH)
    return (30.7 - 0.96 * l + 0.18 * l * l) * (1 - (TTH / t) ** 1.9) ** 3


def pions_low(t):
    s = 2 * MP * (t + 2 * MP)
    eta = math.sqrt((s - MPI ** 2 - 4 * MP ** 2) ** 2 - 16 * MPI ** 2 * MP ** 2) / (2 * MPI * math.sqrt(s))
    m, w = 1.1883, 0.2264
    gg = math.sqrt(m * m * (m * m + w * w))
    k = math.sqrt(8) * m * w * gg / (math.pi * math.sqrt(m * m + gg))
    bw = MP * k / (((math.sqrt(s) - MP) ** 2 - m * m) ** 2 + m * m * w * w)
    return (7.66e-3 * eta ** 1.95 * (1 + eta + eta ** 5) * bw ** 1.86
            + (5.7 / (1 + math.exp(-9.3 * (t - 1.4))) if t >= 0.56 else 0))


def pions_mid(t):
    q = (t - TTH) / MP
    return sigma_inelastic(t) * (-6e-3 + 0.237 * q - 0.023 * q * q)


def pions_high(t, a1, a2, a3, a4, a5):
    xi = (t - 3) / MP
    return sigma_inelastic(t) * a1 * xi ** a4 * (1 + math.exp(-a2 * xi ** a5)) * (1 - math.exp(-a3 * xi ** 0.25))


GEANT = (.728, .596, .491, .2503, .117)
PYTHIA = (.652, .0016, .488, .1928, .483)


def top_pion(t):
    s = 2 * MP * (t + 2 * MP)
    e = (s - 4 * MP ** 2 + MPI ** 2) / (2 * math.sqrt(s))
    gam = (t + 2 * MP) / math.sqrt(s)
    return gam * (e + math.sqrt(e * e - MPI ** 2) * math.sqrt(1 - gam ** -2))


def shape(regime, t, e):
    top = top_pion(t)
    y = e + MPI ** 2 / (4 * e)
    x = (y - MPI) / (top - MPI)
    if x >= 1:
        return 0.0
    q = (t - 1) / MP
    mu = 1.25 * q ** 1.25 * math.exp(-1.25 * q) if q > 0 else 0
    lam, a, b, g_ = [(1, 1, 3.29 - 0.2 * (t / MP) ** -1.5, 0), (3, 1, mu + 2.45, mu + 1.45),
                     (3, 1, 1.5 * mu + 4.95, mu + 1.5), (3, .5, 4.2, 1), (3.5, .5, 4.0, 1)][regime]
    x = max(x, 0)
    return (1 - x ** a) ** b / (1 + x * top / (lam * MPI)) ** g_


def kafexhiu(e, t):
    if e + MPI ** 2 / (4 * e) >= top_pion(t):
        return 0.0
    sigma = pions_low(t) if t < 2 else pions_mid(t) if t < 5 else pions_high(t, *(GEANT if t <= 50 else PYTHIA))
    if t <= 1:
        return 5.9 * sigma / top_pion(t) * shape(0, t, e)
    b1, b2, b3 = (9.53, .52, .054) if t < 5 else (9.13, .35, 9.7e-3) if t <= 50 else (9.06, .3795, .01105)
    theta = t / MP
    regime = 1 if t <= 4 else 2 if t <= 20 else 3 if t <= 50 else 4
    return b1 * theta ** -b2 * math.exp(b3 * math.log(theta) ** 2) * sigma / MP * shape(regime, t, e)


def step(t, low, high):
    s = min(1, max(0, math.log(t / low) / math.log(high / low)))
    return s * s * (3 - 2 * s)


def chain(t, joints, pieces):
    value = pieces[0]()
    for (low, high), piece in zip(joints, pieces[1:]):
        w = step(t, low, high)
        if w > 0:
            value = (1 - w) * value + w * piece()
    return value


def continuous(e, t):
    top = top_pion(t)
    if e + MPI ** 2 / (4 * e) >= top:
        return 0.0
    sigma = chain(t, [(1.7, 2.3), (4, 6.25), (35, 70)],
                  [lambda: pions_low(t), lambda: pions_mid(t), lambda: pions_high(t, *GEANT),
                   lambda: pions_high(t, *PYTHIA)])
    highest = (top + math.sqrt(top ** 2 - MPI ** 2)) / 2

    def normal(regime):  # direct integral over photon energies, twice the upper half in ln E weight
        low, high = math.log(MPI ** 2 / 4 / highest), math.log(highest)
        edges = np.linspace(low, high, 21)
        edges = np.sort(np.append(edges, math.log(MPI / 2)))
        norm = sum(quad(lambda y: math.exp(y) * shape(regime, t, math.exp(y)), a, b)
                   for a, b in zip(edges[:-1], edges[1:]))
        return shape(regime, t, e) / norm

    return 2 * sigma * chain(t, [(0.8, 1.25), (1.6, 4), (14, 28), (35, 70)],
                             [lambda r=r: normal(r) for r in range(5)])


def kelner(e, t):
    ep = t + 0.93827209
    l = math.log(ep / 1000)
    mpi = 0.1349768
    eth = 0.93827209 + 2 * mpi + mpi ** 2 / (2 * 0.93827209)
    sigma = (34.3 + 1.88 * l + 0.25 * l * l) * (1 - (eth / ep) ** 4) ** 2
    x = e / ep
    b = 1.30 + 0.14 * l + 0.011 * l * l
    beta = 1 / (1.79 + 0.11 * l + 0.008 * l * l)
    k = 1 / (0.801 + 0.049 * l + 0.014 * l * l)

    # F = B d/dx [ln(x) ((1 - x^beta)/(1 + k x^beta (1 - x^beta)))^4], by a complex step
    def inner(w):
        p = w ** beta
        return np.log(w) * ((1 - p) / (1 + k * p * (1 - p))) ** 4

    h = 1e-30
    return sigma / ep * b * inner(complex(x, h)).imag / h


def blackbody_loss(gamma, temperature):
    # energy of the photons that the Jones kernel scatters, over its limit 1/9 at b = 0, over the Planck spectrum
    theta = gamma * si.k * temperature / si.e / MC2_EV

    def scattered(b):
        def integrand(y):
            q = math.exp(y)
            z = b * q / (1 + b * q)
            bracket = 2 * q * y + (1 - q) * (1 + 2 * q + z * z / (2 * (1 - z)))
            return q * q * bracket / (1 + b * q) ** 3
        return 9 * quad(integrand, -30, 0, points=[-min(29, max(1, math.log(b + 2)))])

    nodes, weights = np.polynomial.legendre.leggauss(160)
    y = (4.1 + 20) / 2 * nodes + (4.1 - 20) / 2
    total = sum(w * math.exp(4 * v) / math.expm1(math.exp(v)) * scattered(4 * theta * math.exp(v))
                for v, w in zip(y, (4.1 + 20) / 2 * weights))
    return total * 15 / math.pi ** 4


CHECKS = {  # name: (function of a, b, c; largest relative difference)
    "f": (lambda a, b, c: f(a), 1e-11),
    "g": (lambda a, b, c: g(a), 1e-12),
    "random": (lambda a, b, c: random(a), 1e-11),
    "mixed_f": (lambda a, b, c: mixed(a, b, fast_f, 0), 1e-10),
    "mixed_g": (lambda a, b, c: mixed(a, b, g, 2), 1e-10),
    "inverse_compton": (inverse_compton, 2e-10),
    "blackbody_loss": (lambda a, b, c: blackbody_loss(a, b), 2e-9),
    "bethe_heitler": (lambda a, b, c: bethe_heitler(a, b), 1e-9),
    "screened_h": (lambda a, b, c: screened(a, b, s_hydrogen, 2), 1e-9),
    "screened_he": (lambda a, b, c: screened(a, b, s_helium, 6), 1e-9),
    "kafexhiu": (lambda a, b, c: kafexhiu(a, b), 1e-10),
    "continuous": (lambda a, b, c: continuous(a, b), 1e-7),
    "kelner": (lambda a, b, c: kelner(a, b), 1e-10),
}


def main():
    text = subprocess.run([sys.argv[1]], check=True, capture_output=True, text=True).stdout
    worst = {name: (0.0, 0) for name in CHECKS}
    for row in csv.DictReader(io.StringIO(text)):
        name, value = row["name"], float(row["value"])
        expected = CHECKS[name][0](float(row["a"]), float(row["b"]), float(row["c"]))
        difference = abs(value - expected) / abs(expected) if expected else abs(value)
        if not difference < CHECKS[name][1]:
            print("different:", row, "expected", expected)
        worst[name] = (max(worst[name][0], difference), worst[name][1] + 1)
    failed = False
    for name, (difference, count) in worst.items():
        print(f"{name:16s} {count:3d} values, largest relative difference {difference:.1e}, limit {CHECKS[name][1]:.0e}")
        failed = failed or not difference < CHECKS[name][1] or count == 0
    sys.exit(1 if failed else 0)


if __name__ == "__main__":
    main()
