// SPDX-License-Identifier: Apache-2.0
#include "tests/campaign/held.hpp"

#include <algorithm>
#include <cmath>

#include "model/infer/outliers.hpp"
#include "model/infer/scan_objective.hpp"
#include "plugin/service/known.hpp"

namespace halfturn::campaign {
namespace {

// Where a simple candidate was chosen and the simple ones are so far from excluding a value, the others need not be asked: they take less
// off the deviance than their parameters cost, or they would have been chosen.
constexpr double kPlainlyHeld = 15;

/// A damping of the middling sort for a candidate that was not the one chosen.
void begin_damping(infer::Dynamics dynamics, infer::Physical& start) {
  using infer::Dynamics;
  start.damping = dynamics == Dynamics::undamped ? 0 : 0.02 * start.generalised;
  start.dephasing = start.damping;
  const double wide = dynamics == Dynamics::spread ? 0.03 : dynamics == Dynamics::doppler ? 0.2 * start.generalised : 0.15;
  start.breadth = dynamics == Dynamics::thermal ? 3 : wide * wide;
}

/// Starting points near which the least deviance is looked for under a candidate.
std::vector<infer::Physical> starts(const Case& of, const infer::Fit& fit, infer::Dynamics dynamics) {
  const auto& t = of.truth;
  infer::Physical truth = fit.physical;
  truth.generalised = t.line ? t.rabi : t.generalised();
  truth.line_offset = t.line ? t.detuning : 0;
  truth.detuning_square = t.line ? 0 : t.detuning * t.detuning;
  truth.dead_time = t.dead_time;
  truth.signal_ground = std::clamp(t.ground, 0.005, 0.995);
  truth.signal_excited = std::clamp(t.excited, 0.005, 0.995);
  infer::Physical mixed = fit.physical;
  mixed.dead_time = t.dead_time;
  std::vector<infer::Physical> all = {fit.physical, truth, mixed};
  for (auto& start : all)
    if (dynamics != fit.chosen) {
      // The peak coupling of an ensemble is not what another candidate's oscillation begins with.
      if (!t.line && start.generalised == fit.physical.generalised) start.generalised = fit.generalised.value;
      begin_damping(dynamics, start);
    }
  return all;
}

/// One scan under one prior, for objectives of any dynamics.
struct Question {
  service::ModelScan scan;
  infer::Readout readout;
  infer::Prior prior;
  infer::ObjectiveWorkspace work;
  std::vector<double> progress, odds;

  Question(const Case& of, const infer::Fit& fit) : scan(service::model_scan(of.scan)), readout(scan.batch.site(0)), prior(fit.prior) {
    odds.resize(fit.outlier_share > 0 ? of.scan.axis.size() : 0);
    if (!odds.empty()) infer::outlier_odds(readout, fit.outlier_share, odds);
    readout.odds = odds;
    readout.dispersion = fit.dispersion;
    work.reserve(of.scan.axis.size());
    scan.batch.progress = infer::progress_of(scan.batch, progress);
  }
  infer::ScanObjective objective(infer::Dynamics dynamics, infer::Lead lead, bool negative) {
    return {scan.batch, readout, prior, dynamics, lead, negative, work};
  }
};

}  // namespace

double held_against(const Case& of, const infer::Fit& fit, std::size_t pulse, double value) {
  if (fit.outcome != infer::FitOutcome::fitted) return std::nan("");
  Question question(of, fit);
  if (of.misstated) question.prior.dead_time.sigma = std::abs(of.truth.dead_time - question.prior.dead_time.mean);
  infer::Lead lead;
  if (!of.truth.line) lead = {infer::Lead::Kind::pulse_length, of.drive.pulses[pulse].angle_rad, of.drive.pulses[pulse].area_factor};
  double held = INFINITY, free = INFINITY;
  const auto between = [&] { return 2 * (held - free) * fit.dispersion / fit.quality.scatter; };
  auto order = infer::kAllDynamics;
  std::stable_partition(order.begin(), order.end(), infer::is_simple);
  for (const auto dynamics : order) {
    if (!question.prior.candidates.has(dynamics)) continue;
    if (!infer::is_simple(dynamics) && infer::is_simple(fit.chosen) && between() < kPlainlyHeld) break;
    for (const auto& start : starts(of, fit, dynamics)) {
      const auto objective = question.objective(dynamics, lead, start.contrast() < 0);
      auto bounds = objective.bounds();
      auto x = objective.pack(start);
      const auto unbound = infer::minimise(objective, x, bounds);
      if (std::isfinite(unbound.value)) free = std::min(free, unbound.value);
      const int slot = of.truth.line ? objective.layout().line_offset : objective.layout().lead;
      x[slot] = bounds.lower[slot] = bounds.upper[slot] = value;
      const auto bound = infer::minimise(objective, x, bounds);
      if (std::isfinite(bound.value)) held = std::min(held, bound.value);
    }
  }
  return between();
}

double rabi_under_truth(const Case& of, const infer::Fit& fit) {
  const auto dynamics = infer::dynamics_named(of.true_dynamics);
  if (!dynamics || fit.outcome != infer::FitOutcome::fitted) return std::nan("");
  Question question(of, fit);
  const auto start = starts(of, fit, *dynamics).front();  // that of the answer: its mode is kept
  const auto objective = question.objective(*dynamics, {infer::Lead::Kind::bare}, start.contrast() < 0);
  const auto minimum = infer::minimise(objective, objective.pack(start), objective.bounds());
  return std::isfinite(minimum.value) ? minimum.x[objective.layout().lead] : std::nan("");
}

Case noiseless(const Case& of) {
  Case quiet = of;
  for (std::size_t i = 0; i < of.expected.size(); ++i) quiet.scan.observed[0][i] = of.expected[i] * of.scan.weight[0][i];
  return quiet;
}

infer::Fit fit_of(const Case& of) {
  std::vector<std::string> assumed;
  const auto prior = service::prior_for(&of.drive, {}, of.scan, {}, 0, assumed);
  const auto scan = service::model_scan(of.scan);
  thread_local infer::FitWorkspace workspace;
  infer::Fit fit;
  infer::fit(scan.batch, {&prior, 1}, service::fit_options(&of.drive, {}), {&fit, 1}, workspace);
  return fit;
}

double left_by_one_line(const Case& of) {
  const auto fit = fit_of(noiseless(of));
  return fit.outcome == infer::FitOutcome::fitted ? fit.quality.deviance : INFINITY;
}

}  // namespace halfturn::campaign
