// SPDX-License-Identifier: Apache-2.0
#pragma once
#include "model/infer/prior.hpp"

/// The prior of a dead time, and what is left of an estimate without it.
namespace halfturn::infer {

/// -log of a prior's density by z, the distance from its mean in sigmas; the curvature is the slope over z, which is at least that of the
/// wide part.
struct Penalty {
  double value, slope, curvature;
};

/// A normal prior that may be wrong: -log of 0.95 N(0, 1) + 0.05 N(0, 5^2), 0 at z = 0 (contaminated normal, J. W. Tukey 1960). As
/// the normal within 2.5 sigma; a value 5 sigma out costs a deviance of 10 instead of 25.
Penalty contaminated(double z);

/// What the points alone say of a dead time whose best value (s) under `prior` is `value`, with the variance `variance` (s^2) of the
/// whole information: the prior's part of the information and its pull are taken out, exactly where the points' likelihood is quadratic.
/// `scatter` multiplies the variance of what the points say. Sigma is NaN where they bring less than a thousandth of the information.
Known without_prior(double value, double variance, const Known& prior, double scatter);

}  // namespace halfturn::infer
