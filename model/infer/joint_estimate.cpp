// SPDX-License-Identifier: Apache-2.0
#include <algorithm>
#include <cmath>

#include "model/infer/conditioning.hpp"
#include "model/infer/estimate.hpp"
#include "model/infer/joint_solution.hpp"
#include "model/infer/rules.hpp"
#include "model/infer/statistics.hpp"
#include "model/quantity/constants.hpp"

/// From a mode of a joint fit to estimates, as estimate.cpp does it for one scan.
namespace halfturn::infer {
namespace {

/// The average over candidates of the coordinate that `slot` picks, the best with its profile interval.
template <class Slot>
Estimate over_candidates(const JointProblem& problem, const JointMode& mode, const Fit& fit, Lead lead, const Scale& scale, Slot slot, FitWorkspace& work) {
  std::array<Part, kDynamicsCount> parts;
  std::size_t count = 0;
  for (std::size_t i = 0; i < mode.solutions.size(); ++i) {
    const auto& solution = mode.solutions[i];
    if (i > 0 && fit.candidates[i].weight < kWeightHeard) continue;
    const JointObjective objective = objective_of(problem, solution, lead, work);
    Minimum minimum = solution.minimum;
    minimum.x = objective.pack(solution.physical);
    objective.evaluate(minimum.x, minimum.value, &minimum.gradient, &minimum.information);
    const int index = slot(objective.layout());
    const double variance = covariance_of(minimum)(index, index);
    parts[count++] = {fit.candidates[i].weight, i == 0 ? profiled(objective, objective.bounds(), minimum, index, variance, scale)
                                                       : from_covariance(minimum.x[index], variance, scale)};
  }
  return averaged({parts.data(), count}, scale);
}

/// What is the reference scan's own, and what follows from it.
void fill_reference(const JointProblem& problem, const JointSolution& best, const Scale& scale, Fit& fit, FitWorkspace& work) {
  const Problem one = problem.problem(problem.reference);
  const JointObjective joint = objective_of(problem, best, {Lead::Kind::bare}, work);
  const ScanObjective own(one.scan, one.readout, one.prior, best.dynamics, {}, best.negative[problem.reference], work.objective);
  fit.chosen = best.dynamics;
  fit.physical = joint.of_scan(problem.reference, best.physical);
  fit.rates = own.rates(fit.physical);
  fit.negative_contrast = best.negative[problem.reference];
  fit.prior = one.prior;
  fit.outlier_share = problem.alone[problem.reference].outlier_share;
  fit.dispersion = one.readout.dispersion;
  fit.x = own.pack(fit.physical);
  fit.covariance = covariance_of_part(own, joint, problem.reference, best) * scale.scatter;
  fit.quality.conditioning = conditioning(own, part_minimum(own, joint, problem.reference, best));
  fill_from_covariance(one, own, scale, fit, work);
  fit.mean_factor = own.mean_factor(fit.physical);
  if (!problem.lines || !problem.flops) return;
  // Pulses are for a carrier on the line.
  fit.rates.rabi = best.physical.rabi;
  fit.rates.detuning = 0.0;
}

void fill_axis(const JointProblem& problem, Axis kind, Fit& fit) {
  fit.axis = kind;
  fit.sampling = {};
  fit.lowest = std::numeric_limits<double>::infinity();
  fit.longest = -fit.lowest;
  for (std::size_t i = 0; i < problem.scans.size(); ++i) {
    const auto& scan = problem.scans[i];
    if (scan.batch.kind != kind) continue;
    const auto [low, high] = std::minmax_element(scan.batch.axis.begin(), scan.batch.axis.end());
    const double shift = kind == Axis::detuning ? scan.carrier : 0.0;
    fit.lowest = std::min(fit.lowest, *low + shift);
    fit.longest = std::max(fit.longest, *high + shift);
    const Sampling& s = problem.sampling[i];
    fit.sampling.spacing = fit.sampling.distinct == 0 ? s.spacing : std::min(fit.sampling.spacing, s.spacing);
    fit.sampling.span = std::max(fit.sampling.span, s.span);
    fit.sampling.limit = std::max(fit.sampling.limit, s.limit);
    fit.sampling.distinct += s.distinct;
  }
}

}  // namespace

void estimate_joint(const JointProblem& problem, const JointMode& mode, double scatter, JointFit& out, FitWorkspace& work) {
  const Scale scale(scatter, problem.options.level);
  Fit& fit = out.fit;
  weigh(mode.solutions, scatter, fit);
  fill_axis(problem, problem.flops ? Axis::duration : Axis::detuning, fit);
  fill_reference(problem, mode.best(), scale, fit, work);
  const auto lead_slot = [](const JointLayout& layout) { return layout.lead; };
  const auto offset_slot = [](const JointLayout& layout) { return layout.offset; };
  const auto lead = [&](Lead by) { return over_candidates(problem, mode, fit, by, scale, lead_slot, work); };
  const auto layout = objective_of(problem, mode.best(), {}, work).layout();
  const bool ensembles = std::any_of(mode.solutions.begin(), mode.solutions.end(), [](const auto& s) { return is_ensemble(s.dynamics); });
  const bool detuned = !problem.lines && (layout.offset >= 0 || layout.detuning_square >= 0);
  fit.generalised = lead({ensembles ? Lead::Kind::mean : Lead::Kind::generalised});
  fit.rabi = ensembles || detuned ? lead({Lead::Kind::bare}) : fit.generalised;
  fit.rabi_mean = detuned ? times(fit.rabi, fit.mean_factor) : fit.generalised;
  fit.line_offset = {};
  fit.line_offset.why = kNotThisScan;
  if (problem.lines) fit.line_offset = over_candidates(problem, mode, fit, {Lead::Kind::bare}, scale, offset_slot, work);
  fit.pulse_length_s.clear();
  if (problem.flops)
    for (const auto& pulse : problem.options.pulses) fit.pulse_length_s.push_back(lead({Lead::Kind::pulse_length, pulse.angle_rad, pulse.area_factor}));
  fit.quality.cycles = problem.flops ? fit.generalised.low * fit.sampling.span / constants::kTwoPi : kUnknown;
  if (!problem.lines) return;
  Fit line = fit;
  fill_axis(problem, Axis::detuning, line);
  line.pulse_length_s.clear();
  line.generalised = {kUnknown, kUnknown, kUnknown, kUnknown, kNotThisScan};
  line.quality.cycles = kUnknown;
  if (problem.flops) out.line = std::move(line);
  else fit = std::move(line);
}

}  // namespace halfturn::infer
