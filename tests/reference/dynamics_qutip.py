# SPDX-License-Identifier: Apache-2.0
"""Populations of a driven atom from QuTiP's master equation, with a third level for what is lost from the pair.

Usage: dynamics_qutip.py OUTPUT. Blocks as in dynamics_expm.py, populations alone. H = (W/2)(|e><g| + |g><e|) - D |e><e|;
collapse operators sqrt(G) |g><e|, sqrt(L) |lost><e|, and sqrt(phi/2) (|e><e| - |g><g|), with which the coherence of the pair
decays at phi beside (G + L)/2. The population read is that of e, with that of the lost level where it is bright.
"""
import sys

import numpy as np
import qutip

random = np.random.default_rng(20120401)

G, E, LOST = (qutip.basis(3, i) for i in range(3))


def evaluate(rates, upper, bright, lengths):
    w, d, decay, loss, phi = rates
    hamiltonian = w / 2 * (E * G.dag() + G * E.dag()) - d * E * E.dag()
    dephased = E * E.dag() - G * G.dag()
    collapse = [c for rate, c in ((decay, G * E.dag()), (loss, LOST * E.dag()), (phi / 2, dephased)) if rate > 0
                for c in [np.sqrt(rate) * c]]
    start = upper * E * E.dag() + (1 - upper) * G * G.dag()
    look = E * E.dag() + (LOST * LOST.dag() if bright else 0)
    options = qutip.Options(atol=1e-13, rtol=1e-11, nsteps=1000000)
    result = qutip.mesolve(hamiltonian, start, np.concatenate([[0.0], lengths]), collapse, [look], options=options)
    return result.expect[0][1:]


def main(path):
    with open(path, "w") as table:
        for _ in range(60):
            some = [random.uniform() < 0.6 for _ in range(4)]
            rates = [10 ** random.uniform(-0.5, 1), some[0] * random.normal() * 5, some[1] * 10 ** random.uniform(-2, 1),
                     some[2] * 10 ** random.uniform(-2, 0.5), some[3] * 10 ** random.uniform(-2, 0.5)]
            excited, bright = random.uniform() < 0.4, random.uniform() < 0.5
            impurity = random.uniform(0, 0.2)
            lengths = np.sort(random.uniform(0, 10, 8))
            print("qutip", *(repr(float(r)) for r in rates), int(excited), repr(float(impurity)), int(bright), len(lengths), file=table)
            for length, p in zip(lengths, evaluate(rates, 1 - impurity if excited else impurity, bright, lengths)):
                print(repr(float(length)), repr(float(p)), file=table)


if __name__ == "__main__":
    main(sys.argv[1])
