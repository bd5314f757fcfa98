// SPDX-License-Identifier: Apache-2.0
#pragma once

namespace halfturn::cli {

/// The whole program: reads the command line, does what it says, and returns the exit status of the contract (0 done; 1 done,
/// but at least one scan was refused; 2 bad usage or bad input; 3 anything else).
int run(int argc, char** argv);

}  // namespace halfturn::cli
