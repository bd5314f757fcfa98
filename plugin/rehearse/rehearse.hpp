// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <iosfwd>

#include "plugin/rehearse/options.hpp"

namespace halfturn::rehearse {

/// `halfturn rehearse`: drives a running daemon through a simulated night and writes the table (or one line of JSON) to `out`,
/// progress and faults to `progress`. Ctrl-C (SIGINT) and SIGTERM end the night with the table so far; a second one ends the
/// program at once.
/// Returns the exit status: 0 done; 1 done, but a scan was refused; 2 bad options; 3 no daemon, or one that stopped answering
/// (the table so far is written).
int run(const RehearseOptions& options, std::ostream& out, std::ostream& progress);

}  // namespace halfturn::rehearse
