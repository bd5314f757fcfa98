// SPDX-License-Identifier: Apache-2.0
#pragma once
#include "model/infer/fit.hpp"
#include "model/infer/scan_objective.hpp"
#include "model/infer/solver.hpp"

/// What a second oscillation that is neither seen nor ruled out does to the lengths of pulses.
namespace halfturn::infer {

/// A flop's fit with a second component (second_component.hpp): its minimum under the objective `two`, by how much deviance it is better
/// than the one that was fitted (scatter left by two divided out), and that scatter, in units of the objective's.
struct SecondFound {
  const ScanObjective& two;
  const Minimum& minimum;
  double gain = 0.0, scatter = 1.0;
};

/// How likely two components are against what was fitted, by the gain, less for what chance gains over many cycles and for a ratio far
/// from 1; 0 where the flop lies beyond the sampling limit.
double likelihood_of_second(const SecondFound& found, const Fit& fit);

/// Averages the pulse lengths of a flop, at both levels, with those that turn two components best: one candidate more, of a weight that
/// the gain tells against all others together (estimate.hpp, `averaged`), less for what chance gains over many cycles. Leaves the fit
/// as it is where that weight is not heard or the flop lies beyond the sampling limit, and lengths that have no interval.
void heed_second(const SecondFound& found, const FitOptions& options, Fit& fit);

}  // namespace halfturn::infer
