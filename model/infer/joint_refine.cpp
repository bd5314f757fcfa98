// SPDX-License-Identifier: Apache-2.0
#include <algorithm>
#include <cmath>

#include "model/infer/joint_solution.hpp"
#include "model/infer/monotone.hpp"
#include "model/infer/rules.hpp"
#include "model/quantity/constants.hpp"

/// From starts of a joint fit to its modes under every candidate, as refine.cpp does it for one scan.
namespace halfturn::infer {
namespace {

using constants::kTwoPi;

/// What the reference scan makes of a joint solution.
Solution reference_solution(const JointProblem& problem, const JointSolution& joint, FitWorkspace& work) {
  const JointObjective objective = objective_of(problem, joint, {Lead::Kind::bare}, work);
  Solution solution;
  solution.dynamics = joint.dynamics;
  solution.negative_contrast = joint.negative[problem.reference];
  solution.physical = objective.of_scan(problem.reference, joint.physical);
  solution.apparent = objective.scan(problem.reference).apparent_frequency(solution.physical);
  return solution;
}

/// The joint start with coupling and damping of a start of the reference scan.
JointPhysical with_dynamics(const JointPhysical& joint, const Physical& reference) {
  JointPhysical p = joint;
  const double square = reference.generalised * reference.generalised;
  p.rabi = std::sqrt(std::max(0.01 * square, square - reference.detuning_square));
  p.damping = reference.damping;
  p.dephasing = reference.dephasing;
  p.breadth = reference.breadth;
  return p;
}

/// The place below a start under the softened likelihood of scans with outliers.
JointPhysical settled(const JointProblem& problem, const JointSolution& at, const JointPhysical& start, FitWorkspace& work) {
  if (std::all_of(problem.odds.begin(), problem.odds.end(), [](const auto& odds) { return odds.empty(); })) return start;
  std::vector<Readout> soft = problem.readouts;
  for (auto& readout : soft)
    if (!readout.odds.empty()) readout.odds = {}, readout.softness = kSoftness;
  const JointObjective objective(problem.scans, soft, problem.priors, at.dynamics, {Lead::Kind::bare}, at.negative, work.objective);
  const auto minimum = minimise(objective, objective.pack(start), objective.bounds());
  return std::isfinite(minimum.value) ? objective.unpack(minimum.x) : start;
}

std::optional<JointSolution> refine(const JointProblem& problem, Dynamics candidate, const Signs& negative, const JointPhysical& start, FitWorkspace& work) {
  if (joint_parameters(problem.scans, candidate) > kMaxParameters) return std::nullopt;
  JointSolution solution{.dynamics = candidate, .negative = negative};
  const JointObjective objective = objective_of(problem, solution, {Lead::Kind::bare}, work);
  solution.minimum = minimise(objective, objective.pack(settled(problem, solution, start, work)), objective.bounds());
  const auto& minimum = solution.minimum;
  const bool reached = minimum.outcome == Outcome::converged || (std::isfinite(minimum.value) && minimum.expected_decrease < 1e-3);
  if (!reached) return std::nullopt;
  solution.physical = objective.unpack(minimum.x);
  double n = 0.0;
  for (std::size_t i = 0; i < problem.scans.size(); ++i) {
    if ((solution.physical.excited[i] - solution.physical.ground[i] < 0.0) != negative[i]) return std::nullopt;  // crossed no contrast
    n += problem.measured[i] + (problem.scans[i].batch.references ? 2 : 0);
  }
  const auto& reference = objective.scan(problem.reference);
  const auto apparent = [&](const JointPhysical& p) { return reference.apparent_frequency(objective.of_scan(problem.reference, p)); };
  solution.apparent = apparent(solution.physical);
  // As in refine.cpp: what ran further than this has jumped to a mode that has a start of its own.
  if (problem.flops && std::abs(solution.apparent - apparent(start)) > kTwoPi * 1.5 / problem.longest) return std::nullopt;
  const double k = objective.layout().count;
  if (n - k - 1.0 < 1.0) return std::nullopt;
  solution.aicc = 2.0 * minimum.value + 2.0 * k + 2.0 * k * (k + 1.0) / (n - k - 1.0);
  return solution;
}

/// The first candidates that a start is refined under.
Dynamics first_candidate(const JointProblem& problem, bool damped) {
  const auto has = [&problem](Dynamics d) {
    return problem.of_reference().prior.candidates.has(d) && joint_parameters(problem.scans, d) <= kMaxParameters;
  };
  if (damped)
    for (const Dynamics candidate : {Dynamics::dephasing, Dynamics::decay, Dynamics::leak})
      if (has(candidate)) return candidate;
  for (const Dynamics candidate : kAllDynamics)
    if (has(candidate)) return candidate;
  return Dynamics::undamped;
}

void add_mode(const JointProblem& problem, std::vector<JointMode>& modes, JointSolution solution) {
  for (auto& mode : modes) {
    if (!same_joint_mode(problem, mode.best(), solution)) continue;
    if (solution.minimum.value < mode.best().minimum.value) mode.solutions.front() = std::move(solution);
    return;
  }
  modes.push_back({{std::move(solution)}});
}

void sort_candidates(JointMode& mode) {
  std::stable_sort(mode.solutions.begin(), mode.solutions.end(), [](const auto& a, const auto& b) { return a.aicc < b.aicc; });
}

/// Adds the candidates of a kind (simple or others) to a mode, each begun from its best.
void add_candidates(const JointProblem& problem, JointMode& mode, bool simple, FitWorkspace& work) {
  const JointSolution first = mode.best();
  const Solution from = reference_solution(problem, first, work);
  for (const Dynamics candidate : kAllDynamics) {
    if (is_simple(candidate) != simple || candidate == first.dynamics || !problem.of_reference().prior.candidates.has(candidate)) continue;
    for (const double factor : {1.0, 2.5, 0.4}) {
      const Physical start = start_for(problem.problem(problem.reference), candidate, from, factor, work);
      auto solution = refine(problem, candidate, first.negative, with_dynamics(first.physical, start), work);
      const bool found = solution && same_joint_mode(problem, first, *solution);
      if (found) mode.solutions.push_back(std::move(*solution));
      if (found || simple) break;
    }
  }
  sort_candidates(mode);
}

/// The candidates that are not simple, by the rule of refine.cpp: of the best modes that show a damping.
void add_others(const JointProblem& problem, std::vector<JointMode>& modes, FitWorkspace& work) {
  double flat = 0.0, monotone = 0.0;
  for (std::size_t i = 0; i < problem.scans.size(); ++i) {
    const auto plain = monotone_half_deviance(problem.readouts[i], problem.scans[i].batch.axis);
    flat += plain.flat;
    monotone += std::min(plain.rising, plain.falling);
  }
  const double best = modes.front().best().minimum.value;
  if (!(2.0 * (std::min(flat, monotone) - best) >= kShown)) return;
  const double worth_it = modes.front().best().aicc + kOthersWorthIt + kOthersShare * 2.0 * (flat - best);
  int refined = 0;
  for (auto& mode : modes) {
    if (refined == kModesOfOthers || !(mode.best().aicc < worth_it)) return;
    if (!shows_damping(problem.of_reference().prior.candidates, mode.solutions)) continue;
    add_candidates(problem, mode, false, work);
    ++refined;
  }
}

}  // namespace

JointObjective objective_of(const JointProblem& problem, const JointSolution& solution, Lead lead, FitWorkspace& work) {
  return {problem.scans, problem.readouts, problem.priors, solution.dynamics, lead, solution.negative, work.objective};
}

bool same_line(const JointProblem& problem, double a, double b) {
  if (!problem.lines) return true;
  double pulse = 0.0;
  for (const auto& scan : problem.scans) pulse = std::max(pulse, scan.batch.pulse_length_s);
  return std::abs(a - b) < kTwoPi * 0.2 / pulse;
}

bool same_joint_mode(const JointProblem& problem, const JointSolution& a, const JointSolution& b) {
  if (!same_line(problem, a.physical.offset, b.physical.offset)) return false;
  if (!problem.flops) return true;  // what lines alone are asked for is the centre
  if (a.negative != b.negative) return false;
  return std::abs(a.apparent - b.apparent) < kTwoPi * 0.35 / problem.longest;
}

std::vector<JointMode> refine_joint(const JointProblem& problem, std::span<const JointStart> starts, FitWorkspace& work) {
  std::vector<JointMode> modes;
  for (const auto& start : starts) {
    const Dynamics candidate = first_candidate(problem, start.damped);
    JointSolution begun{.dynamics = Dynamics::dephasing, .negative = start.negative, .physical = start.physical};
    const Solution from = reference_solution(problem, begun, work);
    const Physical first = start_for(problem.problem(problem.reference), candidate, from, 1.0, work);
    if (auto solution = refine(problem, candidate, start.negative, with_dynamics(start.physical, first), work)) add_mode(problem, modes, std::move(*solution));
  }
  const auto by_deviance = [](const JointMode& a, const JointMode& b) { return a.best().minimum.value < b.best().minimum.value; };
  std::stable_sort(modes.begin(), modes.end(), by_deviance);
  if (modes.size() > kModesInFull) modes.resize(kModesInFull);
  for (auto& mode : modes) add_candidates(problem, mode, true, work);
  const auto better = [](const JointMode& a, const JointMode& b) { return a.best().aicc < b.best().aicc; };
  std::stable_sort(modes.begin(), modes.end(), better);
  if (modes.empty()) return modes;
  add_others(problem, modes, work);
  std::stable_sort(modes.begin(), modes.end(), better);
  return modes;
}

}  // namespace halfturn::infer
