// SPDX-License-Identifier: Apache-2.0
#include <algorithm>
#include <cmath>

#include "model/infer/joint_solution.hpp"
#include "model/infer/line_modes.hpp"
#include "model/infer/rules.hpp"
#include "model/quantity/constants.hpp"

/// The choice among modes of a joint fit, by the rules of choose.cpp.
namespace halfturn::infer {
namespace {

using constants::kTwoPi;

double data_deviance(const JointProblem& problem, const JointSolution& solution, FitWorkspace& work) {
  const JointObjective objective = objective_of(problem, solution, {Lead::Kind::bare}, work);
  double sum = 0.0;
  for (std::size_t i = 0; i < problem.scans.size(); ++i) {
    double half = 0.0;
    if (!objective.scan(i).data_part(objective.of_scan(i, solution.physical), half, {})) return std::numeric_limits<double>::infinity();
    sum += 2.0 * half;
  }
  return sum;
}

bool allowed(const JointProblem& problem, const JointMode& mode) {
  if (!problem.flops) return true;
  const double rabi = mode.best().apparent;
  const auto& expect = problem.of_reference().prior.expect;
  return expect ? rabi >= expect->low && rabi <= expect->high : rabi <= problem.limit;
}

std::size_t first_choice(const JointProblem& problem, std::span<const JointMode> modes, FitWorkspace& work) {
  if (allowed(problem, modes[0])) return 0;
  const double best = data_deviance(problem, modes[0].best(), work);
  for (std::size_t i = 1; i < modes.size(); ++i)
    if (allowed(problem, modes[i]) && data_deviance(problem, modes[i].best(), work) < best + kExpectDecides) return i;
  return 0;
}

/// Whether the duration scans all have one even grid.
bool on_one_grid(const JointProblem& problem) {
  for (std::size_t i = 0; i < problem.scans.size(); ++i)
    if (problem.scans[i].batch.kind == Axis::duration &&
        (!problem.sampling[i].even || std::abs(problem.sampling[i].limit / problem.limit - 1.0) > 1e-3))
      return false;
  return true;
}

void take_nearest(std::optional<RivalMode>& rival, const RivalMode& other) {
  if (!rival || other.deviance_above < rival->deviance_above) rival = other;
}

/// What is held against a mode of lines for its pulse area.
double area(const JointProblem& problem, const JointSolution& solution) {
  Solution of_scan;
  of_scan.physical.generalised = solution.physical.rabi;
  return held_by_area(problem.problem(problem.reference), of_scan);
}

/// Counts a mode among the rivals: of the frequency where that differs, and of the line.
void weigh_rival(const JointProblem& problem, const JointSolution& chosen, const JointSolution& other, double scatter, double line_width, JointChoice& choice) {
  const double above = std::max(0.0, (other.aicc - chosen.aicc) / scatter + (problem.flops ? 0.0 : area(problem, other) - area(problem, chosen)));
  const bool opposite = other.negative[problem.reference] != chosen.negative[problem.reference];
  const bool another = other.negative != chosen.negative || std::abs(other.apparent - chosen.apparent) >= kTwoPi * 0.35 / problem.longest;
  if (problem.flops && another) take_nearest(choice.rival, {other.apparent, above, opposite});
  const bool one_line = std::abs(other.physical.offset - chosen.physical.offset) < 0.1 * line_width;
  if (problem.lines && !same_line(problem, other.physical.offset, chosen.physical.offset) && !one_line)
    take_nearest(choice.line_rival, {other.physical.offset, above, false});
}

}  // namespace

JointChoice choose_joint(const JointProblem& problem, std::span<const JointMode> modes, double scatter, double line_width, FitWorkspace& work) {
  JointChoice choice;
  choice.chosen = first_choice(problem, modes, work);
  choice.outside_expect = !allowed(problem, modes[choice.chosen]);
  const auto competes = [&](std::size_t i) { return allowed(problem, modes[i]) || choice.outside_expect; };
  const double within = modes[choice.chosen].best().aicc + problem.options.rival_margin * scatter;
  std::vector<std::size_t> alike;
  for (std::size_t i = 0; i < modes.size(); ++i)
    if (i == choice.chosen || (competes(i) && modes[i].best().aicc < within)) alike.push_back(i);
  const Prior& prior = problem.of_reference().prior;
  if (prior.log_rabi && problem.flops)
    if (const auto known = choice_of_history(*prior.log_rabi, modes, alike, scatter, problem.options.rival_margin)) {
      choice.chosen = *known;
      choice.by_history = true;
      return choice;
    }
  const JointSolution& chosen = modes[choice.chosen].best();
  if (problem.flops && on_one_grid(problem)) choice.rival = mirror_image(chosen.apparent, problem.limit, problem.longest, prior.expect);
  for (std::size_t i = 0; i < modes.size(); ++i)
    if (i != choice.chosen && competes(i)) weigh_rival(problem, chosen, modes[i].best(), scatter, line_width, choice);
  return choice;
}

}  // namespace halfturn::infer
