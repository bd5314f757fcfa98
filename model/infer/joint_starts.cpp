// SPDX-License-Identifier: Apache-2.0
#include <algorithm>
#include <cmath>

#include "model/infer/joint_solution.hpp"
#include "model/quantity/constants.hpp"

/// Where a joint fit begins.
namespace halfturn::infer {
namespace {

using constants::kTwoPi;

// Starts that a flop gives: all aliases of an even grid in the range expected, of either contrast, on ten sampling limits.
constexpr std::size_t kOfFlop = 48;
constexpr std::size_t kOfLine = 16;
// Lines' places that are tried with every frequency.
constexpr std::size_t kPlaces = 6;

/// One scan's idea of what is shared.
struct Idea {
  double rabi = 0.0, offset = 0.0, dead_time = 0.0, envelope = 0.0;
};

double known_offset(const JointScan& scan) { return scan.carrier - (scan.prior.detuning ? scan.prior.detuning->mean : 0.0); }

std::vector<Idea> ideas_of(const JointProblem& problem, std::size_t i, FitWorkspace& work) {
  const auto& scan = problem.scans[i];
  const bool line = scan.batch.kind == Axis::detuning;
  std::array<Mode, kOfFlop> modes;
  const auto find = line ? line_starts : duration_starts;
  const std::size_t count = find(scan.batch, problem.readouts[i], scan.prior, problem.sampling[i], {modes.data(), line ? kOfLine : kOfFlop}, work.search);
  std::vector<Idea> ideas;
  const auto add = [&](const Physical& p, double envelope) {
    const double coupling = std::sqrt(std::max(p.generalised * p.generalised - p.detuning_square, 0.01 * p.generalised * p.generalised));
    ideas.push_back({coupling, line ? p.line_offset + scan.carrier : known_offset(scan), p.dead_time, envelope});
  };
  // What the scan said alone has been refined and stands first.
  const Fit& alone = problem.alone[i];
  add(alone.physical, is_simple(alone.chosen) ? 0.5 * alone.physical.damping : 0.0);
  for (std::size_t k = 0; k < count; ++k) add(modes[k].start, modes[k].damped ? modes[k].start.damping : 0.0);
  return ideas;
}

/// Weighted sum of squares that is left of a scan when its two signals are solved for; they go into the start.
double solve_signals(const JointProblem& problem, const JointObjective& objective, std::size_t i, JointStart& start, FitWorkspace& work) {
  const auto n = problem.scans[i].batch.points();
  JointPhysical probe = start.physical;
  probe.ground[i] = 0.25;
  probe.excited[i] = 0.75;
  work.signal.assign(n, kUnknown);
  double unused = 0.0;
  objective.scan(i).data_part(objective.of_scan(i, probe), unused, work.signal);
  work.search.reserve(n);
  linear_points(problem.readouts[i], {work.search.value.data(), n}, {work.search.weight.data(), n});
  StraightLine signals;  // of the population
  double squares = 0.0;
  for (std::size_t k = 0; k < n; ++k) {
    const double p = 2.0 * (work.signal[k] - 0.25), w = work.search.weight[k] / problem.readouts[i].dispersion, y = work.search.value[k];
    if (!(w > 0.0)) continue;
    signals.add(w, y, p);
    squares += w * y * y;
  }
  if (!signals.solvable()) return std::numeric_limits<double>::infinity();
  const double contrast = signals.slope(), ground = signals.intercept();
  if (contrast == 0.0 || !sign_admitted(problem.scans[i].prior, contrast)) return std::numeric_limits<double>::infinity();
  Physical possible;
  possible.signal_ground = ground;
  possible.signal_excited = ground + contrast;
  keep_signals_possible(problem.readouts[i].kind, possible);
  start.physical.ground[i] = possible.signal_ground;
  start.physical.excited[i] = possible.signal_excited;
  start.negative[i] = contrast < 0.0;
  return squares - ground * signals.y - contrast * signals.xy;
}

std::optional<JointStart> start_from(const JointProblem& problem, const JointObjective& objective, const Idea& idea, double offset, FitWorkspace& work) {
  JointStart start;
  start.damped = idea.envelope > 0.0;
  auto& p = start.physical;
  p.rabi = idea.rabi;
  p.offset = offset;
  const auto& known = problem.of_reference().prior.detuning;
  p.detuning_square = known ? known->mean * known->mean : 0.0;
  p.dead_time = idea.dead_time;
  p.damping = 2.0 * idea.envelope;
  for (std::size_t i = 0; i < problem.scans.size(); ++i) start.deviance += solve_signals(problem, objective, i, start, work);
  return std::isfinite(start.deviance) ? std::optional(start) : std::nullopt;
}

/// The lines' places, best first of each line scan, no two of one line.
std::vector<double> places(const JointProblem& problem, const std::vector<std::vector<Idea>>& ideas) {
  std::vector<double> places;
  for (std::size_t i = 0; i < problem.scans.size(); ++i) {
    if (problem.scans[i].batch.kind != Axis::detuning) continue;
    std::size_t taken = 0;
    for (const Idea& idea : ideas[i]) {
      const auto same = [&](double other) { return same_line(problem, other, idea.offset); };
      if (taken == kPlaces || std::any_of(places.begin(), places.end(), same)) continue;
      places.push_back(idea.offset);
      ++taken;
    }
  }
  if (places.empty()) places.push_back(known_offset(problem.of_reference()));
  return places;
}

}  // namespace

std::vector<JointStart> joint_starts(const JointProblem& problem, std::size_t most, FitWorkspace& work) {
  const JointSolution dephased{.dynamics = Dynamics::dephasing};
  const JointObjective objective = objective_of(problem, dephased, {Lead::Kind::bare}, work);
  std::vector<std::vector<Idea>> ideas;
  for (std::size_t i = 0; i < problem.scans.size(); ++i) ideas.push_back(ideas_of(problem, i, work));
  const std::vector<double> offsets = places(problem, ideas);
  std::vector<JointStart> all;
  for (std::size_t i = 0; i < problem.scans.size(); ++i) {
    // Where there are flops, they tell the frequency, and a line its place.
    if (problem.flops && problem.scans[i].batch.kind == Axis::detuning) continue;
    for (const Idea& idea : ideas[i])
      for (const double place : offsets)
        if (auto start = start_from(problem, objective, idea, place, work)) all.push_back(*start);
  }
  std::stable_sort(all.begin(), all.end(), [](const auto& a, const auto& b) { return a.deviance < b.deviance; });
  std::vector<JointStart> kept;
  for (const auto& start : all) {
    const auto near = [&](const JointStart& other) {
      return start.negative == other.negative && std::abs(start.physical.rabi - other.physical.rabi) < kTwoPi * 0.35 / problem.longest &&
             same_line(problem, start.physical.offset, other.physical.offset);
    };
    if (kept.size() < most && std::none_of(kept.begin(), kept.end(), near)) kept.push_back(start);
  }
  return kept;
}

}  // namespace halfturn::infer
