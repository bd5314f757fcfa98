// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <string>

#include "plugin/cli/command.hpp"

namespace halfturn::cli {

struct StatusOptions {
  std::string endpoint = "tcp://127.0.0.1:7411";
  double timeout_s = 5;
  bool json = false;
};

/// Asks a running daemon what is wrong, if anything, and what to do about it.
Exit status(const StatusOptions& options, Streams& streams);

}  // namespace halfturn::cli
