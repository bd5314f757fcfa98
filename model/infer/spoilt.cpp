// SPDX-License-Identifier: Apache-2.0
#include <algorithm>
#include <cmath>

#include "model/infer/outliers.hpp"
#include "model/infer/scatter.hpp"
#include "model/infer/under_prior.hpp"

/// Scans whose points scatter more than the readout's own noise, or have outliers among them.
namespace halfturn::infer {
namespace {

// Share of outliers that is allowed for at first; and the factor by which the one then found must differ for a second fit.
constexpr double kFirstShare = 0.08, kShareDiffers = 2.0;
// Scans whose deviance is more probable than the first are not searched for outliers; between it and the second only those where
// some about the fitted curve gain so much deviance.
constexpr double kSuspected = 0.1, kSurelySuspected = 1e-2, kSuspicious = 6.0;
// Deviance by which outliers must explain a scan better than the readout's own noise does. Between them and scatter, which have as many
// parameters, the likelihood decides.
constexpr double kOutliersDecide = 6.0;
// Scatter of less than this changes no interval by more than a fortieth, and is counted without a second fit.
constexpr double kScatterCounts = 1.05;
/// The signal that a fit has at each point.
bool curve_of(const ScanBatch& scan, const Readout& readout, const Fit& fit, FitWorkspace& work) {
  if (fit.outcome != FitOutcome::fitted) return false;
  const ScanObjective objective(scan, readout, fit.prior, fit.chosen, {}, fit.negative_contrast, work.objective);
  double half_deviance = 0.0;
  work.signal.resize(scan.points());
  return objective.data_part(fit.physical, half_deviance, work.signal);
}

/// What outliers must fall below: minus twice the log likelihood of the readings about work.signal as they are, less a margin, or with
/// scatter.
double without_outliers(const Readout& readout, const Fit& fit, FitWorkspace& work) {
  const double scattered = dispersed_deviance(readout, work.signal, fitted_dispersion(readout, work.signal));
  return std::min(fit.quality.deviance - kOutliersDecide, scattered);
}

bool outliers_suspected(const Readout& readout, const Fit& fit, FitWorkspace& work) {
  if (fit.quality.p_value < kSurelySuspected) return true;
  const double share = fitted_share(readout, work.signal);
  return contaminated_deviance(readout, work.signal, share) < fit.quality.deviance - kSuspicious;
}

}  // namespace

void count_scatter(const ScanBatch& scan, Readout readout, const Prior& prior, const FitOptions& options, Fit& fit, FitWorkspace& work) {
  // A scan that shows nothing with its scatter shows nothing when the scatter speaks louder.
  if (fit.outcome != FitOutcome::fitted || !(fit.quality.scatter > kScatterCounts) || !(fit.quality.over_flat >= kEvidence)) return;
  readout.dispersion = fit.quality.scatter;
  Fit anew = fit;
  if (fit_with(scan, readout, prior, options, anew, work)) fit = std::move(anew);
}

void allow_for_outliers(const ScanBatch& scan, const Readout& readout, const Prior& prior, const FitOptions& options, Fit& fit,
                        FitWorkspace& work) {
  if (!(fit.quality.p_value < kSuspected) || !curve_of(scan, readout, fit, work) || !outliers_suspected(readout, fit, work)) return;
  const double without = without_outliers(readout, fit, work);
  std::vector<double> odds(scan.points());
  Readout contaminated = readout;
  contaminated.odds = odds;
  Fit robust = fit;
  double share = kFirstShare;
  for (int pass = 0; pass < 2; ++pass) {
    outlier_odds(readout, share, odds);
    robust.outlier_share = share;
    if (!fit_with(scan, contaminated, prior, options, robust, work) || !curve_of(scan, contaminated, robust, work)) return;
    share = fitted_share(readout, work.signal);
    if (std::max(share / robust.outlier_share, robust.outlier_share / share) < kShareDiffers) break;
  }
  if (!(contaminated_deviance(readout, work.signal, share) < without)) return;
  fit = std::move(robust);
  count_scatter(scan, contaminated, prior, options, fit, work);
}

}  // namespace halfturn::infer
