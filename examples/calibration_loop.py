# SPDX-License-Identifier: Apache-2.0
"""A calibration loop: measure a flop, ask for pulse lengths, load them. Put your apparatus in the place of `measure` and `load`."""
import math
import random

import halfturn

SHOTS = 100
DURATIONS_S = [0.25e-6 * i for i in range(40)]


def measure(duration_s):  # an invented apparatus: 125 kHz, contrast 0.93, floor 0.02
    excited = 0.02 + 0.93 * math.sin(math.pi * 125e3 * duration_s) ** 2
    return sum(random.random() < excited for _ in range(SHOTS))


def load(pulses):
    print("loaded", {name: f"{1e6 * length_s:.3f} us" for name, length_s in pulses.items()})


with halfturn.Client() as client:
    counts = [measure(duration_s) for duration_s in DURATIONS_S]
    fit = client.fit(drive="red", duration_s=DURATIONS_S, counts=counts, shots=SHOTS)
    print(fit.verdict, fit.why)
    if fit.applies:
        pulses = {"flip": fit.length_s("flip"), "split": fit.length_s("split")}
        load(pulses)
        client.applied("red", pulses=pulses)
