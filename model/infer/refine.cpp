// SPDX-License-Identifier: Apache-2.0
#include <algorithm>
#include <cmath>

#include "model/infer/hot_start.hpp"
#include "model/infer/line_modes.hpp"
#include "model/infer/monotone.hpp"
#include "model/infer/rules.hpp"
#include "model/infer/solution.hpp"
#include "model/quantity/constants.hpp"

namespace halfturn::infer {
namespace {

using constants::kTwoPi;

// Other modes of a line are compared with the best to 2e-4 in deviance.
constexpr SolverOptions kComparing{.decrease_tolerance = 1e-4, .max_evaluations = 100};
// A line's Doppler width that nothing holds runs away together with its area, into ensembles of ever more members: in one of four such
// fits of power-broadened lines, and those took two thirds of all their time. Where Doppler widths are true, one fit in 70 takes more
// evaluations than this.
constexpr int kMostOfDopplerLine = 60;
// A start is given up that will not come so near the best so far, deviance over what that gains over a flat line: another candidate could
// take no more off it.
constexpr double kStartsShare = 0.3;
// Another candidate takes at most so many times off another mode what it took off the best.
constexpr double kMovesOthers = 1.5;
// A candidate whose log likelihood stays so far below that of the one it was begun from weighs nothing beside it.
constexpr double kWeighsNothing = 10.0;
// What a refinement may still promise to gain to count as finished.
constexpr double kFinished = 1e-12;  // 1e-6 of a sigma

bool only_candidate(const Prior& prior, Dynamics candidate) {
  DynamicsSet without = prior.candidates;
  without.remove(candidate);
  return without.empty();
}

bool others_asked_for(const Prior& prior) {
  return std::any_of(kAllDynamics.begin(), kAllDynamics.end(), [&prior](Dynamics d) { return !is_simple(d) && prior.candidates.has(d); });
}

/// A fit that leaves its start by more than this many resolution elements has jumped to a mode that has, or does not deserve,
/// a start of its own (fit_test, "every phase and frequency": a flop of 0.9 cycles ran to twice the sampling limit).
bool strayed(const Problem& problem, double start, double end) {
  return problem.scan.kind != Axis::detuning && std::abs(end - start) > kTwoPi * 1.5 / problem.sampling.span;
}

std::optional<Solution> refine(const Problem& problem, Dynamics candidate, const Physical& start, FitWorkspace& work,
                               const SolverOptions& options = {}) {
  const bool negative = start.contrast() < 0.0;
  const ScanObjective objective(problem.scan, problem.readout, problem.prior, candidate, {}, negative, work.objective);
  Solution solution;
  solution.dynamics = candidate;
  solution.negative_contrast = negative;
  solution.minimum = minimise(objective, objective.pack(start), objective.bounds(), options);
  const auto& minimum = solution.minimum;
  const bool settled = minimum.outcome == Outcome::converged || (std::isfinite(minimum.value) && minimum.expected_decrease < 1e-3);
  if (!settled) return std::nullopt;
  solution.physical = objective.unpack(minimum.x);
  if (solution.physical.contrast() * start.contrast() < 0.0) return std::nullopt;  // crossed no contrast: no oscillation
  solution.apparent = objective.apparent_frequency(solution.physical);
  if (strayed(problem, objective.apparent_frequency(start), solution.apparent)) return std::nullopt;
  solution.parameters = objective.layout().count;
  const double k = solution.parameters;
  const double n = problem.measured + (problem.scan.references ? 2 : 0);
  // Sugiura 1978; Hurvich & Tsai, Biometrika 76, 297 (1989).
  if (n - k - 1.0 < 1.0) return std::nullopt;
  solution.aicc = 2.0 * minimum.value + 2.0 * k + 2.0 * k * (k + 1.0) / (n - k - 1.0);
  return solution;
}

void add_mode(const Problem& problem, std::vector<ModeSolutions>& modes, Solution solution) {
  for (auto& mode : modes) {
    if (!same_mode(problem, mode.best(), solution)) continue;
    if (solution.minimum.value < mode.best().minimum.value) mode.solutions.front() = std::move(solution);
    return;
  }
  modes.push_back({{std::move(solution)}});
}

bool by_aicc(const Solution& a, const Solution& b) { return a.aicc < b.aicc; }

/// As same_mode, but a fast damping blurs the frequency by as much.
bool still_the_mode(const Problem& problem, const Solution& from, const Solution& found) {
  if (same_mode(problem, from, found)) return true;
  if (problem.scan.kind == Axis::detuning || from.negative_contrast != found.negative_contrast) return false;
  return std::abs(from.apparent - found.apparent) < envelope_of(from);
}

/// Adds a candidate to a mode, begun from `from`; one that slid to another frequency is not this mode's.
void add_candidate(const Problem& problem, ModeSolutions& mode, Dynamics candidate, const Solution& from, FitWorkspace& work,
                   SolverOptions options = {}) {
  if (candidate == from.dynamics) return mode.solutions.push_back(from);
  options.give_up_above = from.minimum.value + kWeighsNothing;
  // An ensemble's envelope is no exponential: where a start as wide as that leads nowhere, a wider and a narrower one are tried.
  for (const double factor : {1.0, 2.5, 0.4}) {
    auto solution = refine(problem, candidate, start_for(problem, candidate, from, factor, work), work, options);
    if (solution && still_the_mode(problem, from, *solution)) return mode.solutions.push_back(std::move(*solution));
    if (is_simple(candidate) || problem.scan.kind == Axis::detuning) return;
  }
}

void refine_simple(const Problem& problem, ModeSolutions& mode, FitWorkspace& work, const SolverOptions& options = {}) {
  Solution first = mode.best();
  // To the default tolerance the others are compared; one mode that was only sorted so far is finished to more than that.
  SolverOptions finishing = options;
  if (options.decrease_tolerance <= SolverOptions{}.decrease_tolerance) finishing.decrease_tolerance = kFinished;
  if (!(first.minimum.expected_decrease < finishing.decrease_tolerance))
    if (auto finished = refine(problem, first.dynamics, first.physical, work, finishing)) first = std::move(*finished);
  mode.solutions.clear();
  for (const Dynamics candidate : kAllDynamics)
    if (is_simple(candidate) && problem.prior.candidates.has(candidate)) add_candidate(problem, mode, candidate, first, work, options);
  if (mode.solutions.empty()) mode.solutions.push_back(first);
  std::stable_sort(mode.solutions.begin(), mode.solutions.end(), by_aicc);
}

void refine_others(const Problem& problem, ModeSolutions& mode, FitWorkspace& work, const SolverOptions& options) {
  const bool line = problem.scan.kind == Axis::detuning;
  // The best of those with one free rate tells how fast the oscillation fades.
  const auto damped = std::find_if(mode.solutions.begin(), mode.solutions.end(), [](const Solution& s) { return s.dynamics != Dynamics::undamped; });
  const Solution from = damped == mode.solutions.end() ? mode.best() : *damped;
  for (const Dynamics candidate : kAllDynamics) {
    if (is_simple(candidate) || !problem.prior.candidates.has(candidate)) continue;
    // Of a line a spread of the coupling changes no more than its side lobes, and two dampings no more than one.
    if (line && candidate != Dynamics::doppler && !only_candidate(problem.prior, candidate)) continue;
    if (candidate == Dynamics::thermal && problem.prior.motion.empty()) continue;
    const auto there = [candidate](const Solution& s) { return s.dynamics == candidate; };
    if (std::any_of(mode.solutions.begin(), mode.solutions.end(), there)) continue;  // it was the first, for want of a simple one
    SolverOptions of_candidate = options;
    if (line && !only_candidate(problem.prior, candidate)) of_candidate.max_evaluations = std::min(options.max_evaluations, kMostOfDopplerLine);
    add_candidate(problem, mode, candidate, from, work, of_candidate);
  }
  std::stable_sort(mode.solutions.begin(), mode.solutions.end(), by_aicc);
}

/// The best mode of a line under every simple candidate, and of the others as much as it takes to compare them with it.
void refine_lines(const Problem& problem, std::vector<ModeSolutions>& modes, FitWorkspace& work) {
  if (modes.empty()) return;
  const double sorted_by = modes.front().best().minimum.value;
  refine_simple(problem, modes.front(), work);
  const Solution best = modes.front().best();
  const double worth_it = drop_hopeless(problem, modes, sorted_by);
  for (std::size_t i = 1; i < modes.size(); ++i) {
    ModeSolutions& mode = modes[i];
    const Solution first = mode.best();
    if (best.dynamics != first.dynamics) {
      Physical start = first.physical;
      start.damping = best.physical.damping;
      if (auto alike = refine(problem, best.dynamics, start, work, kComparing); alike && same_mode(problem, first, *alike) && alike->aicc < first.aicc)
        mode.solutions.front() = std::move(*alike);
    }
    if (mode.best().minimum.value < worth_it) refine_simple(problem, mode, work, kComparing);
  }
  const auto least = std::min_element(modes.begin(), modes.end(), [](const auto& a, const auto& b) { return a.best().aicc < b.best().aicc; });
  if (least != modes.begin()) refine_simple(problem, *least, work);
}

/// The best modes of a flop (or of a scan of amplitudes) under every simple candidate; of those that the best leaves far behind under the
/// first one, no more than that.
void refine_flops(const Problem& problem, double flat, std::vector<ModeSolutions>& modes, FitWorkspace& work) {
  if (modes.empty()) return;
  const double sorted_by = modes.front().best().minimum.value, gained = 2.0 * (flat - sorted_by);
  // Of a scan that shows nothing, one mode says so and the next is its rival.
  const std::size_t most = gained >= kShown ? kModesInFull : 2;
  if (modes.size() > most) modes.resize(most);
  refine_simple(problem, modes.front(), work);
  const double best = modes.front().best().minimum.value, by_candidate = sorted_by - best;
  const double worth_it = best + 0.5 * (kOthersWorthIt + kOthersShare * 2.0 * (flat - best)) + kMovesOthers * std::max(0.0, by_candidate);
  for (std::size_t i = 1; i < modes.size(); ++i)
    if (modes[i].best().minimum.value < worth_it) refine_simple(problem, modes[i], work);
}

/// Refines the best modes under the candidates that are not simple, where the scan shows an oscillation (or a line) that asks for them.
void refine_others(const Problem& problem, const MonotoneFit& plain, std::vector<ModeSolutions>& modes, FitWorkspace& work) {
  if (modes.empty() || !others_asked_for(problem.prior)) return;
  const double best = modes.front().best().minimum.value;
  const double over_flat = 2.0 * (plain.flat - best), over_monotone = 2.0 * (std::min(plain.rising, plain.falling) - best);
  if (!(std::min(over_flat, over_monotone) >= kShown)) return;
  const double worth_it = modes.front().best().aicc + kOthersWorthIt + kOthersShare * over_flat;
  int refined = 0;
  for (auto& mode : modes) {
    if (refined == kModesOfOthers || !(mode.best().aicc < worth_it)) return;
    if (!shows_damping(problem.prior.candidates, mode.solutions)) continue;
    refine_others(problem, mode, work, refined == 0 ? SolverOptions{} : kComparing);
    if (problem.scan.kind == Axis::detuning && mode.best().aicc > modes.front().best().aicc + problem.options.rival_margin) return;
    ++refined;
  }
}

/// Adds what a hot thermal state says, to the mode of its frequency or as one of its own.
void add_hot(const Problem& problem, double flat, std::vector<ModeSolutions>& modes, FitWorkspace& work) {
  for (const Physical& start : hot_starts(problem, flat, modes, work)) {
    auto hot = refine(problem, Dynamics::thermal, start, work);
    if (!hot || (!modes.empty() && !(hot->aicc < modes.front().best().aicc + problem.options.rival_margin))) continue;
    const auto same = std::find_if(modes.begin(), modes.end(), [&](const ModeSolutions& mode) { return same_mode(problem, mode.best(), *hot); });
    if (same == modes.end()) {
      modes.push_back({{std::move(*hot)}});
      continue;
    }
    auto& solutions = same->solutions;
    const auto there = std::find_if(solutions.begin(), solutions.end(), [](const Solution& s) { return s.dynamics == Dynamics::thermal; });
    if (there == solutions.end()) solutions.push_back(std::move(*hot));
    else if (hot->aicc < there->aicc) *there = std::move(*hot);
    std::stable_sort(solutions.begin(), solutions.end(), by_aicc);
  }
}

/// The candidate under which a start is refined first.
Dynamics first_candidate(const Prior& prior, bool damped) {
  if (damped)
    for (const Dynamics candidate : {Dynamics::dephasing, Dynamics::decay, Dynamics::leak})
      if (prior.candidates.has(candidate)) return candidate;
  for (const Dynamics candidate : kAllDynamics)
    if (prior.candidates.has(candidate)) return candidate;
  return Dynamics::undamped;
}

}  // namespace

int measured_points(const Readout& readout) {
  int count = 0;
  for (std::size_t i = 0; i < readout.weight.size(); ++i)
    if (measured(readout, i)) ++count;
  return count;
}

bool same_mode(const Problem& problem, const Solution& a, const Solution& b) {
  // What a line scan is asked for is the centre: an inverted line there, or one of another area, agrees.
  if (problem.scan.kind == Axis::detuning)
    return std::abs(a.physical.line_offset - b.physical.line_offset) < kTwoPi * 0.2 / problem.scan.pulse_length_s;
  if (a.negative_contrast != b.negative_contrast) return false;
  const double limit = problem.sampling.limit;
  if ((a.apparent > limit) != (b.apparent > limit)) return false;  // mirror images near the limit
  return std::abs(a.apparent - b.apparent) < kTwoPi * 0.35 / problem.sampling.span;
}

std::vector<ModeSolutions> refine_modes(const Problem& problem, std::span<const Mode> starts, FitWorkspace& work) {
  std::vector<ModeSolutions> modes;
  const MonotoneFit plain = monotone_half_deviance(problem.readout, problem.scan.axis);
  double best = std::numeric_limits<double>::infinity();
  for (const auto& start : starts) {
    const Dynamics candidate = first_candidate(problem.prior, start.damped);
    const Physical from = first_start(problem, candidate, start, work);
    SolverOptions sorting = kSorting;
    // The next best is found in any case, to be said.
    if (modes.size() > 1) sorting.give_up_above = best + 0.5 * kOthersWorthIt + kStartsShare * std::max(0.0, plain.flat - best);
    auto solution = refine(problem, candidate, from, work, sorting);
    if (!solution) continue;
    best = std::min(best, solution->minimum.value);
    add_mode(problem, modes, std::move(*solution));
  }
  auto by_deviance = [](const ModeSolutions& a, const ModeSolutions& b) { return a.best().minimum.value < b.best().minimum.value; };
  std::stable_sort(modes.begin(), modes.end(), by_deviance);
  if (problem.scan.kind == Axis::detuning) refine_lines(problem, modes, work);
  else refine_flops(problem, plain.flat, modes, work);
  const auto better = [](const ModeSolutions& a, const ModeSolutions& b) { return a.best().aicc < b.best().aicc; };
  std::stable_sort(modes.begin(), modes.end(), better);
  refine_others(problem, plain, modes, work);
  add_hot(problem, plain.flat, modes, work);
  std::stable_sort(modes.begin(), modes.end(), better);
  return modes;
}

}  // namespace halfturn::infer
