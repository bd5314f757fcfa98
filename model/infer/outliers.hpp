// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <span>
#include <vector>

#include "model/infer/monotone.hpp"

/// Points that are none of the signal: a shot that lost its ion, a laser that dropped out. Their law is uniform: over 0...n bright
/// counts, over 0...the most photons seen (in as many exposures), over the range of the signals seen.
namespace halfturn::infer {

/// Readout::odds of every point for a share 0 < e < 1 of outliers; `plain` is without odds. Points left out have odds of 1.
void outlier_odds(const Readout& plain, double share, std::span<double> odds);

/// The share of outliers that is most probable about given means, with one outlier and one good point counted beforehand so that
/// it stays inside 0...1 (expectation and maximisation: A. P. Dempster, N. M. Laird, D. B. Rubin, J. R. Stat. Soc. B 39, 1 (1977)).
double fitted_share(const Readout& plain, std::span<const double> mean);

/// Minus twice the log likelihood of a scan with a share e of outliers, in the units of its deviance without any.
double contaminated_deviance(const Readout& plain, std::span<const double> mean, double share);

/// The scan without the points that are more probably outliers than not, with the readout's own noise alone; nothing is set aside where
/// the readout has no odds.
struct Kept {
  std::vector<int> distrusted;  // indices of the points, rising
  std::vector<double> weight;   // the readout's, those points left out
  Readout readout(const Readout& of) const { return {of.kind, of.observed, weight, {}, 0.0, 1.0}; }
};
Kept set_aside(const Readout& readout, std::span<const double> mean);

/// Probability that distrusted points of a scan fall into as few blocks of neighbours along the axis, or fewer, were they strewn at
/// random (runs of one kind: A. Wald, J. Wolfowitz, Ann. Math. Stat. 11, 147 (1940)): small where something failed for a while, or where
/// the model misses a piece of the curve. 1 for fewer than two.
double together_p_value(const Readout& readout, std::span<const double> axis, std::span<const int> distrusted);

/// The best monotone curves with outliers allowed for, from two starts: none set aside, and those of `kept`. Minima of the
/// neighbourhood, which lie at most a few points' odds above the lowest.
MonotoneFit contaminated_monotone(const Readout& readout, std::span<const double> axis, const Kept& kept);

/// Value and weight for a linear solve (starts.hpp) when points may be outliers: every point as heavy as a middling one, since a dark
/// outlier would else weigh a hundred times as much, and none far from where most lie.
void level_points(const Readout& readout, std::span<double> value, std::span<double> weight);

}  // namespace halfturn::infer
