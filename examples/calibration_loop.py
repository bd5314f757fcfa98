# SPDX-License-Identifier: Apache-2.0
"""A calibration loop: measure a flop, ask for pulse lengths, load them. Put your apparatus in the place of `measure` and `load`.
It suits a daemon that runs with first-night.yaml; an argument gives another endpoint than its usual one."""
import math
import random
import sys

import halfturn

SHOTS = 100
DURATIONS_S = [0.25e-6 * i for i in range(40)]
RABI, DECAY = 2 * math.pi * 122e3, 4.69e4  # of an invented apparatus, rad/s and 1/s


def measure(duration_s):  # on resonance, with natural decay (H. C. Torrey, Phys. Rev. 76, 1059 (1949)); contrast 0.93, floor 0.02
    root = math.sqrt(RABI**2 - DECAY**2 / 16)
    swing = math.cos(root * duration_s) + 0.75 * DECAY / root * math.sin(root * duration_s)
    excited = RABI**2 / (2 * RABI**2 + DECAY**2) * (1 - math.exp(-0.75 * DECAY * duration_s) * swing)
    return sum(random.random() < 0.02 + 0.93 * excited for _ in range(SHOTS))


def load(pulses):
    print("loaded", {name: f"{1e6 * length_s:.3f} us" for name, length_s in pulses.items()})


with halfturn.Client(*sys.argv[1:]) as client:
    counts = [measure(duration_s) for duration_s in DURATIONS_S]
    fit = client.fit(drive="red", duration_s=DURATIONS_S, counts=counts, shots=SHOTS)
    print(fit.verdict, fit.why)
    pulses = fit.lengths_s()  # always what to load: under "keep" and "refuse" the lengths in force
    load(pulses)
    client.applied("red", pulses=pulses)
