// SPDX-License-Identifier: Apache-2.0
#pragma once
#include "model/dynamics/two_level.hpp"

/// The population as a sum of modes: one decomposition serves every length of a scan.
namespace halfturn::dynamics::detail {

/// Rows of coefficients: the population, its derivative by each rate, its derivative by length.
inline constexpr int kRowCount = kRateCount + 2;
inline constexpr int kValueRow = 0;
inline constexpr int kRateRow = 1;
inline constexpr int kLengthRow = kRateCount + 1;

/// Which rows are wanted.
using Wanted = std::array<bool, kRowCount>;

/// Row r of the population at time t is
///     offset[r] + sum over i of (constant[r][i] + linear[r][i] t) b_i(t),
/// b_0 = exp(rate[0] t), b_1 = exp(rate[1] t), and b_2, b_3 = exp(rate[2] t) cos, sin(frequency t) where the system
/// oscillates, else exp(rate[2] t), exp(rate[3] t).
struct Modes {
  double constant[kRowCount][4];
  double linear[kRowCount][4];
  double offset[kRowCount];
  double rate[4];
  double frequency;
  double size[kRowCount];  // the magnitudes of all terms whose sums are the constants of a row, added up
  bool oscillates;
};

/// What the Laplace transform of the equations needs.
struct Problem {
  double rabi, detuning, decay, loss;
  double coherence;   // (decay + loss)/2 + dephasing
  double leaving;     // decay + loss
  double excited;     // rho_ee at the start
  double ground;      // rho_gg at the start
  bool bright;        // population is 1 - rho_gg
  bool undamped;
};

/// False where the rates or the start are not finite, or a damping is negative.
bool pose(const Rates& rates, const Start& start, Problem& problem);

// What rounding leaves in a sum of modes is taken as the magnitudes of all terms in it, times this, times the largest
// |root|/gap among the roots. It is held to a hundredth of the stated accuracy of populations and, with a scale of at least
// 1e-3 of the longest length, to a tenth of that of derivatives. Over the 2550 sets of dynamics_expm.py, which crowd around
// double and triple roots, the largest errors are then 2.5e-12 of populations and 1.7e-10 of derivatives; with both limits
// 10, 100, 1000 and 10000 times wider, those of derivatives are 2e-9, 3e-9, 8e-8 and 1e-6.
inline constexpr double kAmplification = 8 * 2.220446049250313e-16;
inline constexpr double kValueError = 1e-12;
inline constexpr double kRateError = 1e-11;  // in units of the longest pulse length

/// Decomposes. Returns false where the modes lie so close together that rounding, amplified by cancellation among them,
/// could pass the stated accuracy somewhere in 0 <= t <= longest; flow.hpp then serves.
bool decompose(const Problem& problem, const Wanted& wanted, double longest, Modes& modes);

}  // namespace halfturn::dynamics::detail
