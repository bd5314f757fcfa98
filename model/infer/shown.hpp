// SPDX-License-Identifier: Apache-2.0
#pragma once
#include "model/infer/fit.hpp"

namespace halfturn::infer {

/// Takes error and interval from what a fit says of an oscillation or a line that the scan does not show: where the deviance
/// gained over a flat line is below `least_evidence`, the best fit follows the noise, and a local interval about it says nothing
/// of the truth. Values and the quality's figures stay, the cycles seen as well; `why` says it. Floor and dead time, which a flat
/// scan can tell, keep theirs.
void withhold_unshown(const FitOptions& options, Fit& fit);

}  // namespace halfturn::infer
