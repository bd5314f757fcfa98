// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <cstddef>
#include <vector>

#include "model/dynamics/ensemble_memory.hpp"

/// Flops on resonance without damping: population = excited + (1 - 2 excited)(1 - mean of cos(x Omega t))/2.
namespace halfturn::dynamics::detail {

/// What the outputs are made of at one length, with theta = Omega t and the parameter p: 1 - mean of cos(x theta), mean of
/// x sin(x theta) (its derivative by theta), and its derivative by p at constant theta.
struct FlopSums {
  double fall, by_theta, by_parameter;
};

/// Where sums go, one entry a length; none may be null.
struct FlopRows {
  double *fall, *by_theta, *by_parameter;
};

/// A Gaussian spread of relative standard deviation sigma: fall = 1 - exp(-(sigma theta)^2/2) cos theta.
/// Lengths t >= 0, |rabi| t <= kLargestPhase (elementary.hpp).
void spread_flop(double rabi, double sigma, const double* t, std::size_t points, const FlopRows& rows);

/// Members with scale and weight and derivatives, which must be 0 in `shift`. On an even grid t_k = t_0 + k step where step > 0,
/// by a recurrence that starts afresh every 512 points; else each length by itself. Limits as above.
/// `scratch` grows to ten numbers a member.
void members_flop(double rabi, const Members& members, const double* t, double step, std::size_t points,
                  std::vector<double>& scratch, const FlopRows& rows);

}  // namespace halfturn::dynamics::detail
