// SPDX-License-Identifier: Apache-2.0
#include "model/infer/fit.hpp"

#include <algorithm>
#include <cmath>

#include "model/infer/solution.hpp"

namespace halfturn::infer {
namespace {

constexpr std::size_t kMostModes = 16;
// Delta is left out of a flop where even 3 sigma of it would change the frequency by less than this part.
constexpr double kNegligibleDetuning = 1e-5;

/// The prior without a detuning too small to be felt at the frequencies found.
Prior felt(const Prior& prior, std::span<const Mode> starts) {
  Prior reduced = prior;
  if (!prior.detuning) return reduced;
  const double most = std::abs(prior.detuning->mean) + 3.0 * prior.detuning->sigma;
  double slowest = std::numeric_limits<double>::infinity();
  for (const auto& start : starts) slowest = std::min(slowest, start.start.generalised);
  if (0.5 * most * most < kNegligibleDetuning * slowest * slowest) reduced.detuning.reset();
  return reduced;
}

void fit_one(const ScanBatch& scan, std::size_t site, const Prior& prior, const FitOptions& options, Fit& fit, FitWorkspace& work) {
  fit = Fit{};
  fit.axis = scan.kind;
  fit.sampling = sampling_of(scan.kind, scan.axis);
  for (const double at : scan.axis) fit.longest = std::max(fit.longest, at);
  const Readout readout = scan.site(site);
  fit.quality.points = measured_points(readout);
  fit.pulse_length_s.clear();
  // Four parameters at least, and one degree of freedom that AICc needs beyond them and one more.
  if (fit.quality.points < 7 || fit.sampling.distinct < 5) {
    fit.outcome = FitOutcome::too_few_points;
    return;
  }
  work.objective.reserve(scan.points());
  std::array<Mode, kMostModes> starts;
  const auto find = scan.kind == Axis::duration ? duration_starts : line_starts;
  const std::size_t count = find(scan, readout, prior, fit.sampling, starts, work.search);
  const Prior known = felt(prior, {starts.data(), count});
  const Problem problem{scan, readout, known, options, fit.sampling, fit.quality.points};
  const auto modes = refine_modes(problem, {starts.data(), count}, work);
  if (modes.empty()) return;

  fit.quality = judge(problem, modes.front().best(), work);
  FitQuality of_choice = fit.quality;
  const std::size_t chosen = choose_mode(problem, modes, of_choice);
  if (chosen != 0) {
    fit.quality = judge(problem, modes[chosen].best(), work);
    fit.quality.outside_expect = of_choice.outside_expect;
    fit.quality.by_history = of_choice.by_history;
    fit.quality.rival = of_choice.rival;
  } else {
    fit.quality = of_choice;
  }
  estimate(problem, modes[chosen], fit, work);
  fit.outcome = FitOutcome::fitted;
}

}  // namespace

void fit(const ScanBatch& scans, std::span<const Prior> priors, const FitOptions& options, std::span<Fit> fits, FitWorkspace& work) {
  for (std::size_t site = 0; site < fits.size(); ++site) fit_one(scans, site, priors[site], options, fits[site], work);
}

bool overlay(const ScanBatch& scan, const Prior& prior, const Fit& fit, std::span<const double> axis, double z, std::span<double> signal,
             std::span<double> low, std::span<double> high) {
  if (fit.outcome != FitOutcome::fitted) return false;
  ScanBatch drawn = scan;
  drawn.axis = axis;
  drawn.references.reset();
  const Readout nothing{scan.readout, {}, {}};
  ObjectiveWorkspace work;
  work.reserve(axis.size());
  // Whether Delta was fitted follows from the number of parameters.
  Prior known = prior;
  ScanObjective objective(drawn, nothing, known, fit.chosen, {}, fit.negative_contrast, work);
  if (objective.layout().count != fit.x.size()) known.detuning.reset();
  const ScanObjective curve(drawn, nothing, known, fit.chosen, {}, fit.negative_contrast, work);
  return curve.layout().count == fit.x.size() && curve.draw(fit.x, fit.covariance, z, signal, low, high);
}

}  // namespace halfturn::infer
