// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <vector>

#include "plugin/rehearse/ensemble.hpp"

/// The members that stand for an ensemble where its mean is taken.
namespace halfturn::campaign {

struct Share {
  rehearse::Member member;
  double weight = 1;
};

/// Members and weights (which sum to 1) with which the mean of a population is exact to 1e-6 where it oscillates by at most
/// `phase` radians of the peak coupling, and by `drift_s` seconds of a detuning; at most 256 of them while both spreads times
/// those stay below 135 rad, or every phonon number to 1 - 1e-6 of the weight. One spread at a time: no family has two.
/// Gaussian spreads by the trapezoidal rule, whose error falls like the Gaussian's own transform; the cloud's density
/// k x^(k-1) on 0...1, k = 1/(2 ratio^2), or half of that where the coupling goes with intensity, by Fejer's first rule
/// (P. J. Davis, P. Rabinowitz, Methods of Numerical Integration, 2nd ed. (1984), section 2.5.5).
std::vector<Share> members_of(const rehearse::Ensemble& ensemble, double phase, double drift_s);

}  // namespace halfturn::campaign
