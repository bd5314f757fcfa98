// SPDX-License-Identifier: Apache-2.0
#pragma once
#include "model/dynamics/modes.hpp"

/// A detuning scan, many detunings at a time.
namespace halfturn::dynamics::detail {

inline constexpr int kBlock = 64;  // detunings; 9 kB of arrays, which stay in the first cache

/// Detunings in, rows out. `doubtful` is above 0 where decompose() would refuse, where roots did not settle within the fixed
/// number of steps, and where the pair of roots is real: those points have to be done one by one.
struct DetuningBlock {
  alignas(64) double detuning[kBlock];
  int count = kBlock;  // so many are computed
  double slow[kBlock], second[kBlock], second_x[kBlock];
  double rows[kRowCount][kBlock];
  double doubtful[kBlock];
};

/// All rows at length t, 0 <= t, |generalised Rabi frequency * t| <= kLargestPhase, of a system with some damping.
void damped_block(const Problem& problem, const Wanted& wanted, double t, DetuningBlock& block);

/// The same without any damping; the derivatives by a damping are not computed.
void undamped_block(const Problem& problem, double t, DetuningBlock& block);

/// Those derivatives, where there is no damping yet.
void undamped_by_damping(const Problem& problem, double t, DetuningBlock& block);

}  // namespace halfturn::dynamics::detail
