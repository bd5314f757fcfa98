#!/usr/bin/env python3
# SPDX-License-Identifier: Apache-2.0
"""What a careful physicist's script makes of the campaign's scans: a spectral guess, scipy.optimize.curve_fit with binomial errors
and bounds, and checks of chi-square and sigma before a fit is used.

    careful_scipy.py SCANS ANSWERS

SCANS is what `halfturn-campaign --dump` wrote; ANSWERS is for its `--score`. The `truth` in SCANS is not looked at."""
import json
import sys
import warnings
from collections import Counter

import numpy as np
from scipy.optimize import curve_fit
from scipy.signal import lombscargle
from scipy.stats import chi2

LEAST_P = 1e-3  # of chi-square
LEAST_GAIN = 30  # chi-square over a flat line
LEAST_CYCLES = 0.75
PEAKS = 4  # of the periodogram that are looked at
STARTS = 3  # that curve_fit is given, the best by chi-square


class Refused(Exception):
    """A fit that is not used, and why."""


def fractions(scan):
    """Fractions of bright shots with errors sqrt(p (1 - p) / n), p kept off 0 and 1 by a count (Laplace's rule)."""
    n = scan["shots"]
    k = np.array(scan["counts"])
    p = (k + 1) / (n + 2)
    return k / n, np.sqrt(p * (1 - p) / n)


def check_fit(residuals, parameters, flat):
    chi_square = np.sum(residuals**2)
    if flat - chi_square < LEAST_GAIN:
        raise Refused("no oscillation")
    if chi2.sf(chi_square, len(residuals) - parameters) < LEAST_P:
        raise Refused("poor fit")


def best_fit(model, x, y, sigma, starts, low, high):
    """The least chi-square of curve_fit from several starts: parameters, covariance, residuals."""
    best = None
    starts = [np.clip(start, np.array(low) + 1e-12, np.array(high) - 1e-12) for start in starts]
    starts.sort(key=lambda start: np.sum(((y - model(x, *start)) / sigma) ** 2))
    for start in starts[:STARTS]:
        try:
            found, covariance = curve_fit(model, x, y, start, sigma, absolute_sigma=True, bounds=(low, high), max_nfev=200)
        except (RuntimeError, ValueError):
            continue
        residuals = (y - model(x, *found)) / sigma
        if best is None or np.sum(residuals**2) < np.sum(best[2] ** 2):
            best = found, covariance, residuals
    if best is None:
        raise Refused("no fit")
    if not np.all(np.isfinite(best[1])) or np.any(np.diag(best[1]) <= 0):
        raise Refused("no covariance")
    return best


def flat_chi_square(y, sigma):
    mean = np.average(y, weights=sigma**-2)
    return np.sum(((y - mean) / sigma) ** 2)


def flop(t, offset, amplitude, rate, cycles, lag):
    """In units of the span: rate in 1/span, frequency in cycles a span, lag (the phase at zero length) in rad."""
    return offset - amplitude * np.exp(-rate * t) * np.cos(2 * np.pi * cycles * t - lag)


def frequency_range(scan, t):
    """Cycles a span: what `expect` says, else from half a cycle to half the sampling rate."""
    span = np.ptp(scan["duration_s"])
    if "expect_hz" in scan:
        return scan["expect_hz"][0] * span, scan["expect_hz"][1] * span
    return 0.5, 0.5 / np.median(np.diff(t))


def peaks(t, y, low, high):
    """The highest peaks of the Lomb-Scargle periodogram, in cycles a span."""
    trial = np.linspace(low, high, max(200, int(12 * (high - low))))
    power = lombscargle(t, y - np.mean(y), 2 * np.pi * trial)
    inner = np.flatnonzero((power[1:-1] >= power[:-2]) & (power[1:-1] >= power[2:])) + 1
    candidates = np.concatenate([inner, [0, len(trial) - 1]])
    return trial[candidates[np.argsort(power[candidates])[::-1][:PEAKS]]]


def start_at(t, y, sigma, cycles, rate):
    """Offset, amplitude and phase by linear least squares at a frequency and a damping."""
    phase, envelope = 2 * np.pi * cycles * t, np.exp(-rate * t)
    columns = np.stack([np.ones_like(t), -envelope * np.cos(phase), -envelope * np.sin(phase)], axis=1) / sigma[:, None]
    offset, by_cos, by_sin = np.linalg.lstsq(columns, y / sigma, rcond=None)[0]
    return offset, np.hypot(by_cos, by_sin), rate, cycles, np.arctan2(by_sin, by_cos)


def sign_of_contrast(scan, found):
    """Whether the signal rises at first: what is known, else the phase that is the nearer to zero length."""
    if "contrast" in scan:
        return np.sign(scan["contrast"][0])
    lag = (found[4] + np.pi) % (2 * np.pi) - np.pi
    return np.sign(found[1]) * (1 if abs(lag) <= np.pi / 2 else -1)


def fit_flop(scan):
    y, sigma = fractions(scan)
    lengths = np.array(scan["duration_s"])
    span = np.ptp(lengths)
    t = lengths / span
    low, high = frequency_range(scan, t)
    starts = [start_at(t, y, sigma, cycles, rate) for cycles in peaks(t, y, low, high) for rate in (0.1, 2.0)]
    bounds = [0, -0.6, 0, 0.8 * low, -2 * np.pi], [1, 0.6, 30, 1.2 * high, 2 * np.pi]
    found, covariance, residuals = best_fit(flop, t, y, sigma, starts, *bounds)
    check_fit(residuals, 5, flat_chi_square(y, sigma))
    if abs(found[1]) < 5 * np.sqrt(covariance[1, 1]):
        raise Refused("no oscillation")
    cycles = found[3]
    if cycles < LEAST_CYCLES:
        raise Refused("too few cycles")
    if "expect_hz" in scan and not low <= cycles <= high:
        raise Refused("outside expect")
    # The lag of the ground state: the pi pulse ends where cycles * t * 2 pi - lag = pi.
    lag = found[4] if np.sign(found[1]) == sign_of_contrast(scan, found) else found[4] + np.pi
    lag = (lag + np.pi) % (2 * np.pi) - np.pi
    angle = 2 * np.pi * cycles
    pi = (np.pi + lag) / angle
    by = np.array([-2 * np.pi * pi / angle, 1 / angle])
    error = np.sqrt(by @ covariance[3:5, 3:5] @ by)
    if not error * angle < scan["max_angle_error_rad"]:
        raise Refused("sigma")
    return {"used": True, "pi_s": pi * span, "pi_sigma_s": error * span}


def line(x, centre, area, floor, contrast):
    """Rabi's formula, Phys. Rev. 51, 652 (1937); x and centre are 2 pi times detuning times pulse length."""
    whole = np.hypot(area, x - centre)
    return floor + contrast * (area / whole * np.sin(whole / 2)) ** 2


def fit_line(scan):
    y, sigma = fractions(scan)
    length = scan["pulse_s"]
    x = 2 * np.pi * length * np.array(scan["detuning_hz"])
    smooth = np.convolve(y, np.ones(3) / 3, mode="same")
    off = np.median(y) - smooth
    off[[0, -1]] = 0
    extremum = np.argmax(np.abs(off))
    starts = [
        (centre, area * np.pi, np.median(y), -1.2 * off[extremum])
        for centre in (x[extremum], np.average(x, weights=off**2 + 1e-12))
        for area in (0.5, 1.0, 2.0, 3.0)
    ]
    bounds = [x[0], 0.1, 0, -1], [x[-1], 5 * np.pi, 1, 1]
    found, covariance, residuals = best_fit(line, x, y, sigma, starts, *bounds)
    check_fit(residuals, 4, flat_chi_square(y, sigma))
    width = 2 * np.hypot(found[1], 2.5)  # within a fifth of the full width at half maximum
    if not np.sqrt(covariance[0, 0]) < scan["max_carrier_error"] * width:
        raise Refused("sigma")
    if not x[0] < found[0] < x[-1]:
        raise Refused("outside the window")
    return {"used": True, "offset_hz": found[0] / (2 * np.pi * length)}


def answer(scan):
    head = {key: scan[key] for key in ("family", "seed", "index")}
    try:
        return {**head, **(fit_flop(scan) if "duration_s" in scan else fit_line(scan))}
    except Refused as refused:
        return {**head, "used": False, "why": str(refused)}


def main(scans, answers):
    warnings.simplefilter("ignore")  # of curve_fit, about covariances that are checked here
    seen, used = Counter(), Counter()
    with open(scans) as source, open(answers, "w") as target:
        for text in source:
            given = answer(json.loads(text))
            seen[given["family"]] += 1
            used[given["family"]] += given["used"]
            target.write(json.dumps(given) + "\n")
    for family, count in seen.items():
        print(f"{family:21s} {used[family]:6d} of {count:6d} used")


if __name__ == "__main__":
    if len(sys.argv) != 3:
        sys.exit(__doc__)
    main(*sys.argv[1:])
