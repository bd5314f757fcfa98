// SPDX-License-Identifier: Apache-2.0
#include "plugin/rehearse/strategy.hpp"

#include <algorithm>
#include <cmath>
#include <limits>
#include <numbers>

namespace halfturn::rehearse {
namespace {

double root_mean_square(const std::vector<double>& values) {
  double sum = 0;
  for (const double value : values) sum += value * value;
  return std::sqrt(sum / static_cast<double>(values.size()));
}

}  // namespace

void Strategy::note(const Apparatus& apparatus, double time_s, double angle_rad) {
  // A whole turn too much is no error: atoms feel the angle within a turn.
  errors_rad_.push_back(std::remainder(apparatus.rotation(time_s, pulse_s, carrier_hz) - angle_rad, 2.0 * std::numbers::pi));
  carrier_errors_hz_.push_back(carrier_hz - apparatus.truth(time_s).line_hz);
}

Score score(const Strategy& strategy) {
  constexpr double kNone = std::numeric_limits<double>::quiet_NaN();
  if (strategy.errors_rad().empty()) return {kNone, kNone, kNone, kNone, kNone};
  std::vector<double> magnitudes;
  for (const double error : strategy.errors_rad()) magnitudes.push_back(std::abs(error));
  std::sort(magnitudes.begin(), magnitudes.end());
  const auto minutes = static_cast<double>(magnitudes.size());
  const auto good = std::upper_bound(magnitudes.begin(), magnitudes.end(), kGoodRotationRad) - magnitudes.begin();
  const auto rank = static_cast<std::size_t>(std::ceil(0.99 * minutes)) - 1;
  return {root_mean_square(magnitudes), magnitudes[rank], magnitudes.back(), static_cast<double>(good) / minutes,
          root_mean_square(strategy.carrier_errors_hz())};
}

}  // namespace halfturn::rehearse
