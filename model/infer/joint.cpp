// SPDX-License-Identifier: Apache-2.0
#include "model/infer/joint.hpp"

#include <algorithm>
#include <cmath>

#include "model/infer/joint_solution.hpp"
#include "model/infer/outliers.hpp"
#include "model/infer/shown.hpp"
#include "model/infer/statistics.hpp"

namespace halfturn::infer {
namespace {

constexpr std::size_t kMostStarts = 16;
// A disagreement as improbable as the first of these begins to widen every error; at the second it does in full, to where the scans
// would agree (R. T. Birge, Phys. Rev. 40, 207 (1932)).
constexpr double kWideningBegins = 0.1, kWideningFull = 0.01;

/// The alone fit of each scan, and what it says of its readout and its prior. False where one could not be fitted.
bool fit_alone(JointProblem& problem, JointFit& out, FitWorkspace& work) {
  FitOptions options = problem.options;
  options.pulses.clear();
  options.second_level = 0.0;
  for (std::size_t i = 0; i < problem.scans.size(); ++i) {
    auto& [batch, prior, carrier] = problem.scans[i];
    Fit& alone = problem.alone.emplace_back();
    fit(batch, {&prior, 1}, options, {&alone, 1}, work);
    if (alone.outcome != FitOutcome::fitted) {
      out.fit = alone;
      out.fit.quality.of_scan = out.reference = i;
      return false;
    }
    prior = alone.prior;
    prior.drift.reset();
    problem.sampling.push_back(alone.sampling);
    problem.measured.push_back(measured_points(batch.site(0)));
  }
  return true;
}

/// A dead time that one scan contradicts holds none of them.
void share_dead_time(JointProblem& problem) {
  Known widest = problem.scans[0].prior.dead_time;
  for (const auto& scan : problem.scans)
    if (scan.prior.dead_time.sigma > widest.sigma) widest = scan.prior.dead_time;
  for (auto& scan : problem.scans) scan.prior.dead_time = widest;
}

/// Readouts with the scatter and the outliers that each scan shows alone.
void take_readouts(JointProblem& problem) {
  problem.odds.resize(problem.scans.size());
  for (std::size_t i = 0; i < problem.scans.size(); ++i) {
    Readout readout = problem.scans[i].batch.site(0);
    const Fit& alone = problem.alone[i];
    if (alone.outlier_share > 0.0) {
      problem.odds[i].resize(problem.scans[i].batch.points());
      outlier_odds(readout, alone.outlier_share, problem.odds[i]);
      readout.odds = problem.odds[i];
    }
    readout.dispersion = std::max(1.0, alone.quality.scatter);
    problem.readouts.push_back(readout);
  }
}

void describe(JointProblem& problem, FitWorkspace& work) {
  const auto& scans = problem.scans;
  const auto flop = std::find_if(scans.begin(), scans.end(), [](const auto& s) { return s.batch.kind == Axis::duration; });
  problem.flops = flop != scans.end();
  problem.reference = problem.flops ? static_cast<std::size_t>(flop - scans.begin()) : 0;
  for (std::size_t i = 0; i < scans.size(); ++i) {
    const bool line = scans[i].batch.kind == Axis::detuning;
    problem.lines = problem.lines || line;
    work.objective.reserve(scans[i].batch.points());
    if (line == !problem.flops) problem.longest = std::max(problem.longest, line ? scans[i].batch.pulse_length_s : problem.sampling[i].span);
    if (!line) problem.limit = std::max(problem.limit, problem.sampling[i].limit);
  }
}

/// In how many scans a parameter is free that the joint fit shares, less one for each such parameter.
int shared_parameters(const JointProblem& problem, const JointSolution& best, FitWorkspace& work) {
  const JointObjective joint = objective_of(problem, best, {Lead::Kind::bare}, work);
  int shared = 0;
  for (const auto slot : {&Layout::lead, &Layout::line_offset, &Layout::dead_time, &Layout::damping, &Layout::dephasing, &Layout::breadth}) {
    int free = 0;
    for (std::size_t i = 0; i < joint.scans(); ++i) free += joint.scan(i).layout().*slot >= 0 ? 1 : 0;
    shared += std::max(0, free - 1);
  }
  return shared;
}

Disagreement disagreement_of(const JointProblem& problem, const JointSolution& best, const JointFit& out, FitWorkspace& work) {
  Disagreement found;
  found.dof = shared_parameters(problem, best, work);
  for (std::size_t i = 0; i < out.parts.size(); ++i) {
    const double strain = out.parts[i].strain;
    found.deviance += strain;
    if (!(strain <= found.of_scan)) found.scan = i, found.of_scan = strain;
  }
  found.p_value = std::isfinite(found.deviance) ? chi_square_tail(found.deviance, found.dof) : 0.0;
  return found;
}

/// One quality of all: sums, the worst scan, and for evidence the sum over scans of a kind, the lesser of both kinds.
FitQuality combined(const JointProblem& problem, const std::vector<FitQuality>& parts) {
  FitQuality all;
  all.deviance = all.dof = all.p_value = 0.0;
  all.p_after_scatter = 1.0;
  all.over_flat = all.over_monotone = std::numeric_limits<double>::infinity();
  double fisher = 0.0, worst = 1.0, most_distrusted = -1.0;
  for (std::size_t i = 0; i < parts.size(); ++i) {
    const FitQuality& q = parts[i];
    all.deviance += q.deviance;
    all.dof += q.dof;
    all.points += q.points;
    const double p = std::isfinite(q.p_value) ? q.p_value : 1.0;
    fisher -= 2.0 * std::log(std::max(p, 1e-300));
    all.scatter = std::max(all.scatter, q.scatter);
    if (q.scatter > 1.0) all.p_after_scatter = std::min(all.p_after_scatter, q.p_after_scatter);
    if (i == 0 || p < worst) worst = p, all.of_scan = i;
    const double share = static_cast<double>(q.distrusted.size()) / q.points + (q.distrusted.empty() ? 0.0 : 1.0 - q.p_together);
    if (share > most_distrusted) {
      most_distrusted = share;
      all.distrusted = q.distrusted;
      all.distrusted_at = q.distrusted_at;
      all.p_together = q.p_together;
      all.distrusted_of = i;
      all.distrusted_axis = problem.scans[i].batch.kind;
      all.distrusted_points = q.points;
    }
    all.line_width = std::isfinite(all.line_width) ? std::min(all.line_width, q.line_width) : q.line_width;
  }
  // R. A. Fisher, Statistical Methods for Research Workers, 4th ed. (1932), section 21.1; and Bonferroni over the scans.
  const double count = static_cast<double>(parts.size());
  all.p_value = std::min({1.0, chi_square_tail(fisher, 2.0 * count), count * worst});
  for (const Axis kind : {Axis::duration, Axis::detuning}) {
    double flat = 0.0, monotone = 0.0;
    for (std::size_t i = 0; i < parts.size(); ++i)
      if (problem.scans[i].batch.kind == kind) flat += parts[i].over_flat, monotone += parts[i].over_monotone;
    if (!(kind == Axis::duration ? problem.flops : problem.lines)) continue;
    all.over_flat = std::min(all.over_flat, flat);
    all.over_monotone = std::min(all.over_monotone, monotone);
  }
  return all;
}

/// Range of frequencies: what the scans allow together.
void fill_range(const JointProblem& problem, const std::vector<FitQuality>& parts, FitQuality& quality) {
  for (std::size_t i = 0; i < parts.size(); ++i) {
    if (problem.scans[i].batch.kind != Axis::duration) continue;
    quality.range_low = std::isfinite(quality.range_low) ? std::min(quality.range_low, parts[i].range_low) : parts[i].range_low;
    quality.range_high = std::isfinite(quality.range_high) ? std::max(quality.range_high, parts[i].range_high) : parts[i].range_high;
  }
}

/// By how much errors are widened beyond the scatter that the readouts hold: the most of any scan, with Student's factor as in
/// under_prior.cpp, or until the scans agree.
double widening(const JointProblem& problem, const std::vector<FitQuality>& parts, const Disagreement& disagreement) {
  double most = 1.0;
  for (std::size_t i = 0; i < parts.size(); ++i) {
    const double dof = std::max(parts[i].dof, 4.0), few = parts[i].scatter > 1.0 ? dof / (dof - 2.0) : 1.0;
    most = std::max(most, parts[i].scatter / problem.readouts[i].dispersion * few);
  }
  if (!(disagreement.p_value < kWideningBegins) || disagreement.dof == 0) return most;
  const double counted = std::clamp((kWideningBegins - disagreement.p_value) / (kWideningBegins - kWideningFull), 0.0, 1.0);
  return std::max(most, 1.0 + counted * std::max(0.0, disagreement.deviance / disagreement.dof - 1.0));
}

void conclude(const JointProblem& problem, std::span<const JointMode> modes, JointFit& out, FitWorkspace& work) {
  std::vector<FitQuality> parts = judge_parts(problem, modes.front().best(), out, work);
  const double line_width = combined(problem, parts).line_width;
  Disagreement disagreement = disagreement_of(problem, modes.front().best(), out, work);
  const JointChoice choice = choose_joint(problem, modes, widening(problem, parts, disagreement), line_width, work);
  const JointMode& mode = modes[choice.chosen];
  if (choice.chosen != 0) {
    parts = judge_parts(problem, mode.best(), out, work);
    disagreement = disagreement_of(problem, mode.best(), out, work);
  }
  out.fit.quality = combined(problem, parts);
  fill_range(problem, parts, out.fit.quality);
  out.fit.quality.disagreement = disagreement;
  out.fit.quality.outside_expect = choice.outside_expect;
  out.fit.quality.by_history = choice.by_history;
  for (const auto& alone : problem.alone) {
    out.fit.quality.dead_time_released = out.fit.quality.dead_time_released || alone.quality.dead_time_released;
    out.fit.quality.readout_released = out.fit.quality.readout_released || alone.quality.readout_released;
  }
  out.fit.outcome = FitOutcome::fitted;
  estimate_joint(problem, mode, widening(problem, parts, disagreement), out, work);
  if (out.line) out.line->quality.rival = choice.line_rival;
  out.fit.quality.rival = problem.flops ? choice.rival : choice.line_rival;
  withhold_unshown(problem.options, out.fit);
  if (out.line) withhold_unshown(problem.options, *out.line);
}

}  // namespace

int joint_parameters(std::span<const JointScan> scans, Dynamics candidate) {
  const auto priors = counted_once(scans);
  const std::vector<Readout> nothing(scans.size());
  ObjectiveWorkspace none;
  return JointObjective(scans, nothing, priors, candidate, {}, {}, none).layout().count;
}

void fit_joint(std::span<const JointScan> scans, const FitOptions& options, JointFit& out, FitWorkspace& work) {
  out = JointFit{};
  JointProblem problem{.scans = {scans.begin(), scans.end()}, .options = options};
  if (!fit_alone(problem, out, work)) return;
  share_dead_time(problem);
  take_readouts(problem);
  problem.priors = counted_once(problem.scans);
  describe(problem, work);
  out.reference = problem.reference;
  const auto starts = joint_starts(problem, kMostStarts, work);
  const auto modes = refine_joint(problem, starts, work);
  out.fit.outcome = FitOutcome::not_converged;
  if (!modes.empty()) conclude(problem, modes, out, work);
}

}  // namespace halfturn::infer
