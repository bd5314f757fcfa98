// SPDX-License-Identifier: Apache-2.0
#include "model/infer/fit.hpp"

#include <algorithm>

#include "model/infer/monotone.hpp"
#include "model/infer/second_component.hpp"
#include "model/infer/shown.hpp"
#include "model/infer/under_prior.hpp"

namespace halfturn::infer {
namespace {

void fit_one(const ScanBatch& given, std::size_t site, const Prior& prior, const FitOptions& options, Fit& fit, FitWorkspace& work) {
  ScanBatch scan = given;
  scan.progress = progress_of(scan, work.progress);
  fit = Fit{};
  fit.axis = scan.kind;
  fit.scan_pulse_s = scan.pulse_length_s;
  fit.sampling = sampling_of(scan.kind, scan.axis);
  if (!scan.axis.empty()) {
    const auto [low, high] = std::minmax_element(scan.axis.begin(), scan.axis.end());
    fit.lowest = *low;
    fit.longest = *high;
  }
  const Readout readout = scan.site(site);
  fit.quality.points = measured_points(readout);
  work.objective.reserve(scan.points());
  // AICc needs two points more than there are parameters.
  const ScanObjective simplest(scan, readout, prior, Dynamics::undamped, {}, false, work.objective);
  if (fit.quality.points < std::max(7, simplest.layout().count + 2) || fit.sampling.distinct < 5) {
    fit.outcome = FitOutcome::too_few_points;
    return;
  }
  fit_with(scan, readout, prior, options, fit, work);
  look_for_drift(scan, readout, options, fit, work);
  Prior known = prior;
  known.drift = fit.prior.drift;
  allow_for_outliers(scan, readout, known, options, fit, work);
  if (fit.outlier_share == 0.0) count_scatter(scan, readout, known, options, fit, work);
  look_for_second(scan, readout, options, fit, work);
  if (fit.outcome == FitOutcome::fitted) return withhold_unshown(options, fit);
  const auto monotone = monotone_half_deviance(readout, scan.axis);
  fit.quality.monotone_gain = 2.0 * (monotone.flat - std::min(monotone.rising, monotone.falling));
}

}  // namespace

void fit(const ScanBatch& scans, std::span<const Prior> priors, const FitOptions& options, std::span<Fit> fits, FitWorkspace& work) {
  for (std::size_t site = 0; site < fits.size(); ++site) fit_one(scans, site, priors[site], options, fits[site], work);
}

bool overlay(const ScanBatch& scan, const Fit& fit, std::span<const double> axis, double z, std::span<double> signal, std::span<double> low,
             std::span<double> high) {
  if (fit.outcome != FitOutcome::fitted) return false;
  ScanBatch drawn = scan;
  drawn.axis = axis;
  drawn.references.reset();
  drawn.progress = {};  // as at the scan's middle
  const Readout nothing{scan.readout, {}, {}};
  ObjectiveWorkspace work;
  work.reserve(axis.size());
  const Prior known = felt_prior(fit);
  const ScanObjective curve(drawn, nothing, known, fit.chosen, {}, fit.negative_contrast, work);
  return curve.layout().count == fit.x.size() && curve.draw(fit.x, fit.covariance, z, signal, low, high);
}

double population_after(const Fit& fit, const dynamics::Start& start, double length_s) {
  const Readout nothing{Readout::Kind::gaussian, {}, {}};
  ScanBatch flop;
  ObjectiveWorkspace work;
  const ScanObjective objective(flop, nothing, fit.prior, fit.chosen, {}, fit.negative_contrast, work);
  double population = kUnknown;
  dynamics::Derivatives out;
  out.population = {&population, 1};
  dynamics::Status status = dynamics::Status::ok;
  dynamics::ensemble_duration_scan(fit.rates, objective.ensemble(fit.physical), start, {&length_s, 1}, 0.0, out, {}, status, work.ensemble);
  return status == dynamics::Status::ok ? population : kUnknown;
}

}  // namespace halfturn::infer
