// SPDX-License-Identifier: Apache-2.0
#pragma once
#include "model/infer/fit.hpp"

/// A second oscillation or line in a scan that was fitted with one: two species, two Zeeman states, two sites lit unequally.
namespace halfturn::infer {

/// Fits a fitted scan once more with a second component beside the first (Prior::second) and puts it into fit.quality.second where it
/// explains the scan better, by a deviance of 16 or by so much that it is likelier than what was fitted (second_doubt.hpp), and the
/// answer is in doubt by it; resets that else. The gain is a likelihood ratio, over the scatter that two components leave: what they explain is
/// no scatter. Of a flop the answer is in doubt where the best pulse over both components (or that none was asked for) lies more than two
/// standard errors or 25 mrad from a length given; of a line always, for it is not told which one is meant. A flop's that is less likely
/// is heeded instead (second_doubt.hpp): it moves and widens the lengths of pulses.
/// Looked for only where the deviance is improbable (p_value below 0.5) or a flop's dynamics are those of an ensemble, which a second
/// component passes for.
void look_for_second(const ScanBatch& scan, const Readout& readout, const FitOptions& options, Fit& fit, FitWorkspace& workspace);

/// The length (s, without dead time) at which two components, of angular frequencies `rabi` and `ratio` times that with shares 1 - share
/// and share, are turned best by `angle_rad`: the maximiser of the mean of cos(x rabi t - angle) between half and twice the first one's
/// own, to 1e-4 of it (dynamics::best_pulse_phase says the same of an ensemble).
double best_pulse_of_two(double rabi, double share, double ratio, double angle_rad);

}  // namespace halfturn::infer
