// SPDX-License-Identifier: Apache-2.0
#include <algorithm>
#include <cmath>

#include "model/infer/under_prior.hpp"

/// What a scan contradicts of what was known before it.
namespace halfturn::infer {
namespace {

// A prior contradicted by more than so many of its own sigmas is not believed against the data.
constexpr double kContradicted = 3.0;
// ... and is then held this much more loosely, or not at all (readout).
constexpr double kLoosened = 10.0;
// The points' part of the information about the dead time that lets them contradict its prior. Below, the prior's wide tail, which
// takes a hundredth from its curvature, would decide (campaign, "decay").
constexpr double kPointsHeard = 0.1;
// Deviance by which a fit without history's frequency must be better to be taken.
constexpr double kClearlyBetter = 10.0;
// History's dead time is believed less than that: setting it aside costs little, and what changed since has no other say.
constexpr double kHistoryDoubted = 2.5;

bool contradicts(const std::optional<Known>& known, const Estimate& found) {
  return known && std::abs(found.value - known->mean) > kContradicted * std::max(known->sigma, 1e-6);
}

/// Whether the fit is believable but for what the readout's prior held against it: no oscillation under it, or one with signals
/// far from it.
bool readout_contradicted(const Prior& prior, const Fit& fit) {
  if (!prior.floor && !prior.contrast) return false;
  if (fit.outcome != FitOutcome::fitted || !(fit.quality.over_flat >= kEvidence)) return true;
  return contradicts(prior.contrast, fit.contrast) || contradicts(prior.floor, fit.floor);
}

/// Whether the dead time that the points alone ask for lies far from its prior, by both their errors: with the fit z prior sigmas
/// away and its variance a part r of the prior's, that distance is z / sqrt(1 - r).
bool dead_time_contradicted(const ScanBatch& scan, const Prior& prior, const Fit& fit) {
  const double sigma = prior.dead_time.sigma;
  if (fit.outcome != FitOutcome::fitted || scan.kind != Axis::duration || !(sigma > 0.0)) return false;
  const double z = (fit.physical.dead_time - prior.dead_time.mean) / sigma;
  const double share = fit.dead_time_s.sigma * fit.dead_time_s.sigma / (fit.quality.scatter / fit.dispersion * sigma * sigma);
  // Where the prior holds nine tenths of what is known, the points have no say of their own.
  const bool told = 1.0 - share > kPointsHeard;
  return std::abs(z) > kContradicted || (told && z * z > kContradicted * kContradicted * (1.0 - share));
}

/// Whether the dead time that the points alone ask for lies far from the one of the scans before.
bool dead_time_doubted(const ScanBatch& scan, const Prior& prior, const Fit& fit) {
  if (!prior.dead_time_otherwise || fit.outcome != FitOutcome::fitted || scan.kind != Axis::duration) return false;
  const Known& points = fit.dead_time_points;
  // Held so far from what history says, even at a bound, the estimate comes from the points.
  if (std::abs(fit.physical.dead_time - prior.dead_time.mean) > kContradicted * prior.dead_time.sigma) return true;
  return std::abs(points.mean - prior.dead_time.mean) > kHistoryDoubted * std::hypot(points.sigma, prior.dead_time.sigma);
}

/// Whether a line scan is badly described with the Rabi frequency that history knows: it may have been taken at another power that
/// nobody stated.
bool history_contradicted(const ScanBatch& scan, const Prior& prior, const Fit& fit) {
  if (scan.kind != Axis::detuning || !prior.log_rabi) return false;
  if (fit.outcome != FitOutcome::fitted || !(fit.quality.over_flat >= kEvidence) || fit.quality.p_value < 0.01) return true;
  return std::abs(std::log(fit.rabi_mean.value) - prior.log_rabi->mean) > kContradicted * std::max(prior.log_rabi->sigma, 1e-6);
}

/// The prior with what the scan contradicts set aside; the same where it contradicts nothing.
Prior reconciled(const ScanBatch& scan, const Readout& readout, const Prior& prior, const FitOptions& options, Fit& fit, FitWorkspace& work) {
  Prior loose = prior;
  if (readout_contradicted(prior, fit)) {
    loose.floor.reset();
    loose.contrast.reset();
    Fit freed = fit;
    // A scan that shows nothing with the readout free shows nothing.
    if (fit_under(scan, readout, loose, options, freed, work) && freed.quality.over_flat >= kEvidence) {
      fit = std::move(freed);
      fit.quality.readout_released = true;
    } else {
      loose = prior;
    }
  }
  if (history_contradicted(scan, prior, fit)) {
    loose.log_rabi.reset();
    Fit freed = fit;
    const double under = fit.outcome == FitOutcome::fitted ? fit.quality.deviance : std::numeric_limits<double>::infinity();
    if (fit_under(scan, readout, loose, options, freed, work) && freed.quality.over_flat >= kEvidence && freed.quality.deviance < under - kClearlyBetter)
      fit = std::move(freed);
    else
      loose.log_rabi = prior.log_rabi;
  }
  if (dead_time_doubted(scan, prior, fit)) {
    loose.dead_time = *prior.dead_time_otherwise;
    loose.dead_time_otherwise.reset();
    Fit freed = fit;
    if (fit_under(scan, readout, loose, options, freed, work)) {
      freed.quality.dead_time_doubted = true;
      fit = std::move(freed);
    } else {
      loose.dead_time = prior.dead_time;
      loose.dead_time_otherwise = prior.dead_time_otherwise;
    }
  }
  if (!loose.dead_time_otherwise && dead_time_contradicted(scan, loose, fit)) {
    const Known before = loose.dead_time;
    loose.dead_time.sigma *= kLoosened;
    Fit freed = fit;
    if (fit_under(scan, readout, loose, options, freed, work)) {
      freed.quality.dead_time_released = true;
      fit = std::move(freed);
    } else {
      loose.dead_time = before;
    }
  }
  return loose;
}

}  // namespace

bool fit_with(const ScanBatch& scan, const Readout& readout, const Prior& prior, const FitOptions& options, Fit& fit, FitWorkspace& work) {
  fit.quality.readout_released = fit.quality.dead_time_released = fit.quality.dead_time_doubted = false;
  fit_under(scan, readout, prior, options, fit, work);
  fit.prior = reconciled(scan, readout, prior, options, fit, work);
  return fit.outcome == FitOutcome::fitted;
}

}  // namespace halfturn::infer
