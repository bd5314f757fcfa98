// SPDX-License-Identifier: Apache-2.0
#include "tests/campaign/undecidable.hpp"

#include <algorithm>
#include <cmath>

#include "model/quantity/constants.hpp"
#include "tests/campaign/answer.hpp"
#include "tests/campaign/held.hpp"

namespace halfturn::campaign {
namespace {

constexpr double kSpread = 2;  // standard deviations
constexpr double kOfLine = 1.0 / 3;  // of the evidence over a monotone curve, asked of a line inside the window

bool inside(const Case& of, double spare) {
  const auto [first, last] = std::minmax_element(of.scan.axis.begin(), of.scan.axis.end());
  return constants::kTwoPi * *first + spare <= of.truth.detuning && of.truth.detuning <= constants::kTwoPi * *last - spare;
}

/// The standard error of the worst pulse as an angle, averaged over candidates as the answer is; 0 of a line.
double worst_angle_error(const infer::Fit& fit) {
  double worst = 0;
  for (const auto& length : fit.pulse_length_s)
    if (std::isfinite(length.sigma)) worst = std::max(worst, length.sigma * fit.generalised.value);
  return worst;
}

}  // namespace

Gaps gaps(const Case& of) {
  const Case clean = noiseless(of);
  const double share = (1 - of.outlier_share) / of.overdispersion;
  if (!of.before.empty()) {
    const auto fitted = answer(clean).fitted;
    const auto& rival = fitted.quality.rival;
    return {rival ? share * rival->deviance_above : std::numeric_limits<double>::infinity(), std::nan(""), std::nan(""), 0};
  }
  const auto fit = fit_of(clean);
  if (fit.outcome != infer::FitOutcome::fitted) return {std::nan(""), std::nan(""), std::nan(""), std::nan("")};
  const auto& quality = fit.quality;
  const double rival = quality.rival ? quality.rival->deviance_above : std::numeric_limits<double>::infinity();
  return {share * rival * quality.scatter, share * quality.over_monotone * quality.scatter, share * quality.over_flat * quality.scatter, worst_angle_error(fit)};
}

double gap_for(double threshold) {
  const double root = kSpread + std::sqrt(kSpread * kSpread + threshold);  // of g - 2 kSpread sqrt(g) = threshold
  return root * root;
}

bool decidable(const Case& of, const Gaps& gaps, double offset_bound) {
  const auto& accept = of.drive.accept;
  if (of.truth.line && !inside(of, kSpread * offset_bound)) return false;
  if (std::isnan(gaps.rival) || gaps.rival < gap_for(accept.rival_margin)) return false;
  if (!of.before.empty()) return true;
  if (gaps.angle_error > accept.max_angle_error_rad) return false;
  return gaps.monotone >= gap_for(of.truth.line ? kOfLine * accept.min_evidence : accept.min_evidence) && gaps.flat >= gap_for(accept.min_evidence);
}

}  // namespace halfturn::campaign
