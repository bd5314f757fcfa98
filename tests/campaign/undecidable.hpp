// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <limits>

#include "tests/campaign/families.hpp"

/// What the expected counts of a scan, free of noise, tell of its shape against others: the limit of information for the gates
/// that ask by how much a scan prefers its answer.
namespace halfturn::campaign {

/// Deviances by which others describe the expected counts worse than the best does: twice the Kullback-Leibler distance where the
/// truth is a candidate (S. Kullback, R. A. Leibler, Ann. Math. Statist. 22, 79 (1951)). Scatter and outliers take their share.
struct Gaps {
  double rival = std::numeric_limits<double>::infinity();  // the next best mode: another frequency, line, or sign of the contrast
  double monotone = 0;                                     // the best curve that only rises or only falls
  double flat = 0;                                         // a flat line
  double angle_error = 0;                                  // rad: the worst pulse's standard error, the candidates' disagreement in it
};

/// By a fit of the expected counts with what the daemon is configured with; of a drive with a history, by the reply to them (only
/// `rival` then). NaN where nothing could be fitted.
Gaps gaps(const Case& of);

/// The gap that a gate with this threshold needs so that all but one scan in 44 pass it: between two shapes the deviance seen is
/// normal about the gap with a standard deviation of 2 sqrt(gap), which is counted twice.
double gap_for(double threshold);

/// Whether a scan can be decided: its gaps are what the gates of rival and evidence need, the candidates that describe the expected counts
/// nearly alike agree on its pulses to what the gate of uncertainty asks, and a line's centre lies inside the window
/// by twice its bound `offset_bound` (rad/s; of flops not read). Nobody could use one that is not, under these thresholds, without
/// being told more.
bool decidable(const Case& of, const Gaps& gaps, double offset_bound);

}  // namespace halfturn::campaign
