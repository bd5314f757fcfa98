// SPDX-License-Identifier: Apache-2.0
#include <algorithm>
#include <cmath>

#include "model/infer/amplitude_response.hpp"
#include "model/infer/solution.hpp"
#include "model/quantity/constants.hpp"

namespace halfturn::infer {
namespace {

using constants::kTwoPi;

// So many modes, the best by their first refinement, are refined under every candidate before they are compared: the first
// candidate may be the wrong one, and costs hundreds of deviance where there is much data.
constexpr std::size_t kModesInFull = 6;

/// The rate of a candidate that damps an oscillation on resonance at `envelope`: gamma_phi/2, 3 Gamma/4, Gamma_loss/2.
double damping_for(Dynamics dynamics, double envelope) {
  switch (dynamics) {
    case Dynamics::undamped: return 0.0;
    case Dynamics::dephasing: return 2.0 * envelope;
    case Dynamics::decay: return envelope / 0.75;
    case Dynamics::leak: return 2.0 * envelope;
  }
  return 0.0;
}

double envelope_of(Dynamics dynamics, double damping) {
  switch (dynamics) {
    case Dynamics::undamped: return 0.0;
    case Dynamics::dephasing: return 0.5 * damping;
    case Dynamics::decay: return 0.75 * damping;
    case Dynamics::leak: return 0.5 * damping;
  }
  return 0.0;
}

double length_scale(const Problem& problem) {
  return problem.scan.kind == Axis::duration ? problem.sampling.span : problem.scan.pulse_length_s;
}

/// A fit that leaves its start by more than this many resolution elements has jumped to a mode that has, or does not deserve,
/// a start of its own (fit_test, "every phase and frequency": a flop of 0.9 cycles ran to twice the sampling limit).
bool strayed(const Problem& problem, const Physical& start, const Physical& end) {
  if (problem.scan.kind == Axis::detuning) return false;
  return std::abs(apparent(problem, end) - apparent(problem, start)) > kTwoPi * 1.5 / problem.sampling.span;
}

std::optional<Solution> refine(const Problem& problem, Dynamics candidate, const Physical& start, FitWorkspace& work) {
  const bool negative = start.contrast() < 0.0;
  const ScanObjective objective(problem.scan, problem.readout, problem.prior, candidate, {}, negative, work.objective);
  Solution solution;
  solution.dynamics = candidate;
  solution.negative_contrast = negative;
  solution.minimum = minimise(objective, objective.pack(start), objective.bounds());
  const auto& minimum = solution.minimum;
  const bool settled = minimum.outcome == Outcome::converged || (std::isfinite(minimum.value) && minimum.expected_decrease < 1e-3);
  if (!settled) return std::nullopt;
  solution.physical = objective.unpack(minimum.x);
  if (solution.physical.contrast() * start.contrast() < 0.0) return std::nullopt;  // crossed no contrast: no oscillation
  if (strayed(problem, start, solution.physical)) return std::nullopt;
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

void refine_candidates(const Problem& problem, ModeSolutions& mode, FitWorkspace& work) {
  const Solution first = mode.best();
  mode.solutions.clear();
  const double least = 0.2 / length_scale(problem);
  const double envelope = std::max(least, envelope_of(first.dynamics, first.physical.damping));
  for (const Dynamics candidate : {Dynamics::undamped, Dynamics::dephasing, Dynamics::decay, Dynamics::leak}) {
    if (!problem.prior.candidates.has(candidate)) continue;
    std::optional<Solution> solution;
    if (candidate == first.dynamics) {
      solution = first;
    } else {
      Physical start = first.physical;
      start.damping = damping_for(candidate, envelope);
      solution = refine(problem, candidate, start, work);
    }
    // A start that slid to another frequency is not this mode's.
    if (solution && same_mode(problem, first, *solution)) mode.solutions.push_back(std::move(*solution));
  }
  if (mode.solutions.empty()) mode.solutions.push_back(first);
  std::stable_sort(mode.solutions.begin(), mode.solutions.end(), [](const Solution& a, const Solution& b) { return a.aicc < b.aicc; });
}

Dynamics first_candidate(const Prior& prior, bool damped) {
  if (damped)
    for (const Dynamics candidate : {Dynamics::dephasing, Dynamics::decay, Dynamics::leak})
      if (prior.candidates.has(candidate)) return candidate;
  for (const Dynamics candidate : {Dynamics::undamped, Dynamics::dephasing, Dynamics::decay})
    if (prior.candidates.has(candidate)) return candidate;
  return Dynamics::leak;
}

}  // namespace

double apparent(const Problem& problem, const Physical& physical) {
  if (problem.scan.kind != Axis::amplitude) return physical.generalised;
  const double largest = *std::max_element(problem.scan.axis.begin(), problem.scan.axis.end());
  return physical.generalised * compressed(largest, physical.compression) / largest;
}

int measured_points(const Readout& readout) {
  int measured = 0;
  for (std::size_t i = 0; i < readout.weight.size(); ++i)
    if (std::isfinite(readout.observed[i]) && std::isfinite(readout.weight[i]) && readout.weight[i] > 0.0) ++measured;
  return measured;
}

bool same_mode(const Problem& problem, const Solution& a, const Solution& b) {
  // What a line scan is asked for is the centre: an inverted line there, or one of another area, agrees.
  if (problem.scan.kind == Axis::detuning)
    return std::abs(a.physical.line_offset - b.physical.line_offset) < kTwoPi * 0.2 / problem.scan.pulse_length_s;
  if (a.negative_contrast != b.negative_contrast) return false;
  const double limit = problem.sampling.limit;
  const double of_a = apparent(problem, a.physical), of_b = apparent(problem, b.physical);
  if ((of_a > limit) != (of_b > limit)) return false;  // mirror images near the limit
  return std::abs(of_a - of_b) < kTwoPi * 0.35 / problem.sampling.span;
}

std::vector<ModeSolutions> refine_modes(const Problem& problem, std::span<const Mode> starts, FitWorkspace& work) {
  std::vector<ModeSolutions> modes;
  for (const auto& start : starts) {
    Physical from = start.start;
    const Dynamics candidate = first_candidate(problem.prior, start.damped);
    from.damping = start.damped ? damping_for(candidate, from.damping) : damping_for(candidate, 0.1 / length_scale(problem));
    if (auto solution = refine(problem, candidate, from, work)) add_mode(problem, modes, std::move(*solution));
  }
  auto by_deviance = [](const ModeSolutions& a, const ModeSolutions& b) { return a.best().minimum.value < b.best().minimum.value; };
  std::stable_sort(modes.begin(), modes.end(), by_deviance);
  if (modes.size() > kModesInFull) modes.resize(kModesInFull);
  for (auto& mode : modes) refine_candidates(problem, mode, work);
  std::stable_sort(modes.begin(), modes.end(), [](const ModeSolutions& a, const ModeSolutions& b) { return a.best().aicc < b.best().aicc; });
  return modes;
}

}  // namespace halfturn::infer
