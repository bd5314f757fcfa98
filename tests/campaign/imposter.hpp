// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <vector>

#include "tests/campaign/bound.hpp"
#include "tests/campaign/families.hpp"
#include "tests/campaign/two_point.hpp"

/// Scans whose expected counts are nearly those of a given one, though something simpler made them.
namespace halfturn::campaign {

/// Fitting only proposes them: counts, answers, bounds and distances are the simulated apparatus's own, so a bound that
/// follows from one holds however well the fit did.
struct Imposter {
  infer::Dynamics dynamics = infer::Dynamics::undamped;
  Case as;             // as though it had been drawn: truth, expected counts, and knowledge that is right on average
  Apart apart;         // from the case, by counts, references and what is known beforehand
  double sigma = 0;    // Cramer-Rao, of the first pulse's length (s) or the line's offset (rad/s)
  Bound bound;
};

/// The case with the counts that are expected of it, and everything known of it at its expectation: contrast, floor and
/// references at what is true, the dead time at the true one unless it is misstated.
Case at_expectation(const Case& of);

/// The case with another apparatus, at its expectation.
Case made_by(const Case& of, const Apparatus& apparatus);

/// How far apart the data of two cases on the same axis and with the same knowledge are. Contrast, floor, references and
/// dead time are readings beside the counts, normal or binomial about what is true; a dead time that is misstated is no
/// reading, but fixed.
Apart apart(const Case& truth, const Case& imposter);

/// The best descriptions of the case's expected counts by every candidate alone; of a misstated dead time by the simple
/// candidates with the dead time at 0, 1 and 2 of the configured sigma. Only those that some family of the campaign draws,
/// within its ranges of damping, breadth, area, cycles and signal; with a finite sigma, and within a deviance of 150,
/// beyond which all is told apart.
std::vector<Imposter> imposters_of(const Case& of);

}  // namespace halfturn::campaign
