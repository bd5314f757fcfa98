# SPDX-License-Identifier: Apache-2.0
"""Populations of the driven two-level system and their derivatives, by scipy.linalg.expm, written as a table.

Usage: dynamics_expm.py OUTPUT. One block a parameter set:
    kind rabi detuning decay loss dephasing prepared impurity lost_reads points
    then a line a point: length population d/drabi d/ddetuning d/ddecay d/dloss d/ddephasing d/dlength
The derivatives come from one exponential of the block matrix [[A, 0], [dA, A]] for all five rates (C. Van Loan, IEEE Trans.
Autom. Control 23, 395 (1978)). The equations are those of the model, Torrey, Phys. Rev. 76, 1059 (1949), with loss; nothing is shared with the program.
"""
import sys

import numpy as np
from scipy.linalg import expm

random = np.random.default_rng(19490615)


def generator(w, d, decay, loss, phi):
    g = (decay + loss) / 2 + phi
    return np.array([[-g, d, 0, 0], [-d, -g, w, -w], [0, -w / 2, -(decay + loss), 0], [0, w / 2, decay, 0]], float)


DIRECTIONS = [generator(*(1.0 if i == j else 0.0 for j in range(5))) for i in range(5)]


def evaluate(rates, start, bright, length):
    a = generator(*rates)
    block = np.zeros((24, 24))
    for i in range(6):
        block[4 * i:4 * i + 4, 4 * i:4 * i + 4] = a
        if i:
            block[4 * i:4 * i + 4, :4] = DIRECTIONS[i - 1]
    y = expm(block * length)[:, :4] @ start
    look = np.array([0, 0, 0, -1.0]) if bright else np.array([0, 0, 1.0, 0])
    return [float(bright) + look @ y[:4]] + [look @ y[4 * i:4 * i + 4] for i in range(1, 6)] + [look @ a @ y[:4]]


def log_uniform(low, high):
    return 10 ** random.uniform(np.log10(low), np.log10(high))


def sometimes(probability, value):
    return value() if random.uniform() < probability else 0.0


def broad():
    w = log_uniform(1e-3, 1e3)
    d = sometimes(0.8, lambda: random.choice([-1, 1]) * w * log_uniform(1e-3, 30))
    return [w, d, 1.0, sometimes(0.5, lambda: log_uniform(1e-3, 10)), sometimes(0.5, lambda: log_uniform(1e-3, 10))]


def no_decay():
    w = log_uniform(1e-2, 1e3)
    d = sometimes(0.7, lambda: w * log_uniform(1e-4, 30))
    kind = random.integers(3)
    return [w, d, 0.0, 1.0 if kind != 1 else 0.0, log_uniform(1e-2, 10) if kind != 0 else 0.0]


def near(u_low=3, u_high=12):
    return 1 + random.choice([-1, 0, 1]) * 10 ** -random.uniform(u_low, u_high)


def critical():
    return [0.25 * near(), sometimes(0.3, lambda: 10 ** -random.uniform(3, 12)), 1.0, 0.0, 0.0]


def triple():  # x^3 - a x^2 + (D^2 + W^2) x - a D^2 = (x - a/3)^3 with a = phi - G/2
    phi = sometimes(0.5, lambda: random.uniform(0, 3))
    a = abs(phi - 0.5)
    return [a * np.sqrt(8 / 27) * near(), a / np.sqrt(27) * near(), 1.0, 0.0, phi]


def double():  # roots p, p, q of the same cubic
    phi = sometimes(0.5, lambda: random.uniform(0, 3))
    a = abs(phi - 0.5)
    p = random.uniform(0.02, 0.48)
    q = 1 - 2 * p
    d2 = p * p * q
    return [a * np.sqrt(p * p + 2 * p * q - d2) * near(), a * np.sqrt(d2) * near(), 1.0, 0.0, phi]


def pure_loss():  # real roots meet as detuning goes to 0, and the pair where rabi = loss/2
    w = random.choice([0.5 * near(), log_uniform(1e-2, 1e2)])
    return [w, sometimes(0.7, lambda: w * log_uniform(1e-8, 1)), 0.0, 1.0, 0.0]


def slight():  # dampings so small that modes nearly coincide within the scan
    tiny = 10 ** -random.uniform(1, 10)
    d = sometimes(0.6, lambda: log_uniform(1e-3, 10))
    parts = [sometimes(0.5, lambda: tiny) for _ in range(3)]
    return [1.0, d] + parts


def limits():
    w = random.choice([0.0, 1e-9, 1.0])
    return [w, random.choice([0.0, 1e-9, 1.0, 30.0]), random.choice([0.0, 1e-9, 1.0]), random.choice([0.0, 1e-9, 0.5]),
            random.choice([0.0, 1e-9, 0.5])]


KINDS = [(broad, 900), (no_decay, 300), (critical, 300), (triple, 250), (double, 250), (pure_loss, 200), (slight, 200),
         (limits, 150)]


def longest(kind, rates):
    if kind in (slight, limits):
        return log_uniform(1, 100)
    return log_uniform(0.05, 50)


def main(path):
    with open(path, "w") as table:
        for kind, count in KINDS:
            for _ in range(count):
                rates = kind()
                end = longest(kind, rates)
                lengths = end * (np.arange(1, 7) / 6 if random.uniform() < 0.5 else np.sort(random.uniform(0, 1, 6)))
                excited, bright = random.uniform() < 0.4, random.uniform() < 0.3
                impurity = sometimes(0.5, lambda: random.uniform(0, 0.3))
                upper = 1 - impurity if excited else impurity
                start = np.array([0, 0, upper, 1 - upper])
                print(kind.__name__, *(repr(float(r)) for r in rates), int(excited), repr(float(impurity)), int(bright),
                      len(lengths), file=table)
                for length in lengths:
                    print(repr(float(length)), *(repr(float(v)) for v in evaluate(rates, start, bright, length)), file=table)


if __name__ == "__main__":
    main(sys.argv[1])
