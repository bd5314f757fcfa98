// SPDX-License-Identifier: Apache-2.0
#include <algorithm>
#include <cmath>

#include "model/infer/line_modes.hpp"
#include "model/infer/rules.hpp"
#include "model/infer/solution.hpp"

/// The choice among modes.
namespace halfturn::infer {
namespace {

/// Deviance of the scan's points alone: priors, that of the dead time above all, say nothing of an alias.
double data_deviance(const Problem& problem, const Solution& solution, FitWorkspace& work) {
  const ScanObjective objective(problem.scan, problem.readout, problem.prior, solution.dynamics, {}, solution.negative_contrast, work.objective);
  double half = kUnknown;
  return objective.data_part(solution.physical, half, {}) ? 2.0 * half : std::numeric_limits<double>::infinity();
}

/// Whether `expect`, or without it the sampling limit, allows a mode. Lines are always allowed.
bool allowed(const Problem& problem, const ModeSolutions& mode) {
  if (problem.scan.kind == Axis::detuning) return true;
  const double rabi = mode.best().apparent;
  const auto& expect = problem.prior.expect;
  return expect ? rabi >= expect->low && rabi <= expect->high : rabi <= problem.sampling.limit;
}

/// The best mode of all; one that is allowed goes before it only where the points hardly prefer the other.
std::size_t first_choice(const Problem& problem, std::span<const ModeSolutions> modes, FitWorkspace& work) {
  if (allowed(problem, modes[0])) return 0;
  for (std::size_t i = 1; i < modes.size(); ++i)
    if (allowed(problem, modes[i]) &&
        data_deviance(problem, modes[i].best(), work) < data_deviance(problem, modes[0].best(), work) + kExpectDecides)
      return i;
  return 0;
}

RivalMode rival_of(const Problem& problem, const Solution& other, const Solution& chosen, double scatter) {
  RivalMode rival;
  rival.frequency = problem.scan.kind == Axis::detuning ? other.physical.line_offset : other.apparent;
  rival.deviance_above = (other.aicc - chosen.aicc) / scatter;
  if (problem.scan.kind == Axis::detuning) rival.deviance_above += held_by_area(problem, other) - held_by_area(problem, chosen);
  rival.deviance_above = std::max(0.0, rival.deviance_above);
  rival.opposite_contrast = other.negative_contrast != chosen.negative_contrast;
  return rival;
}

}  // namespace

std::size_t choose_mode(const Problem& problem, std::span<const ModeSolutions> modes, FitQuality& quality, FitWorkspace& work) {
  const std::size_t chosen = first_choice(problem, modes, work);
  quality.outside_expect = !allowed(problem, modes[chosen]);
  const auto competes = [&](std::size_t i) { return allowed(problem, modes[i]) || quality.outside_expect; };

  const bool line = problem.scan.kind == Axis::detuning;
  const double margin = problem.options.rival_margin * quality.scatter;
  std::vector<std::size_t> alike;
  for (std::size_t i = 0; i < modes.size(); ++i)
    if (i == chosen || (competes(i) && modes[i].best().aicc < modes[chosen].best().aicc + margin)) alike.push_back(i);
  if (problem.prior.log_rabi && problem.scan.kind != Axis::detuning)
    if (const auto known = choice_of_history(*problem.prior.log_rabi, modes, alike, quality.scatter, problem.options.rival_margin)) {
      quality.by_history = true;
      return *known;
    }
  // The next best is said even where it is no rival.
  if (problem.scan.kind != Axis::detuning && problem.sampling.even)
    quality.rival = mirror_image(modes[chosen].best().apparent, problem.sampling.limit, problem.sampling.span, problem.prior.expect);
  for (std::size_t i = 0; i < modes.size(); ++i) {
    if (i == chosen || !competes(i)) continue;
    if (line && one_line(modes[i].best(), modes[chosen].best(), quality.line_width)) continue;
    const RivalMode rival = rival_of(problem, modes[i].best(), modes[chosen].best(), quality.scatter);
    if (!quality.rival || rival.deviance_above < quality.rival->deviance_above) quality.rival = rival;
  }
  return chosen;
}

}  // namespace halfturn::infer
