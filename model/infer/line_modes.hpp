// SPDX-License-Identifier: Apache-2.0
#pragma once
#include "model/infer/solution.hpp"

/// Modes of a detuning scan: which are worth a full refinement, which are one line, which what is known rules out.
namespace halfturn::infer {

/// Drops modes, sorted by their first refinement, that no candidate would bring within the rival margin of the best, and returns
/// the half deviance (with priors) below which another mode is worth every candidate: above the best by the rival margin, 20 and
/// a tenth of what the best gains over a flat line, scatter counted; by 10 where the best itself does not show a line, for no
/// rival matters then. Dropped is what lies above that by more than half as much again as the best mode gained, from `sorted_by`
/// on, when its candidates were tried. The first two stay.
double drop_hopeless(const Problem& problem, std::vector<ModeSolutions>& modes, double sorted_by);

/// Whether two modes are one line: the centres differ by less than a quarter of its width (rad/s). Fringes of a line that power or
/// dephasing broadened make many such modes, as far apart as the centre is uncertain; they are no rivals, for the centre's error counts
/// them (widen_offset). Other lines and side lobes lie a width away.
bool one_line(const Solution& a, const Solution& b, double line_width);

/// Deviance that is held against a mode for a pulse area far from what the pulses in force say: z^2 with a sigma of 0.3 in the
/// logarithm of the Rabi frequency, at most 10. It counts when the gap to a rival is asked for, and chooses nothing. The cap keeps
/// pulses that do not hold for this scan (taken at another power that nobody stated) from deciding: the points themselves must
/// prefer the answer by 15 of the margin of 25, which, for a truth and a rival as alike as is worst (a gap of 15, with a standard
/// deviation of 2 sqrt(15)), they do wrongly once in 20,000 such scans. 0 where nothing is known.
double held_by_area(const Problem& problem, const Solution& solution);

/// Counts the other modes of the same line into the offset's value and error, and all modes into its interval, the mixture's. A solution
/// weighs exp(-q/2) times the standard errors of offset (at a given area) and of the area's logarithm (at most 1.1), q its QAICc and what
/// held_by_area holds against it: Laplace's approximation to the integral over both (L. Tierney, J. B. Kadane, J. Am. Stat. Assoc. 81,
/// 82 (1986)), so that a fringe as narrow as chance makes many does not speak for a broad one. Leaves an offset without interval as it is.
void widen_offset(const Problem& problem, std::span<const ModeSolutions> modes, std::size_t chosen, Fit& fit);

}  // namespace halfturn::infer
