// SPDX-License-Identifier: Apache-2.0
#include "model/infer/dead_time.hpp"

#include <algorithm>
#include <cmath>
#include <limits>

namespace halfturn::infer {
namespace {

// Below this part of the information the difference of two nearly equal numbers is left: at 1e-3 the solver's last step, 1e-5 of a sigma,
// is a hundredth of one.
constexpr double kLeastTold = 1e-3;

}  // namespace

Penalty contaminated(double z) {
  constexpr double kWide = 5.0, kShare = 0.05 / 0.95 / kWide;
  const double narrow = -0.5 * z * z, wide = -0.5 * z * z / (kWide * kWide);
  // Ratio of the wide part to the narrow one; beyond exp(60) the narrow one is nothing.
  const double ratio = kShare * std::exp(std::min(60.0, wide - narrow));
  const double share = ratio / (1.0 + ratio), slope_per_z = (1.0 - share) + share / (kWide * kWide);
  const double value = -narrow - std::log1p(ratio) + std::log1p(kShare);
  return {ratio > 1e20 ? -wide - std::log(kShare) + std::log1p(kShare) : value, z * slope_per_z, slope_per_z};
}

Known without_prior(double value, double variance, const Known& prior, double scatter) {
  constexpr double kNone = std::numeric_limits<double>::quiet_NaN();
  if (!(prior.sigma > 0.0) || !(variance > 0.0)) return {kNone, kNone};
  const double off = value - prior.mean, held = contaminated(off / prior.sigma).curvature / (prior.sigma * prior.sigma);
  const double information = 1.0 / variance - held;
  if (!(information * variance > kLeastTold)) return {kNone, kNone};
  return {value + held * off / information, std::sqrt(scatter / information)};
}

}  // namespace halfturn::infer
