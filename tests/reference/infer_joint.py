#!/usr/bin/env python3
# SPDX-License-Identifier: Apache-2.0
"""Joint fits by SciPy: a flop and a line of one drive, simulated and fitted on the sum of their binomial likelihoods, written out here
with Rabi's formula (I. I. Rabi, Phys. Rev. 51, 652 (1937)). infer_joint.py TABLE writes what tests/model/infer/joint_test.cpp reads:
a line of counts for each scan, then estimates in SI units, the deviance, and the ends of the profile of the Rabi frequency at 95 %."""
import sys

import numpy
from scipy.optimize import brentq, minimize
from scipy.special import xlogy

SHOTS, SIGMA, LENGTH = 200, 40e-9, 5e-6
TIMES = 0.5e-6 + (30e-6 - 0.5e-6) * numpy.arange(40) / 39
DETUNINGS = 2e3 * numpy.pi * (-250 + 500 * numpy.arange(41) / 40)


def population(rabi, detuning, time):
    whole = numpy.hypot(rabi, detuning)
    return (rabi / whole * numpy.sin(whole * time / 2)) ** 2


def means(x):
    """x: coupling and line offset in 1e5 rad/s, dead time in 1e-8 s, floor and top of both scans."""
    rabi, offset, dead = 1e5 * x[0], 1e5 * x[1], 1e-8 * x[2]
    flop = x[3] + (x[4] - x[3]) * population(rabi, offset, TIMES - dead)
    return flop, x[5] + (x[6] - x[5]) * population(rabi, DETUNINGS - offset, LENGTH - dead)


def half_deviance(counts, mean):
    seen = counts / SHOTS
    return SHOTS * numpy.sum(xlogy(seen, seen / mean) + xlogy(1 - seen, (1 - seen) / (1 - mean)))


def objective(x, scans):
    signals = means(x)
    if any(mean.min() <= 0 or mean.max() >= 1 for mean in signals):
        return 1e9
    z = 1e-8 * x[2] / SIGMA
    # The dead time's prior, a contaminated normal, 0 at z = 0.
    prior = -numpy.log(0.95 * numpy.exp(-z * z / 2) + 0.05 / 5 * numpy.exp(-z * z / 50)) + numpy.log(0.96)
    return prior + sum(half_deviance(counts, mean) for counts, mean in zip(scans, signals))


def fit(start, scans, held=None):
    """The minimum over all, or over all but the coupling."""
    free = (lambda x: x) if held is None else (lambda x: numpy.concatenate(([held], x)))
    x = start if held is None else start[1:]
    for _ in range(3):
        x = minimize(lambda y: objective(free(y), scans), x, method="Nelder-Mead",
                     options={"xatol": 1e-10, "fatol": 1e-12, "maxiter": 40000, "maxfev": 40000, "adaptive": True}).x
    return free(x), objective(free(x), scans)


def main(table):
    random = numpy.random.default_rng(2026)
    true = numpy.array([2 * numpy.pi, 0.2 * numpy.pi * 1.3, 2.0, 0.05, 0.95, 0.04, 0.93])
    scans = [random.binomial(SHOTS, mean) for mean in means(true)]
    best, value = fit(true, scans)
    sigma = 0.01

    def rise(rabi):
        return 2 * (fit(best, scans, rabi)[1] - value) - 3.841458820694124

    ends = [brentq(rise, best[0], best[0] + side * 6 * sigma, xtol=1e-5) for side in (-1, 1)]
    with open(table, "w") as out:
        for counts in scans:
            print(*counts, file=out)
        print(*(repr(float(v)) for v in (1e5 * best[0], 1e5 * best[1], 1e-8 * best[2], *best[3:], 2 * value, 1e5 * ends[0], 1e5 * ends[1])), file=out)


if __name__ == "__main__":
    main(sys.argv[1])
