// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <algorithm>
#include <cmath>
#include <limits>
#include <optional>
#include <span>
#include <vector>

#include "model/infer/fit.hpp"
#include "model/infer/solver.hpp"
#include "model/quantity/constants.hpp"

/// Rules of the choice among candidates and modes, which fits of one scan and of several have in common. A solution S has `dynamics`,
/// `minimum`, `aicc` and `apparent`; a mode has its solutions, the best first.
namespace halfturn::infer {

// The first refinement of starts only sorts them: to 0.02 in deviance, or as far as so many evaluations go.
inline constexpr SolverOptions kSorting{.decrease_tolerance = 0.01, .max_evaluations = 60};
// Deviance that a free damping must gain over none for the candidates with other causes of it to be tried. By chance, where there is
// no damping, a one-sided rate gains more than this in one scan of six.
inline constexpr double kDampingSeen = 1.0;
// Modes further above the best than the first, plus this part of what the best gains over a flat line, are not refined under those, and
// no more than so many: the cause of a damping that nothing describes at all moves a mode by as much, and not the others.
inline constexpr double kOthersWorthIt = 60.0, kOthersShare = 0.1;
inline constexpr int kModesOfOthers = 3;
// Nor is a scan that no simple candidate shows to oscillate, by less deviance than this over a flat line or a monotone curve: it will be
// refused, and an ensemble that is free to be as broad as it likes takes long to say nothing.
inline constexpr double kShown = 15.0;
// So many modes, the best by their first refinement, are refined under every candidate before they are compared: the first
// candidate may be the wrong one, and costs hundreds of deviance where there is much data.
inline constexpr std::size_t kModesInFull = 6;
// Where a residual of so many sigmas lies, a softened likelihood (Readout::softness) begins to pull less.
inline constexpr double kSoftness = 1.5;
// History is held no tighter than this, relative, when it decides between modes, and must lie within so many sigmas of its choice.
inline constexpr double kHistorySigma = 0.01, kHistoryKnows = 4.0;
// `expect` decides between modes whose points differ by less deviance than this; a truth outside is not hidden by it.
inline constexpr double kExpectDecides = 4.0;
// Within so many resolution elements of half the sampling rate a frequency and its mirror image are one bump: neither is told.
inline constexpr double kMirrorZone = 0.5;

/// QAICc times no constant: the likelihood part divided by the scatter, the price of the parameters as it is (K. P. Burnham,
/// D. R. Anderson, Model Selection and Multimodel Inference, 2nd ed. (2002), section 2.5).
template <class S>
double quasi_aicc(const S& solution, double scatter) {
  return solution.aicc - 2.0 * solution.minimum.value * (1.0 - 1.0 / scatter);
}

/// Fills the fit's candidates with their Akaike weights.
template <class S>
void weigh(const std::vector<S>& solutions, double scatter, Fit& fit) {
  double total = 0.0;
  fit.candidate_count = 0;
  for (const S& solution : solutions) {
    const double difference = quasi_aicc(solution, scatter) - quasi_aicc(solutions.front(), scatter);
    auto& score = fit.candidates[static_cast<std::size_t>(fit.candidate_count++)];
    score = {solution.dynamics, solution.aicc, std::exp(-0.5 * difference)};
    total += score.weight;
  }
  for (int i = 0; i < fit.candidate_count; ++i) fit.candidates[static_cast<std::size_t>(i)].weight /= total;
}

/// Whether a mode shows enough of a damping that what it comes from matters. Without one the candidates that are not simple stand at a
/// breadth of 0 or near it, where they are `undamped`.
template <class S>
bool shows_damping(const DynamicsSet& asked, const std::vector<S>& solutions) {
  if (!asked.has(Dynamics::undamped)) return true;
  double undamped = std::numeric_limits<double>::infinity(), damped = undamped;
  for (const S& solution : solutions) {
    double& least = solution.dynamics == Dynamics::undamped ? undamped : damped;
    least = std::min(least, solution.minimum.value);
  }
  return !(undamped - damped < 0.5 * kDampingSeen) || !std::isfinite(damped);
}

/// History as one more measurement among modes that fit `alike`: its choice where it agrees with the best of all and the others then
/// fit worse by `margin`, deviances divided by `scatter`.
template <class M>
std::optional<std::size_t> choice_of_history(const Known& history, std::span<const M> modes, std::span<const std::size_t> alike, double scatter,
                                             double margin) {
  if (alike.size() < 2) return std::nullopt;
  const double sigma = std::max(history.sigma, kHistorySigma);
  const auto distance = [&](std::size_t i) { return std::abs(std::log(modes[i].best().apparent) - history.mean) / sigma; };
  const auto score = [&](std::size_t i) { return modes[i].best().aicc / scatter + distance(i) * distance(i); };
  const std::size_t best = *std::min_element(alike.begin(), alike.end(), [&](std::size_t i, std::size_t j) { return score(i) < score(j); });
  const bool decided = std::all_of(alike.begin(), alike.end(), [&](std::size_t i) { return i == best || score(i) - score(best) >= margin; });
  return decided && distance(best) < kHistoryKnows ? std::optional(best) : std::nullopt;
}

/// The mirror image of a frequency near half the sampling rate `limit`, which merges with it and so is no mode of its own; none where it is
/// further off than `span` (s) resolves, or where `expect` does not hold it.
inline std::optional<RivalMode> mirror_image(double found, double limit, double span, const std::optional<Expected>& expect) {
  const double mirror = 2.0 * limit - found;
  const bool close = std::abs(mirror - found) < 2.0 * kMirrorZone * constants::kTwoPi / span;
  if (!close || (expect && (mirror < expect->low || mirror > expect->high))) return std::nullopt;
  return RivalMode{mirror, 0.0, false};
}

}  // namespace halfturn::infer
