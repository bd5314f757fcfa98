# SPDX-License-Identifier: Apache-2.0
"""Maximum-likelihood fits of simple scans, by SciPy, by lmfit and by Newton's method in forty digits, written as a table.

Usage: infer_fits.py OUTPUT. One block a scan:
    NAME AXIS READOUT DYNAMICS dead_time_mean dead_time_sigma pulse_length points estimates deviance
    then a line a point: axis observed weight          (s or rad/s; weight: shots, exposures or sigma)
    then a line an estimate: NAME exact scipy lmfit sigma low high          (SI and rad/s; low, high nan where no profile is asked for)
The three minima agree to 1e-6 of a sigma, or nothing is written. Likelihoods and signals are written out here (I. I. Rabi, Phys. Rev. 51,
652 (1937); H. C. Torrey, Phys. Rev. 76, 1059 (1949), on resonance); sigmas come from the expected information, with the slope of the dead
time's prior over its distance as that prior's curvature; intervals of 95 % from the profile likelihood, chi-square 3.841458820694124.
"""
import sys

import lmfit
import mpmath
import numpy as np
from scipy.optimize import brentq, minimize

mpmath.mp.dps = 40
random = np.random.default_rng(1937)
QUANTILE = 3.841458820694124  # scipy.stats.chi2.ppf(0.95, 1)


class Numbers:
    """The same formulas in double precision (complex numbers too, for derivatives by complex steps) and in forty digits."""

    def __init__(self, source):
        self.cos, self.sin, self.exp, self.log, self.sqrt = (getattr(source, name) for name in ("cos", "sin", "exp", "log", "sqrt"))


DOUBLE, EXACT = Numbers(np), Numbers(mpmath)
PI = {DOUBLE: np.pi, EXACT: mpmath.pi}


def undamped(m, p, length):
    return m.sin(p["rabi"] * (length - p["dead_time"]) / 2) ** 2


def decaying(m, p, length):
    w, g, t = p["rabi"], p["decay"], length - p["dead_time"]
    l = m.sqrt(w * w - g * g / 16)
    return w * w / (2 * w * w + g * g) * (1 - m.exp(-3 * g * t / 4) * (m.cos(l * t) + 3 * g / (4 * l) * m.sin(l * t)))


def line(m, p, detuning):
    d = detuning - p["line_offset"]
    square = p["rabi"] ** 2 + d * d
    return p["rabi"] ** 2 / square * m.sin(m.sqrt(square) * (p["pulse"] - p["dead_time"]) / 2) ** 2


# Half the deviance of one point, and the information about its mean.
def binomial(m, observed, shots, mean):
    value = 0
    if observed > 0:
        value = value - observed * m.log(mean * shots / observed)
    if observed < shots:
        value = value - (shots - observed) * m.log((1 - mean) * shots / (shots - observed))
    return value, shots / (mean * (1 - mean))


def poisson(m, observed, exposures, mean):
    value = exposures * mean - observed
    if observed > 0:
        value = value - observed * m.log(mean * exposures / observed)
    return value, exposures / mean


def gaussian(m, observed, sigma, mean):
    return (observed - mean) ** 2 / (2 * sigma * sigma), 1 / sigma ** 2


def dead_time_prior(m, z):
    """-log of 0.95 N(0, 1) + 0.05 N(0, 5) over its value at 0, and its slope over z."""
    narrow, wide = 0.95 * m.exp(-z * z / 2), 0.01 * m.exp(-z * z / 50)
    return m.log(0.96 * (1 + 0 * z)) - m.log(narrow + wide), (narrow + wide / 25) / (narrow + wide)


class Case:
    """Times in us, frequencies in rad/us, decays in 1/us, so that all numbers are near 1."""

    def __init__(self, name, population, likelihood, axis, free, held, dead_time=(0.0, 0.0), weight=200):
        self.name, self.population, self.likelihood, self.dead_time, self.free, self.held = name, population, likelihood, dead_time, list(free), held
        self.axis = [float(x) for x in axis]
        truth = np.array(list(free.values()))
        means = np.array([self.signal(DOUBLE, self.parameters(DOUBLE, truth), x) for x in self.axis])
        self.weight = [weight] * len(self.axis)
        if likelihood is binomial:
            self.observed = random.binomial(weight, means)
        elif likelihood is poisson:
            self.observed = random.poisson(weight * means)
        else:
            self.observed = np.round(means + weight * random.standard_normal(len(means)), 6)
        self.observed = [float(x) for x in self.observed]
        self.start = truth

    def parameters(self, m, x, length_leads=False):
        p = dict(self.held)
        p.update(zip(self.free, x))
        if length_leads:  # the first is the length of a pi pulse instead of the coupling
            p["rabi"] = PI[m] / (p["rabi"] - p["dead_time"])
        return p

    def signal(self, m, p, at):
        return p["floor"] + p["contrast"] * self.population(m, p, at)

    def value(self, m, x, length_leads=False):
        p = self.parameters(m, x, length_leads)
        total = sum(self.likelihood(m, k, n, self.signal(m, p, t))[0] for t, k, n in zip(self.axis, self.observed, self.weight))
        mean, sigma = self.dead_time
        if "dead_time" in self.free:
            total += dead_time_prior(m, (p["dead_time"] - mean) / sigma)[0]
        return total

    def information(self, x, length_leads=False):
        k = len(x)
        total = mpmath.zeros(k)
        p = self.parameters(EXACT, x, length_leads)
        slopes = [[(self.signal(EXACT, self.parameters(EXACT, moved(x, i, 1), length_leads), t) -
                    self.signal(EXACT, self.parameters(EXACT, moved(x, i, -1), length_leads), t)) / (2 * STEP) for i in range(k)] for t in self.axis]
        for slope, t, observed, n in zip(slopes, self.axis, self.observed, self.weight):
            about = self.likelihood(EXACT, observed, n, self.signal(EXACT, p, t))[1]
            for i in range(k):
                for j in range(k):
                    total[i, j] += about * slope[i] * slope[j]
        if "dead_time" in self.free:
            i = self.free.index("dead_time")
            mean, sigma = self.dead_time
            total[i, i] += dead_time_prior(EXACT, (x[i] - mean) / sigma)[1] / mpmath.mpf(sigma) ** 2
        return total


STEP = mpmath.mpf("1e-12")  # of central differences: their error is the square of it, and rounding 1e-40 / STEP^2


def moved(x, i, by):
    x = list(x)
    x[i] += by * STEP
    return x


def gradient(f, x):
    return [(f(moved(x, i, 1)) - f(moved(x, i, -1))) / (2 * STEP) for i in range(len(x))]


def hessian(f, x):
    k = len(x)
    h = mpmath.zeros(k)
    here = f(x)
    for i in range(k):
        h[i, i] = (f(moved(x, i, 1)) - 2 * here + f(moved(x, i, -1))) / STEP ** 2
        for j in range(i):
            both = lambda a, b: f(moved(moved(x, i, a), j, b))
            h[i, j] = h[j, i] = (both(1, 1) - both(1, -1) - both(-1, 1) + both(-1, -1)) / (4 * STEP ** 2)
    return h


def newton(f, x):
    """From a minimum in double precision: steps with the one Hessian there, each of which leaves 1e-6 of the distance or less."""
    h = hessian(f, x)
    for _ in range(4):
        step = mpmath.lu_solve(h, mpmath.matrix(gradient(f, x)))
        x = [a - b for a, b in zip(x, step)]
        if mpmath.norm(step) < 1e-13:
            return x
    raise ArithmeticError("Newton's method does not converge")


def profile_end(case, x, index, lowest, side, length_leads=False):
    """Where the minimum over the other coordinates has risen by half the quantile: by brentq over Newton's method in double precision."""
    x = np.array(x, float)
    others = [i for i in range(len(x)) if i != index]
    covariance = np.linalg.inv(np.array(case.information([mpmath.mpf(v) for v in x], length_leads).tolist(), float))
    steps = np.sqrt(np.diag(covariance))

    def slope(y):
        return np.array([case.value(DOUBLE, y + 1e-30j * e, length_leads).imag / 1e-30 for e in np.eye(len(y))[others]])

    def risen(at):
        y = x + (at - x[index]) * covariance[:, index] / covariance[index, index]
        for _ in range(12):
            here = slope(y)
            curvature = np.array([(slope(y + 1e-5 * steps * e) - here) / (1e-5 * steps[i]) for i, e in zip(others, np.eye(len(y))[others])])
            step = np.linalg.solve(curvature, here)
            y[others] -= step
            if np.all(np.abs(step) < 1e-9 * steps[others]):
                return float(case.value(DOUBLE, y, length_leads)) - lowest - QUANTILE / 2
        raise ArithmeticError("the profile does not converge")

    near, far = x[index] + side * 1.2 * steps[index], x[index] + side * 3.5 * steps[index]
    return brentq(risen, near, far, xtol=1e-7 * steps[index], rtol=1e-12)


class Whitened:
    """Half the deviance and its gradient in units in which the information is the identity; the gradient by complex steps (W. Squire,
    G. Trapp, SIAM Rev. 40, 110 (1998))."""

    def __init__(self, case, scale):
        self.case, self.scale, self.size = case, scale, len(scale)

    def x(self, u):
        return self.case.start + self.scale @ u

    def value(self, u):
        return float(self.case.value(DOUBLE, self.x(u)))

    def slope(self, u):
        return np.array([self.case.value(DOUBLE, self.x(u + 1e-30j * e)).imag / 1e-30 for e in np.eye(self.size)])


def by_scipy(of):
    """BFGS, and Newton's steps behind it: where rounding of the value ends a line search, the gradient still tells where it vanishes."""
    u = minimize(of.value, np.zeros(of.size), jac=of.slope, method="BFGS", options={"gtol": 1e-9}).x
    for _ in range(3):
        curvature = np.array([(of.slope(u + 1e-5 * e) - of.slope(u - 1e-5 * e)) / 2e-5 for e in np.eye(of.size)])
        u = u - np.linalg.solve(curvature, of.slope(u))
    return of.x(u)


def by_lmfit(of):
    """A scalar minimizer of lmfit, begun again where it ended until it stays."""
    found = lmfit.Parameters()
    for i in range(of.size):
        found.add(f"u{i}", value=0.0)
    vector = lambda p: np.array([p[f"u{i}"].value for i in range(of.size)])
    minimizer = lmfit.Minimizer(lambda p: of.value(vector(p)), found)
    for _ in range(4):
        found = minimizer.scalar_minimize(method="BFGS", params=found, jac=lambda p: of.slope(vector(p)), options={"gtol": 1e-10}).params
    return of.x(vector(found))


SI = {"rabi": 1e6, "line_offset": 1e6, "decay": 1e6, "dead_time": 1e-6, "floor": 1.0, "contrast": 1.0, "pi_pulse": 1e-6}


def solve(case):
    scale = np.linalg.cholesky(np.array(mpmath.inverse(case.information([mpmath.mpf(v) for v in case.start])).tolist(), float))
    of = Whitened(case, scale)
    scipy_x, lmfit_x = by_scipy(of), by_lmfit(of)
    f = lambda x: case.value(EXACT, x)
    x = newton(f, [mpmath.mpf(v) for v in scipy_x])
    covariance = mpmath.inverse(case.information(x))
    sigmas = [mpmath.sqrt(covariance[i, i]) for i in range(len(x))]
    lowest = f(x)
    rows = []
    for i, name in enumerate(case.free):
        for other in (scipy_x[i], lmfit_x[i]):
            if abs(other - x[i]) > 1e-6 * sigmas[i]:
                raise ArithmeticError(f"{case.name}: {name} differs by {float((other - x[i]) / sigmas[i])} sigma")
        ends = [mpmath.nan, mpmath.nan]
        if name == "line_offset" or (name == "rabi" and case.population is not line):
            ends = [profile_end(case, x, i, float(lowest), side) for side in (-1, 1)]
        rows.append([name, x[i], scipy_x[i], lmfit_x[i], sigmas[i]] + ends)
    if case.population is undamped:
        rows.append(pi_pulse(case, x, scipy_x, lmfit_x, lowest))
    return rows, 2 * (lowest - prior_part(case, x))


def prior_part(case, x):
    if "dead_time" not in case.free:
        return 0
    return dead_time_prior(EXACT, (x[case.free.index("dead_time")] - case.dead_time[0]) / case.dead_time[1])[0]


def pi_pulse(case, x, scipy_x, lmfit_x, lowest):
    dead = case.free.index("dead_time") if "dead_time" in case.free else None
    length = lambda y: mpmath.pi / mpmath.mpf(y[0]) + (mpmath.mpf(y[dead]) if dead is not None else case.held["dead_time"])
    y = [length(x)] + list(x[1:])
    sigma = mpmath.sqrt(mpmath.inverse(case.information(y, True))[0, 0])
    return ["pi_pulse", y[0], length(scipy_x), length(lmfit_x), sigma] + [profile_end(case, y, 0, float(lowest), side, True) for side in (-1, 1)]


def cases():
    flop = {"rabi": 0.83, "floor": 0.04, "contrast": 0.9}
    axis = 0.35 * np.arange(1, 31)
    yield Case("flop", undamped, binomial, axis, flop, {"dead_time": 0.0}, weight=150)
    late = {"rabi": 0.83, "dead_time": 0.05, "floor": 0.04, "contrast": 0.9}
    yield Case("flop_dead_time", undamped, binomial, axis, late, {}, (0.0, 0.06), weight=150)
    far = {"rabi": 1.3, "dead_time": 0.16, "floor": 0.08, "contrast": 0.8}
    yield Case("flop_far_dead_time", undamped, binomial, 0.3 * np.arange(2, 42), far, {}, (0.0, 0.06), weight=100)
    fading = {"rabi": 1.1, "floor": 0.03, "contrast": 0.92, "decay": 0.12}
    yield Case("flop_decay", decaying, binomial, 0.4 * np.arange(1, 41), fading, {"dead_time": 0.0}, weight=200)
    both = {"rabi": 1.1, "dead_time": 0.03, "floor": 0.08, "contrast": 0.85, "decay": 0.12}
    yield Case("flop_decay_dead_time", decaying, binomial, 0.4 * np.arange(1, 41), both, {}, (0.0, 0.08), weight=200)
    detuned = {"rabi": 0.65, "line_offset": 0.13, "floor": 0.04, "contrast": 0.88}
    yield Case("line", line, binomial, np.linspace(-1.3, 1.3, 27), detuned, {"dead_time": 0.0, "pulse": 4.2}, weight=200)
    yield Case("flop_gaussian", undamped, gaussian, axis, {"rabi": 0.9, "dead_time": -0.04, "floor": 1.2, "contrast": -0.7}, {}, (0.0, 0.06),
               weight=0.04)
    yield Case("flop_poisson", undamped, poisson, axis, {"rabi": 0.9, "dead_time": 0.02, "floor": 0.8, "contrast": 7.5}, {}, (0.0, 0.06), weight=20)


def write(case, rows, deviance, file):
    number = lambda v: mpmath.nstr(mpmath.mpf(v), 17)
    is_line = case.population is line
    unit = 1e6 if is_line else 1e-6
    dynamics = "decay" if case.population is decaying else "undamped"
    mean, sigma = case.dead_time
    print(case.name, "detuning" if is_line else "duration", case.likelihood.__name__, dynamics, number(mean * 1e-6), number(sigma * 1e-6),
          number(case.held.get("pulse", 0.0) * 1e-6), len(case.axis), len(rows), number(deviance), file=file)
    for at, observed, weight in zip(case.axis, case.observed, case.weight):
        print(number(at * unit), number(observed), number(weight), file=file)
    for name, *values in rows:
        print(name, *(number(v * SI[name]) for v in values), file=file)


def main():
    solved = [(case, *solve(case)) for case in cases()]
    with open(sys.argv[1], "w", encoding="ascii") as file:
        for case, rows, deviance in solved:
            write(case, rows, deviance, file)


if __name__ == "__main__":
    main()
