# SPDX-License-Identifier: Apache-2.0
"""Mean populations of ensembles, from how the ensembles come about: Gaussian variables by a dense trapezoidal sum; a cloud by
integrating over the distance from the beam's axis (scipy.integrate.quad_vec); thermal motion by the elements of
expm(i eta (a + a^dagger)) among 260 Fock levels. Every member's Bloch equations are integrated by scipy.linalg.expm.

Usage: dynamics_ensembles.py OUTPUT. A block a scan:
    kind parameter follows_intensity modes (eta sideband ratio)... rabi detuning decay loss dephasing excited impurity bright
    line other points
then `points` lines: length (or drive detuning, where line is 1) and population. `other` is the dead time, or the pulse length.
"""
import sys

import numpy as np
from scipy.integrate import quad_vec
from scipy.linalg import expm

random = np.random.default_rng(20030310)
LEVELS = 260


def populations(rabi, detuning, rates, start, lengths):
    """Populations of members (arrays rabi, detuning) at each length: members x lengths."""
    decay, loss, dephasing = rates
    excited, impurity, bright = start
    rabi, detuning = np.broadcast_arrays(np.atleast_1d(rabi), np.atleast_1d(detuning))
    coherence = (decay + loss) / 2 + dephasing
    matrix = np.zeros((len(rabi), 4, 4))
    matrix[:, 0, 0] = matrix[:, 1, 1] = -coherence
    matrix[:, 0, 1], matrix[:, 1, 0] = detuning, -detuning
    matrix[:, 1, 2], matrix[:, 1, 3] = rabi, -rabi
    matrix[:, 2, 1], matrix[:, 3, 1] = -rabi / 2, rabi / 2
    matrix[:, 2, 2], matrix[:, 3, 2] = -(decay + loss), decay
    upper = 1 - impurity if excited else impurity
    state = np.array([0, 0, upper, 1 - upper])
    result = []
    for length in lengths:
        end = expm(matrix * max(length, 0.0)) @ state
        result.append(1 - end[:, 3] if bright else end[:, 2])
    return np.array(result).T


def displacement(eta, sideband):
    """|<n + sideband| exp(i eta (a + a^dagger)) |n>| for n in the lower 160 levels, 0 where n + sideband < 0."""
    a = np.diag(np.sqrt(np.arange(1, LEVELS)), 1)
    elements = np.abs(expm(1j * eta * (a + a.T)))
    return np.array([elements[n + sideband, n] if n + sideband >= 0 else 0 for n in range(160)])


def thermal(mean, modes, excited):
    """Couplings and weights; atoms in e go from n to n - sideband."""
    x, p = np.ones(1), np.ones(1)
    for eta, sideband, ratio in modes:
        n = np.arange(160)
        weights = (mean * ratio) ** n / (1 + mean * ratio) ** (n + 1.0)
        x = np.outer(x, displacement(eta, -sideband if excited else sideband)).ravel()
        p = np.outer(p, weights).ravel()
        x, p = x[p > 1e-14], p[p > 1e-14]
    return x, p / p.sum()


def mean(kind, parameter, follows, modes, of):
    """Mean of of(scale, shift, excited) -> array members x points."""
    h = np.linspace(-8, 8, 641)
    normal = np.exp(-h * h / 2) / np.exp(-h * h / 2).sum()
    if kind == "spread":
        return normal @ of(1 + parameter * h, 0.0, None)
    if kind == "doppler":
        return normal @ of(1.0, parameter * h, None)
    if kind == "cloud":  # beam of radius 1; the density of r is r exp(-r^2/2s^2)/s^2
        s = parameter
        def at(r):
            return r / s**2 * np.exp(-r * r / (2 * s * s)) * of(np.exp(-(2 if follows else 1) * r * r), 0.0, None)[0]
        return quad_vec(at, 0, 8.5 * s, epsabs=1e-12, epsrel=0)[0]
    (x, p), (y, q) = thermal(parameter, modes, False), thermal(parameter, modes, True)
    return p @ of(x, 0.0, False) + q @ of(y, 0.0, True)


def scan(table, kind, parameter, follows, modes, rates, start, line, other, axis):
    rabi, detuning, *damping = rates
    excited, impurity, bright = start
    def of(scale, shift, begins_excited):
        if begins_excited is None:
            begin, share = start, 1.0
        else:  # the part of the atoms that begins in g, or in e
            begin, share = (begins_excited, 0.0, bright), 1 - impurity if begins_excited == bool(excited) else impurity
        if not line:
            return share * populations(rabi * scale, detuning + shift, damping, begin, axis - other)
        each = [populations(rabi * scale, x - detuning + shift, damping, begin, [other])[:, 0] for x in axis]
        return share * np.array(each).T
    values = mean(kind, parameter, follows, modes, of)
    words = [kind, parameter, int(follows), len(modes), *(w for mode in modes for w in mode), *rates, int(excited), impurity,
             int(bright), int(line), other, len(axis)]
    print(*(w if isinstance(w, (str, int)) else repr(float(w)) for w in words), file=table)
    for x, value in zip(axis, values):
        print(repr(float(x)), repr(float(value)), file=table)


def cases():
    for _ in range(5):
        yield "spread", random.choice([0.01, 0.05, 0.2]), False, []
        yield "doppler", random.choice([0.05, 0.3, 1.0]), False, []
        yield "cloud", random.choice([0.05, 0.2, 0.3]), False, []
        yield "cloud", random.choice([0.15, 0.5]), random.random() < 0.7, []
        yield "thermal", random.choice([0.05, 1.0, 4.0]), False, [(random.uniform(0.03, 0.4), int(random.integers(-2, 3)), 1.0)]
    yield "thermal", 1.5, False, [(0.1, 0, 1.0), (0.2, 1, 0.4)]
    yield "thermal", 0.8, False, [(0.15, -1, 1.0), (0.1, 0, 2.0)]


def main(path):
    with open(path, "w") as table:
        for kind, parameter, follows, modes in cases():
            for damped in (False, True):
                detuning = random.choice([0.0, random.uniform(-1, 1)])
                damping = list(random.uniform(0, 0.2, 3)) if damped else [0.0, 0.0, 0.0]
                rates = [random.uniform(1.5, 3), detuning, *damping]
                start = (random.random() < 0.3, random.choice([0.0, 0.1]), random.random() < 0.3)
                even = np.arange(6) * 2.0
                axis = even if random.random() < 0.5 else random.uniform(0, 12, 6)
                scan(table, kind, parameter, follows, modes, rates, start, False, random.choice([0.0, 0.3]), axis)
                line = np.linspace(-4, 4, 5)
                scan(table, kind, parameter, follows, modes, rates, start, True, random.uniform(1, 4), line)


if __name__ == "__main__":
    main(sys.argv[1])
