// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <string>

#include "plugin/cli/command.hpp"

namespace halfturn::cli {

/// Reads a configuration and prints every fault as `file:line:column: path: found ..., expected ...`, or that it is in order
/// and what it holds.
Exit check(const std::string& file, Streams& streams);

}  // namespace halfturn::cli
