// SPDX-License-Identifier: Apache-2.0
#include <algorithm>
#include <cmath>

#include <Eigen/Cholesky>

#include "model/infer/under_prior.hpp"

/// A slow change of the coupling along the scan.
namespace halfturn::infer {
namespace {

// A drift of the coupling along the scan is looked for where its score test exceeds this (a scan without one does in 0.5 % of cases),
// held loosely by this sigma, and kept where it lowers the AICc by more than its own cost.
constexpr double kDriftSuspected = 8.0;
constexpr double kDriftSigma = 0.025;

/// Twice the gain in the log likelihood that a drift promises at the fit, the other parameters following (C. R. Rao, Proc. Camb. Phil.
/// Soc. 44, 50 (1948)): chi-square with one degree of freedom where there is none.
double drift_score(const ScanBatch& scan, const Readout& readout, const Fit& fit, FitWorkspace& work) {
  Prior with = felt_prior(fit);
  with.drift = Known{0.0, kDriftSigma};
  const ScanObjective drifting(scan, readout, with, fit.chosen, {}, fit.negative_contrast, work.objective);
  double value = 0.0;
  Vector gradient;
  Matrix information;
  if (!drifting.evaluate(drifting.pack(fit.physical), value, &gradient, &information)) return 0.0;
  const int slot = drifting.layout().drift;
  const Eigen::LDLT<Matrix> factors(information);
  if (factors.info() != Eigen::Success || !factors.isPositive()) return 0.0;
  const Vector direction = factors.solve(Vector(Vector::Unit(gradient.size(), slot)));
  return std::pow(gradient.dot(direction), 2) / std::max(direction[slot], 1e-300) / fit.quality.scatter;
}

}  // namespace

void look_for_drift(const ScanBatch& scan, const Readout& readout, const FitOptions& options, Fit& fit, FitWorkspace& work) {
  if (fit.outcome != FitOutcome::fitted || scan.progress.empty() || !(fit.quality.over_flat >= kEvidence)) return;
  // Among frequencies that fit alike a drift would only favour the higher ones, whose phases it bends most.
  if (fit.quality.rival && fit.quality.rival->deviance_above < options.rival_margin) return;
  if (!(drift_score(scan, readout, fit, work) > kDriftSuspected)) return;
  Prior with = fit.prior;
  with.drift = Known{0.0, kDriftSigma};
  Fit drifting = fit;
  if (!fit_under(scan, readout, with, options, drifting, work)) return;
  const auto best = [](const Fit& f) { return f.candidates[0].aicc; };
  if (!(best(drifting) < best(fit) - 2.0 * fit.quality.scatter)) return;
  drifting.prior = with;
  fit = std::move(drifting);
}

}  // namespace halfturn::infer
