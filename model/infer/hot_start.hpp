// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <span>
#include <vector>

#include "model/infer/solution.hpp"

/// Where to begin with a thermal state so hot that its couplings spread over all there are.
namespace halfturn::infer {

/// Starting points of Dynamics::thermal for a flop that fades within three cycles under the simple candidates of the best of `modes` (or
/// for which there are none), where the prior knows the motion: no oscillation that is searched for looks like one whose first cycle is
/// that of the lowest levels and whose rest is that of others, turned round. Frequencies over the search's range and mean phonons of
/// eta^2 n from 0.4 to 4 are tried with the two signals solved for; the best two, none for other scans. `flat` is half the deviance of a
/// flat line. Costs some milliseconds at eta = 0.2.
std::vector<Physical> hot_starts(const Problem& problem, double flat, std::span<const ModeSolutions> modes, FitWorkspace& workspace);

}  // namespace halfturn::infer
