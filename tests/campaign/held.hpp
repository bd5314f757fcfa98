// SPDX-License-Identifier: Apache-2.0
#pragma once
#include "model/infer/fit.hpp"
#include "tests/campaign/families.hpp"

/// What a scan's likelihood says of the truth: questions that no reply answers.
namespace halfturn::campaign {

/// The least deviance, priors counted and excess scatter divided out, over all candidates with the length of pulse `pulse` (lines:
/// the line's offset, rad/s) held at `value`, less the least one anywhere: what the data hold against the value. `fit` is the
/// answer's. A dead time that the configuration misstates is held as loosely as it is off: what is configured wrongly is not the
/// data's word. NaN where nothing was fitted.
double held_against(const Case& of, const infer::Fit& fit, std::size_t pulse, double value);

/// The bare Rabi frequency, rad/s, of the likelihood's maximum under the case's true dynamics alone, by the answer's mode and
/// priors. NaN where there is none.
double rabi_under_truth(const Case& of, const infer::Fit& fit);

/// The case with the counts that are expected of it.
Case noiseless(const Case& of);

/// The fit of a case's scan, without its history.
infer::Fit fit_of(const Case& of);

/// Deviance that the best single line leaves of a scan whose counts are those expected: how plainly more is seen than one line.
double left_by_one_line(const Case& of);

}  // namespace halfturn::campaign
