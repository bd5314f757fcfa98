// SPDX-License-Identifier: Apache-2.0
#pragma once
#include "model/dynamics/members.hpp"

/// Thermal motional states: couplings of levels, their weights, and few members in place of many levels.
namespace halfturn::dynamics::detail {

/// Extends couplings.value to `levels` entries; starts anew where eta or the order of the sideband differ.
/// Source: Leibfried et al. (2003), Eq. (70); three-term recurrence of the generalised Laguerre polynomials (M. Abramowitz and
/// I. Stegun, Handbook of Mathematical Functions (1964), 22.7.12), scaled by sqrt(n!/(n+s)!).
void extend_couplings(double lamb_dicke, int order, std::size_t levels, Couplings& couplings);

/// Fewer couplings that average every function band-limited to `phase` alike, to 1e-11: interpolation at Chebyshev points
/// over the span of couplings. Weights may be negative. `scratch` grows to five times the larger of both sizes.
void merge(const WeightedCouplings& levels, std::size_t points, std::vector<double>& scratch, WeightedCouplings& merged);

/// How many points that takes, for couplings that span `span`.
std::size_t merged_size(double phase, double span);

/// Members of a thermal state, by levels or merged, whichever costs less.
Status thermal_members(const Ensemble& ensemble, const Demand& demand, EnsembleWorkspace& workspace);

/// The mean of |x|, level by level, atoms starting in g; NaN where the levels are too many.
OfParameter mean_thermal_coupling(const Ensemble& ensemble, EnsembleWorkspace& workspace);

/// The factor of the lowest level that couples, atoms starting in g; 0 where none does.
double lowest_coupling(const Ensemble& ensemble, EnsembleWorkspace& workspace);

}  // namespace halfturn::dynamics::detail
