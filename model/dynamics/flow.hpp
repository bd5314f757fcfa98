// SPDX-License-Identifier: Apache-2.0
#pragma once
#include "model/dynamics/modes.hpp"

/// The equations' own propagator, with its derivatives by the rates: slower than the modes, and indifferent to whether
/// they meet.
namespace halfturn::dynamics::detail {

/// (u, v, rho_ee, rho_gg) and its derivatives by each rate.
struct FlowState {
  double value[4];
  double by_rate[kRateCount][4];
};

/// exp(A t), column by column, and its Frechet derivatives along dA/d(rate).
struct Propagator {
  double value[16];
  double by_rate[kRateCount][16];
};

/// exp(A t) by scaling and squaring of a Taylor series, each step differentiated exactly. Only the wanted rows' derivatives
/// are formed. NaN where A t is not finite.
void propagate(const Problem& problem, const Wanted& wanted, double length_s, Propagator& result);

/// The state that the pulse begins with.
FlowState initial_state(const Problem& problem);

/// state <- propagator * state, derivatives included.
void apply(const Propagator& propagator, const Wanted& wanted, FlowState& state);

/// One row (see modes.hpp) of what is seen of a state.
double seen(const Problem& problem, const FlowState& state, int row);

}  // namespace halfturn::dynamics::detail
