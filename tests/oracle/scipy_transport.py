#!/usr/bin/env python3
"""The problem of tests/bench/transport_march.cpp with SciPy: an independent solution of the same equations.

TR-BDF2 in ln p after one step of two backward Euler steps fitted to p^-2; finite volumes on an (R, z) grid,
central or exponentially fitted (Scharfetter & Gummel 1969) fluxes; sparse LU factors by SuperLU. Momenta in
GeV/c, else cm and s. Prints seconds and the same sums as the C++ program.

Usage: scipy_transport.py [wind 0|1] [cells per side] [nodes]
       scipy_transport.py --compare bench_transport_march   (small problems; exit 0 if sums agree to 1e-10)
"""
import subprocess
import sys
import time

import numpy as np
import scipy.sparse as sparse
from scipy.sparse.linalg import splu

KPC = 3.0856775814913673e21


def diffusion(r, z):
    """At 1 GeV/c; grows as the root of the momentum."""
    return 3e28 * np.exp(z / (5 * KPC)) * (1 + r / (20 * KPC))


def loss(r, z):
    """At 1 GeV/c; grows as the square of the momentum."""
    return 1e-16 * (0.5 + np.exp(-z / (3 * KPC) - r / (6 * KPC)))


def wind(z):
    return 2e7 * z / (z + 3 * KPC)


def bernoulli(x):
    small = np.abs(x) < 1e-5
    safe = np.where(small, 1.0, x)
    return np.where(small, 1 - x / 2 + x * x / 12, safe / np.expm1(safe))


class Problem:
    def __init__(self, n, windy):
        self.n, self.windy = n, windy
        share = np.arange(n + 1) / n
        self.r_edge = 20 * KPC * share
        self.z_edge = 10 * KPC * np.sinh(3 * share) / np.sinh(3)
        r, z = self.r_edge, self.z_edge
        self.rc, self.zc = 0.5 * (r[1:] + r[:-1]), 0.5 * (z[1:] + z[:-1])
        self.dz = np.diff(z)
        self.ring = np.pi * (r[1:] ** 2 - r[:-1] ** 2)
        self.volume = (self.dz[:, None] * self.ring[None, :]).ravel()
        index = np.arange(n * n).reshape(n, n)
        self.pairs_r = index[:, :-1].ravel(), index[:, 1:].ravel()
        self.pairs_z = index[:-1].ravel(), index[1:].ravel()
        # Conductance = diffusivity times these.
        self.shape_r = 2 * np.pi * r[1:-1][None, :] * self.dz[:, None] / np.diff(self.rc)[None, :]
        self.shape_z = self.ring[None, :] / np.diff(self.zc)[:, None]
        rows = [*self.pairs_r, *self.pairs_z, index.ravel()]
        columns = [*self.pairs_r[::-1], *self.pairs_z[::-1], index.ravel()]
        rows, columns = np.concatenate(rows), np.concatenate(columns)
        # Place of every triplet in the compressed columns.
        numbered = sparse.coo_matrix((np.arange(1, rows.size + 1, dtype=float), (rows, columns))).tocsc()
        self.place = numbered.data.astype(np.int64) - 1
        self.indices, self.indptr = numbered.indices, numbered.indptr
        rc, zc = self.rc, self.zc
        self.one_r = (self.shape_r * diffusion(r[1:-1][None, :], zc[:, None])).ravel()
        self.one_z = (self.shape_z * diffusion(rc[None, :], z[1:-1][:, None])).ravel()
        self.one_top = diffusion(rc, z[-1]) / (0.5 * self.dz[-1])
        self.one_side = 2 * np.pi * r[-1] * self.dz * diffusion(r[-1], zc) / (0.5 * (r[-1] - r[-2]))
        self.one_loss = loss(rc[None, :], zc[:, None]).ravel()
        self.disc = np.exp(-rc[None, :] / (4 * KPC) - zc[:, None] / (0.2 * KPC)).ravel()
        self.divergence = np.zeros(n * n)
        if windy:
            w = wind(z)
            self.divergence = np.repeat(np.diff(w) / self.dz, n)

    def matrix(self, values):
        size = self.n**2
        return sparse.csc_matrix((values[self.place], self.indices, self.indptr), shape=(size, size))

    def at(self, p):
        """b, [2] sources and triplets of A (what leaves a cell per density)."""
        n, windy = self.n, self.windy
        z = self.z_edge
        root = np.sqrt(p)
        g_r, g_z = root * self.one_r, root * self.one_z
        forth, back = g_z, g_z
        top = root * self.one_top
        if windy:
            carried = (wind(z[1:-1])[:, None] * self.ring[None, :]).ravel()
            back = g_z * bernoulli(carried / g_z)
            forth = back + carried
            top = top * bernoulli(-wind(z[-1]) / top)
        side = root * self.one_side
        diagonal = np.zeros((n, n))
        flat = diagonal.ravel()
        flat[self.pairs_r[0]] += g_r
        flat[self.pairs_r[1]] += g_r
        flat[self.pairs_z[0]] += forth
        flat[self.pairs_z[1]] += back
        diagonal[-1] += top * self.ring
        diagonal[:, -1] += side
        values = np.concatenate([-g_r, -g_r, -back, -forth, flat])
        b = p**2 * self.one_loss + p / 3 * self.divergence
        source = np.stack([self.disc * p**-2.3, 0.1 * self.disc * p**-2.6], axis=1)
        return b, source, values


def march(problem, momenta):
    volume, size = problem.volume[:, None], problem.n**2
    g = 2 - np.sqrt(2)
    part, over = g / 2, (1 - g) ** 2 / (g * (2 - g))
    seconds = {"coefficients": 0.0, "factors": 0.0}

    def ask(p):
        begin = time.perf_counter()
        b, source, values = problem.at(p)
        seconds["coefficients"] += time.perf_counter() - begin
        return volume * b[:, None], volume * source, values

    def solve(data, weight, base):
        current, source, values = data
        scaled = weight * values
        scaled[-size:] += current[:, 0]
        begin = time.perf_counter()
        factor = splu(problem.matrix(scaled), permc_spec="MMD_AT_PLUS_A")
        seconds["factors"] += time.perf_counter() - begin
        return factor.solve(base + weight * source)

    psi = np.zeros((size, 2))
    result = [psi]
    here = ask(momenta[0])
    for step, (high, low) in enumerate(zip(momenta[:-1], momenta[1:])):
        middle = high * (low / high) ** g
        mid_data, low_data = ask(middle), ask(low)
        if step == 0:
            mid = solve(mid_data, middle * (1 - middle / high), here[0] * psi)
            psi = solve(low_data, low * (1 - low / middle), mid_data[0] * mid)
        else:
            h = np.log(high / low)
            start = here[0] * psi
            leak = problem.matrix(here[2]) @ psi
            mid = solve(mid_data, part * h * middle, start + part * h * high * (here[1] - leak))
            between = mid_data[0] * mid
            psi = solve(low_data, part * h * low, between + over * (between - start))
        if psi.min() < -1e-12 * psi.max():
            raise SystemExit("a density is negative")
        here = low_data
        result.append(psi)
    return result, seconds


def sums(problem, result, nodes):
    """What the C++ program prints: particles per kind at three momenta."""
    return [(kind, node, problem.volume @ result[node][:, kind])
            for kind in range(2) for node in (nodes // 4, nodes // 2, nodes - 1)]


def momenta_of(nodes):
    return 1e4 * 10.0 ** (-6.0 * np.arange(nodes) / (nodes - 1))


def compare(program):
    worst = 0.0
    for windy in (0, 1):
        for cells, nodes in ((24, 25), (33, 49)):
            problem = Problem(cells, windy != 0)
            here = sums(problem, march(problem, momenta_of(nodes))[0], nodes)
            output = subprocess.run([program, str(windy), "2", str(cells), str(nodes)], check=True,
                                    capture_output=True, text=True).stdout
            there = [float(line.split()[-1]) for line in output.splitlines() if line.startswith("kind")]
            if len(there) != len(here):
                raise SystemExit(f"found {len(there)} sums, expected {len(here)}")
            for (kind, node, mine), theirs in zip(here, there):
                worst = max(worst, abs(theirs / mine - 1))
                print(f"wind {windy}, {cells}^2 cells, kind {kind}, node {node}: {theirs / mine - 1:+.1e}")
    if not worst < 1e-10:
        raise SystemExit(f"largest difference {worst:.1e}, expected < 1e-10")


def main():
    if len(sys.argv) == 3 and sys.argv[1] == "--compare":
        compare(sys.argv[2])
        return
    windy = int(sys.argv[1]) if len(sys.argv) > 1 else 0
    n = int(sys.argv[2]) if len(sys.argv) > 2 else 96
    nodes = int(sys.argv[3]) if len(sys.argv) > 3 else 97
    problem = Problem(n, windy != 0)
    begin = time.perf_counter()
    result, seconds = march(problem, momenta_of(nodes))
    whole = time.perf_counter() - begin
    print(f"seconds {whole:.3f}, of which coefficients {seconds['coefficients']:.3f}, "
          f"factors {seconds['factors']:.3f}; wind {windy}, {n * n} cells, {nodes} nodes")
    for kind, node, total in sums(problem, result, nodes):
        print(f"kind {kind} node {node} sum {total:.12e}")


if __name__ == "__main__":
    main()
