// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <cstddef>
#include <span>

#include "model/dynamics/ensemble_memory.hpp"

namespace halfturn::dynamics::detail {

/// Points and weights of Gauss and Legendre on 0...1, ascending; |error| < 1e-15 of points, 1e-14 relative of weights, to 4096
/// points. A rule already of that size is left. Source: Newton's method on P_n by its three-term recurrence, from Tricomi's
/// estimate (P. J. Davis and P. Rabinowitz, Methods of Numerical Integration (1984), section 2.7).
void legendre_rule(std::size_t points, LegendreRule& rule);

/// A rule for means over a standard normal variable: the points above 0, which also stand below it, with their weights.
struct NormalRule {
  const double* node;
  const double* weight;
  std::size_t count;
};

/// The smallest of the rules of 4, 8, 12 and 16 points whose error on cos(a h) is below 1e-11 for every a up to `phase`;
/// count = 0 where none serves.
NormalRule normal_rule(double phase);

}  // namespace halfturn::dynamics::detail
