# SPDX-License-Identifier: Apache-2.0
"""Pulse area over peak times full width at half amplitude, by numerical integration (scipy.integrate.quad) and root finding.

Usage: dynamics_shapes.py OUTPUT. A line a pulse: envelope edge edge_s cut length_s factor. Blackman's and the raised-cosine
envelope take their coefficients from scipy.signal.windows.
"""
import sys

import numpy as np
from scipy.integrate import quad
from scipy.optimize import brentq
from scipy.signal import windows

random = np.random.default_rng(19580101)


def measured(envelope, whole, marks):
    """Of an even envelope on -whole/2 ... whole/2 with kinks at marks: (area/peak, full width at half amplitude)."""
    peak = envelope(0.0)
    edges = sorted({0.0, whole / 2, *(m for m in marks if 0 < m < whole / 2)})
    area = 2 * sum(quad(envelope, a, b, epsabs=0, epsrel=1e-13, limit=200)[0] for a, b in zip(edges, edges[1:]))
    half = brentq(lambda t: envelope(t) - peak / 2, 0, whole / 2 * (1 - 1e-15), xtol=1e-15 * whole, rtol=1e-14)
    return area / peak, 2 * half


def square(length, edge, rounded):
    def envelope(t):
        inside = np.clip((length / 2 + edge / 2 - abs(t)) / edge, 0, 1)
        return (1 - np.cos(np.pi * inside)) / 2 if rounded else inside
    return measured(envelope, length + edge, [(length - edge) / 2])


def window(name):
    points = getattr(windows, name)(9, sym=True)  # enough to give back the cosine series that the window is
    coefficients = np.linalg.solve(np.cos(2 * np.pi * np.outer(np.arange(5), np.arange(5)) / 8), points[:5])
    return measured(lambda t: sum(c * np.cos(2 * np.pi * k * (t + 0.5)) for k, c in enumerate(coefficients)), 1.0, [])


def gaussian(length, cut):
    deviation = length / (2 * np.sqrt(2 * np.log(2)))
    return measured(lambda t: np.exp(-t * t / (2 * deviation**2)), cut * length, [length / 2, length, 2 * length, 4 * length])


def main(path):
    with open(path, "w") as table:
        def line(envelope, edge, edge_s, cut, length, found):
            area, width = found
            print(envelope, edge, repr(float(edge_s)), repr(float(cut)), repr(float(length)), repr(float(area / width)), file=table)
        for _ in range(10):
            length = 10 ** random.uniform(-8, -3)
            edge = length * random.uniform(0.01, 1)
            line("square", "linear", edge, 3, length, square(length, edge, False))
            line("square", "raised_cosine", edge, 3, length, square(length, edge, True))
            cut = random.uniform(1.05, 8)
            line("gaussian", "linear", 0, cut, length, gaussian(length, cut))
        line("blackman", "linear", 0, 3, 1e-5, window("blackman"))
        line("raised_cosine", "linear", 0, 3, 1e-5, window("hann"))


if __name__ == "__main__":
    main(sys.argv[1])
