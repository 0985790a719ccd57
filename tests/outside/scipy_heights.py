#!/usr/bin/env python3
"""Heights of a noisy profile by SciPy's curve_fit, for comparison with aureole's own fit (needs python3-scipy).

Usage: scipy_heights.py PROFILE.csv
PROFILE.csv has comment lines '# model = NAME', '# sigma = S', '# h = H1 [H2]', '# error = E1 [E2]' with the beam and aureole's results
(kpc), a header line, and rows 'height,width,mean,covariance of the bin with all bins...'. Exits 1 if a height differs by more than 1e-4 of
its error, or an error by more than 1 %. The model is convolved here by adaptive quadrature of its definition, not by closed forms.
"""
import sys

import numpy as np
from scipy.integrate import quad
from scipy.optimize import curve_fit
from scipy.stats import norm

SHAPES = {
    "exponential": lambda x: np.exp(-abs(x)),
    "gaussian": lambda x: np.exp(-x * x),
    "sech2": lambda x: 1 / np.cosh(np.clip(x, -300, 300)) ** 2,
}


def bin_mean(shape, h, sigma, z, width):
    """Mean over the bin of shape(z/h) seen with a Gaussian beam: the bin's mean of the beam is a difference of normal laws."""
    low, high = z - width / 2, z + width / 2

    def integrand(t):
        seen = norm.cdf((high - t) / sigma) - norm.cdf((low - t) / sigma)
        return shape(t / h) * seen / width

    ends = (low - 9 * sigma, high + 9 * sigma)
    kinks = [p for p in (0.0, low, high) if ends[0] < p < ends[1]]
    return quad(integrand, *ends, points=kinks, epsabs=1e-12, epsrel=1e-11, limit=400)[0]


def read(path):
    facts, rows = {}, []
    for line in open(path):
        if line.startswith("#"):
            name, value = line[1:].split("=")
            facts[name.strip()] = value.split()
        elif line[0].isdigit() or line[0] == "-":
            rows.append([float(cell) for cell in line.split(",")])
    return facts, np.array(rows)


def main():
    facts, rows = read(sys.argv[1])
    name, sigma = facts["model"][0], float(facts["sigma"][0])
    heights = np.array([float(x) for x in facts["h"]])
    errors = np.array([float(x) for x in facts["error"]])
    z, width, mean, covariance = rows[:, 0], rows[:, 1], rows[:, 2], rows[:, 3:]
    shape = SHAPES[name.replace("two_", "")]

    def model(_, *p):
        parts = [(p[2 * c], p[2 * c + 1]) for c in range(len(heights))]
        return np.array([sum(w * bin_mean(shape, h, sigma, a, b) for w, h in parts) for a, b in zip(z, width)])

    start = []
    for h in heights:  # off by 10 %: the fit has to find its own way
        start += [mean.max() / len(heights), 1.1 * h]
    best, spread = curve_fit(model, z, mean, p0=start, sigma=covariance, absolute_sigma=True, xtol=1e-12, ftol=1e-12, gtol=1e-12)
    order = np.argsort(best[1::2])
    found, error = best[1::2][order], np.sqrt(np.diag(spread))[1::2][order]
    good = True
    for k, (h, e) in enumerate(zip(found, error)):
        apart = abs(h - heights[k]) / e
        ratio = errors[k] / e
        good = good and apart < 1e-4 and abs(ratio - 1) < 0.01
        print(f"{name} component {k}: SciPy {h:.8f} +- {e:.8f}, aureole {heights[k]:.8f} +- {errors[k]:.8f}, "
              f"apart {apart:.1e} errors, error ratio {ratio:.6f}")
    sys.exit(0 if good else 1)


if __name__ == "__main__":
    main()
