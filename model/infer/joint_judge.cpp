// SPDX-License-Identifier: Apache-2.0
#include <algorithm>
#include <cmath>

#include "model/infer/estimate.hpp"
#include "model/infer/joint_solution.hpp"

/// What each scan says of a joint fit.
namespace halfturn::infer {
namespace {

/// The scan's own objective with a detuning that is held where the joint fit has it: the points of a flop have no say in it.
Prior held_detuning(const JointProblem& problem, std::size_t i, const Physical& joint) {
  Prior prior = problem.scans[i].prior;
  if (problem.scans[i].batch.kind == Axis::duration) prior.detuning = Known{std::sqrt(joint.detuning_square), 0.0};
  return prior;
}

/// Twice what the scan alone gains by leaving the joint values: for the nearest minimum, or for one of its own elsewhere where that
/// gains more than a rival may. Another mode that fits a little better is chance.
double strain(const JointProblem& problem, std::size_t i, Dynamics dynamics, bool negative, const Physical& joint, FitWorkspace& work) {
  const Prior prior = held_detuning(problem, i, joint);
  const auto& scan = problem.scans[i].batch;
  const ScanObjective together(scan, problem.readouts[i], prior, dynamics, {}, negative, work.objective);
  double value = 0.0;
  if (!together.evaluate(together.pack(joint), value, nullptr, nullptr)) return kUnknown;
  const auto near = minimise(together, together.pack(joint), together.bounds());
  const double local = std::isfinite(near.value) ? 2.0 * (value - near.value) : 0.0;
  const Fit& own = problem.alone[i];
  Physical start = own.physical;
  start.detuning_square = joint.detuning_square;
  start.damping = joint.damping;
  start.dephasing = joint.dephasing;
  start.breadth = joint.breadth;
  const ScanObjective apart(scan, problem.readouts[i], prior, dynamics, {}, own.negative_contrast, work.objective);
  const auto far = minimise(apart, apart.pack(start), apart.bounds());
  const double gained = std::isfinite(far.value) ? 2.0 * (value - far.value) : 0.0;
  return std::max(0.0, gained > problem.options.rival_margin ? std::max(local, gained) : local);
}

}  // namespace

Matrix covariance_of_part(const ScanObjective& own, const JointObjective& joint, std::size_t i, const JointSolution& solution) {
  Matrix by = joint.jacobian(i, solution.physical);
  const Physical p = joint.of_scan(i, solution.physical);
  const auto& at = own.layout();
  // From the bare coupling to the generalised frequency.
  by.row(at.lead) *= p.rabi() / p.generalised;
  if (at.detuning_square >= 0) by.row(at.lead) += 0.5 / p.generalised * by.row(at.detuning_square);
  return by * covariance_of(solution.minimum) * by.transpose();
}

Minimum part_minimum(const ScanObjective& own, const JointObjective& joint, std::size_t i, const JointSolution& solution) {
  const Physical p = joint.of_scan(i, solution.physical);
  Minimum minimum;
  minimum.x = own.pack(p);
  minimum.information = covariance_of_part(own, joint, i, solution);
  minimum.information = covariance_of(minimum);
  if (!minimum.information.allFinite()) {
    double value = 0.0;
    own.evaluate(minimum.x, value, nullptr, &minimum.information);
  }
  // What the joint fit holds at a bound has no variance, and so no information here.
  for (Eigen::Index k = 0; k < minimum.x.size(); ++k)
    if (!(minimum.information(k, k) > 0.0)) minimum.at_bound[static_cast<std::size_t>(k)] = -1;
  return minimum;
}

std::vector<FitQuality> judge_parts(const JointProblem& problem, const JointSolution& solution, JointFit& fit, FitWorkspace& work) {
  const JointObjective joint = objective_of(problem, solution, {Lead::Kind::bare}, work);
  std::vector<FitQuality> qualities;
  fit.parts.clear();
  for (std::size_t i = 0; i < problem.scans.size(); ++i) {
    const Problem one = problem.problem(i);
    const ScanObjective own(one.scan, one.readout, one.prior, solution.dynamics, {}, solution.negative[i], work.objective);
    Solution of_scan;
    of_scan.dynamics = solution.dynamics;
    of_scan.negative_contrast = solution.negative[i];
    of_scan.physical = joint.of_scan(i, solution.physical);
    of_scan.minimum = part_minimum(own, joint, i, solution);
    const FitQuality q = qualities.emplace_back(judge(one, of_scan, work));
    fit.parts.push_back({q.deviance, q.dof, q.p_value, q.scatter, q.points, q.distrusted,
                         strain(problem, i, solution.dynamics, solution.negative[i], of_scan.physical, work)});
  }
  return qualities;
}

}  // namespace halfturn::infer
