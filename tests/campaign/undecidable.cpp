// SPDX-License-Identifier: Apache-2.0
#include "tests/campaign/undecidable.hpp"

#include <algorithm>
#include <cmath>

#include "model/infer/fit.hpp"
#include "model/quantity/constants.hpp"
#include "plugin/service/known.hpp"
#include "tests/campaign/answer.hpp"

namespace halfturn::campaign {
namespace {

constexpr double kSpread = 2;  // standard deviations

Case without_noise(const Case& of) {
  Case clean = of;
  for (std::size_t i = 0; i < of.expected.size(); ++i) clean.scan.observed[0][i] = of.expected[i] * of.scan.weight[0][i];
  return clean;
}

infer::Fit fit_of(const Case& of) {
  std::vector<std::string> assumed;
  const auto prior = service::prior_for(&of.drive, {}, of.scan, {}, 0, assumed);
  const auto scan = service::model_scan(of.scan);
  infer::FitOptions options;
  options.rival_margin = of.drive.accept.rival_margin;
  infer::FitWorkspace workspace;
  infer::Fit fit;
  infer::fit(scan.batch, {&prior, 1}, options, {&fit, 1}, workspace);
  return fit;
}

bool inside(const Case& of, double spare) {
  const auto [first, last] = std::minmax_element(of.scan.axis.begin(), of.scan.axis.end());
  return constants::kTwoPi * *first + spare <= of.truth.detuning && of.truth.detuning <= constants::kTwoPi * *last - spare;
}

}  // namespace

Gaps gaps(const Case& of) {
  const Case clean = without_noise(of);
  const double share = (1 - of.outlier_share) / of.overdispersion;
  if (!of.before.empty()) {
    const auto fitted = answer(clean, 0.95);
    const auto& rival = fitted.quality.rival;
    return {rival ? share * rival->deviance_above : std::numeric_limits<double>::infinity(), std::nan(""), std::nan("")};
  }
  const auto fit = fit_of(clean);
  if (fit.outcome != infer::FitOutcome::fitted) return {std::nan(""), std::nan(""), std::nan("")};
  const auto& quality = fit.quality;
  const double rival = quality.rival ? quality.rival->deviance_above : std::numeric_limits<double>::infinity();
  return {share * rival * quality.scatter, share * quality.over_monotone * quality.scatter, share * quality.over_flat * quality.scatter};
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
  return gaps.monotone >= gap_for(accept.min_evidence) && gaps.flat >= gap_for(accept.min_evidence);
}

}  // namespace halfturn::campaign
