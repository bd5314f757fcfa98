// SPDX-License-Identifier: Apache-2.0
#pragma once

namespace halfturn::dynamics {

enum class Prepared { ground, excited };

/// What population that decayed out of the pair looks like: dark (the population seen is rho_ee) or bright (1 - rho_gg).
enum class LostReads { dark, bright };

/// How a pulse begins and what is seen after it.
struct Start {
  Prepared prepared = Prepared::ground;
  double impurity = 0.0;  // fraction found in the other state before the pulse, incoherently; 0 ... 0.5
  LostReads lost_reads = LostReads::dark;
};

}  // namespace halfturn::dynamics
