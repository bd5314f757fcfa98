// SPDX-License-Identifier: Apache-2.0
#include <algorithm>
#include <cmath>

#include "model/infer/line_modes.hpp"
#include "model/infer/solution.hpp"
#include "model/quantity/constants.hpp"

/// The choice among modes.
namespace halfturn::infer {
namespace {

using constants::kTwoPi;

// History is held no tighter than this, relative, when it decides between modes, and must lie within so many sigmas of its choice.
constexpr double kHistorySigma = 0.01, kHistoryKnows = 4.0;
// `expect` decides between modes whose points differ by less deviance than this; a truth outside is not hidden by it.
constexpr double kExpectDecides = 4.0;
// Within so many resolution elements of half the sampling rate a frequency and its mirror image are one bump: neither is told.
constexpr double kMirrorZone = 0.5;

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

/// History as one more measurement among modes that fit alike: its choice where it agrees with the best of all and the others
/// then fit worse by the margin.
std::optional<std::size_t> choice_of_history(const Problem& problem, std::span<const ModeSolutions> modes, std::span<const std::size_t> alike,
                                             double scatter) {
  if (!problem.prior.log_rabi || problem.scan.kind == Axis::detuning || alike.size() < 2) return std::nullopt;
  const double sigma = std::max(problem.prior.log_rabi->sigma, kHistorySigma);
  auto distance = [&](std::size_t i) {
    return std::abs(std::log(modes[i].best().apparent) - problem.prior.log_rabi->mean) / sigma;
  };
  auto score = [&](std::size_t i) { return modes[i].best().aicc / scatter + distance(i) * distance(i); };
  const std::size_t best = *std::min_element(alike.begin(), alike.end(), [&](std::size_t i, std::size_t j) { return score(i) < score(j); });
  const bool decided = std::all_of(alike.begin(), alike.end(), [&](std::size_t i) {
    return i == best || score(i) - score(best) >= problem.options.rival_margin;
  });
  return decided && distance(best) < kHistoryKnows ? std::optional(best) : std::nullopt;
}

/// The mirror image of a frequency near half the sampling rate, which merges with it and so is no mode of its own.
std::optional<RivalMode> mirror_image(const Problem& problem, const Solution& chosen) {
  if (problem.scan.kind == Axis::detuning || !problem.sampling.even) return std::nullopt;
  const double found = chosen.apparent, mirror = 2.0 * problem.sampling.limit - found;
  const bool close = std::abs(mirror - found) < 2.0 * kMirrorZone * kTwoPi / problem.sampling.span;
  const auto& expect = problem.prior.expect;
  if (!close || (expect && (mirror < expect->low || mirror > expect->high))) return std::nullopt;
  return RivalMode{mirror, 0.0, false};
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
  if (const auto known = choice_of_history(problem, modes, alike, quality.scatter)) {
    quality.by_history = true;
    return *known;
  }
  // The next best is said even where it is no rival.
  quality.rival = mirror_image(problem, modes[chosen].best());
  for (std::size_t i = 0; i < modes.size(); ++i) {
    if (i == chosen || !competes(i)) continue;
    if (line && one_line(modes[i].best(), modes[chosen].best(), quality.line_width)) continue;
    const RivalMode rival = rival_of(problem, modes[i].best(), modes[chosen].best(), quality.scatter);
    if (!quality.rival || rival.deviance_above < quality.rival->deviance_above) quality.rival = rival;
  }
  return chosen;
}

}  // namespace halfturn::infer
