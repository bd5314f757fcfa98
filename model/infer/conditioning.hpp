// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <limits>
#include <string_view>
#include <vector>

#include "model/infer/scan_objective.hpp"
#include "model/infer/solver.hpp"

/// How well the free parameters of a fit can be told apart.
namespace halfturn::infer {

/// Parameters go by the names that their estimates have in a reply: `rabi_hz`, `line_offset_hz`, `detuning_hz` (its magnitude),
/// `dead_time_s`, `floor`, `contrast`, `decay_s`, `dephasing_s`, `loss_s`, `rabi_spread`, `detuning_spread_hz`, `cloud_ratio`,
/// `mean_phonons`, `rabi_drift`; of scans of the amplitude `rabi_per_amplitude_hz` and `compression`.
struct Conditioning {
  /// Largest over smallest eigenvalue of the information (priors counted) scaled to a unit diagonal, of the parameters that are not at
  /// a bound: 1 where each is told on its own, infinite where a combination is not told at all. NaN without a fit.
  double condition = std::numeric_limits<double>::quiet_NaN();
  /// The two estimates that are hardest to tell apart, by their names, with their correlation; empty and NaN where fewer than two
  /// parameters are free, or a combination is not told at all.
  std::string_view one, other;
  double correlation = std::numeric_limits<double>::quiet_NaN();
  std::vector<std::string_view> at_bound;  // parameters whose best value lies at a bound, in the solver's order
};

/// Inverse of the information over the parameters that are not at a bound; rows and columns of those that are stay 0. NaN where it is
/// singular.
Matrix covariance_of(const Minimum& minimum);

/// Of a minimum of this objective, whose lead is Lead::Kind::generalised. Equations: G. H. Golub, C. F. Van Loan, Matrix Computations,
/// 4th ed. (2013), section 2.6.2 (condition in the 2-norm).
Conditioning conditioning(const ScanObjective& objective, const Minimum& minimum);

}  // namespace halfturn::infer
