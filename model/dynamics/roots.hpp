// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <cmath>

#include "model/quantity/clones.hpp"

namespace halfturn::dynamics::detail {

/// The roots of X(s) = (x^2 + D^2) s (s + k) + W^2 x (s + L/2), x = s + g (see modes.cpp): one or two single real roots,
/// and a pair, the roots of s^2 + pair_sum s + pair_product, real or conjugate.
struct Roots {
  int singles;            // 1 where D = 0 (the root x = 0 of the decoupled coherence is left out), else 2
  double single[2];       // 1/s
  double single_x[2];     // single + g, free of cancellation
  double pair_sum;        // 1/s
  double pair_product;    // 1/s^2
  double discriminant;    // (pair_sum/2)^2 - pair_product; below 0 the pair is conjugate
};

/// Given k = decay + loss, g >= k/2 >= L/2 >= 0, not all zero. Two real roots are always there: X changes sign between
/// s = -L/2 and s = 0, and between s = -g and s = -k, so both are found by Newton's method inside a bracket, and what
/// remains is a quadratic. For L = 0 the first is 0 and the second is that of Torrey's cubic (1949, Eq. (33)).
Roots find_roots(double rabi, double detuning, double loss, double coherence, double leaving);

/// Where x of the second root would be if x^2 were nothing beside D^2: the root between 0 and g - k of
/// (D^2 + W^2) x^2 - (D^2 (2g - k) + W^2 (g - L/2)) x + D^2 g (g - k), from which Newton's method takes 2 to 4 steps.
HALFTURN_INLINE double coherence_guess(double w2, double d2, double loss, double g, double k) {
  const double b = d2 * (2 * g - k) + w2 * (g - 0.5 * loss), c = d2 * g * (g - k);
  return 2 * c / (b + std::sqrt(b * b - 4 * (d2 + w2) * c));
}

}  // namespace halfturn::dynamics::detail
