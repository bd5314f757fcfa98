// SPDX-License-Identifier: Apache-2.0
#pragma once
#include "tests/campaign/families.hpp"

/// What the data of a scan could tell at best.
namespace halfturn::campaign {

/// Cramer-Rao bounds: standard deviations from the Fisher information of the true model at its true parameters, all nuisance
/// parameters free, with what references and priors add. NaN where the information is singular.
struct Bound {
  std::vector<double> pulse_s;  // of the drive's pulses; flops
  double generalised = 0;       // rad/s; flops
  double rabi = 0;              // rad/s, bare
  double offset = 0;            // rad/s; lines
  double gain = 0;              // expected deviance gained over a flat line
};

/// Derivatives by central differences of the rehearsed apparatus; probabilities closer to 0 or 1 than half a count are taken
/// as half a count, for the information has no bound there. Excess scatter and outliers take their share.
Bound bound(const Case& of);

}  // namespace halfturn::campaign
