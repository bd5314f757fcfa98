// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <optional>
#include <string>

#include "model/atom/transition.hpp"

namespace halfturn::atom {

/// Whether the level can be: I + J at most 10, F among |I-J| ... I+J, m among -F ... F (of J where I = 0). Fault `bad_value`
/// at `where` that lists what exists; `prime` is ' for the upper level, in the names F' and m'.
Result<void> check_level(const Level& level, int twice_I, const std::string& prime, const std::string& where);

/// Whether electric-dipole light (or, for `Multipole::magnetic_dipole`, a magnetic field) of this polarisation can drive
/// lower -> upper. Fault `bad_value` at `where` naming the rule that forbids it. Rules (common to the textbooks, such as
/// Foot, "Atomic Physics" (2005), table 5.1 and section 6.1): parity changes (magnetic dipole: stays); J changes by 0 or 1
/// and not 0 to 0; the same for F; m = 0 does not go to m' = 0 where F' = F (J' = J without hyperfine structure); m' - m =
/// q. A change of spin forbids nothing. What is not stated (parity, F, m, polarisation) is not held against the transition.
Result<void> check_dipole(Multipole kind, const Level& lower, const Level& upper, int twice_I,
                          std::optional<Polarisation> polarisation, const std::string& where);

}  // namespace halfturn::atom
