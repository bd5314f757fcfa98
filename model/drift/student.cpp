// SPDX-License-Identifier: Apache-2.0
#include <cmath>

#include "model/drift/summary.hpp"
#include "model/quantity/constants.hpp"

namespace halfturn::drift {
namespace {

/// The share of Student's distribution within -t ... t. Abramowitz & Stegun (1964), 26.7.3 (odd) and 26.7.4 (even degrees).
double within(double t, int degrees) {
  const double theta = std::atan2(t, std::sqrt(static_cast<double>(degrees)));
  const double cosine = std::cos(theta);
  const bool odd = degrees % 2 == 1;
  double term = odd ? cosine : 1.0;
  double sum = degrees == 1 ? 0.0 : term;
  for (int k = odd ? 3 : 2; k <= degrees - 2; k += 2) {
    term *= cosine * cosine * (k - 1) / k;
    sum += term;
  }
  return odd ? 2.0 / constants::kPi * (theta + std::sin(theta) * sum) : std::sin(theta) * sum;
}

/// The root of an ascending function between two points, halved until they meet.
template <class Function>
double root(Function function, double low, double high) {
  for (int i = 0; i < 200 && low < high; ++i) {
    const double middle = 0.5 * (low + high);
    if (middle == low || middle == high) break;
    (function(middle) < 0.0 ? low : high) = middle;
  }
  return 0.5 * (low + high);
}

/// Abramowitz & Stegun (1964), 26.7.5, with x the normal quantile.
double expansion(double x, double degrees) {
  const double x2 = x * x;
  const double g1 = x * (x2 + 1) / 4;
  const double g2 = x * (5 * x2 * x2 + 16 * x2 + 3) / 96;
  const double g3 = x * (3 * x2 * x2 * x2 + 19 * x2 * x2 + 17 * x2 - 15) / 384;
  return x + (g1 + (g2 + g3 / degrees) / degrees) / degrees;
}

}  // namespace

double student_t(double coverage, int degrees) {
  if (!(coverage > 0.0 && coverage < 1.0) || degrees < 1) return kNone;
  if (degrees <= 400) {
    // tan of the share of the Cauchy distribution, the widest of all, bounds the root from above.
    const double highest = std::tan(0.5 * constants::kPi * coverage) * 1.01 + 1.0;
    return root([&](double t) { return within(t, degrees) - coverage; }, 0.0, highest);
  }
  const double normal = root([&](double x) { return std::erf(x / std::sqrt(2.0)) - coverage; }, 0.0, 40.0);
  return expansion(normal, degrees);
}

}  // namespace halfturn::drift
