// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <functional>
#include <span>

/// The driven two-level system of the simulated apparatus, integrated from its master equation. It shares nothing with
/// model/dynamics, which solves the same physics in closed form: each can be wrong without the other.
namespace halfturn::rehearse {

/// Angular rates of one drive on one pair of levels, in rotating-wave approximation.
struct Rates {
  double rabi = 0;       // rad/s, coupling, either sign
  double detuning = 0;   // rad/s, drive minus transition
  double decay = 0;      // 1/s, e to g
  double loss = 0;       // 1/s, e to levels outside the pair
  double dephasing = 0;  // 1/s, of the coherence alone
};

/// Populations of the pair; 1 - excited - ground is outside it.
struct Populations {
  double excited = 0;
  double ground = 1;
};

/// Populations after a square pulse of `duration_s` (0 for a negative one) that starts with the fraction `start_excited` in e
/// and the rest in g, without coherence. Exponential of the 4x4 Liouvillian (Pade approximation, scaled and squared; Higham,
/// SIAM J. Matrix Anal. Appl. 26, 1179 (2005)). |error| < 1e-11 where the product of every rate and the duration is below 300.
Populations after_square_pulse(const Rates& rates, double duration_s, double start_excited = 0);

/// Excited fractions after square pulses on an atom that starts in g, of the durations first_s + k step_s (0 for a negative one),
/// k = 0, 1, ...: the exponentials of both durations, then one product a pulse, whose roundings add up. step_s >= 0; where first_s
/// is negative, only one duration may be asked for.
void after_square_pulses(const Rates& rates, double first_s, double step_s, std::span<double> excited);

/// Relative amplitude of a pulse at the time since its start, in s.
using Envelope = std::function<double(double)>;

/// The same for a pulse of any shape: coupling `rates.rabi * envelope(t)` for 0 <= t <= duration_s. Integrates the 2x2 density
/// matrix with the pair 5(4) of Dormand and Prince (J. Comput. Appl. Math. 6, 19 (1980)), whose estimated error of a step stays
/// below `tolerance`. An envelope with kinks costs steps and no accuracy. Needs tolerance >= 1e-13.
Populations after_shaped_pulse(const Rates& rates, const Envelope& envelope, double duration_s, double start_excited = 0,
                               double tolerance = 1e-11);

/// Excited fraction after a square pulse on a lossless atom that starts in g: Omega^2/W^2 sin^2(W t/2), W^2 = Omega^2 + Delta^2
/// (Rabi, Phys. Rev. 51, 652 (1937)). 0 for a negative duration.
double undamped_population(double rabi, double detuning, double duration_s);

}  // namespace halfturn::rehearse
