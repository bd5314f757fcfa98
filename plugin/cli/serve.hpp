// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <string>

#include "plugin/cli/command.hpp"

namespace halfturn::cli {

struct ServeOptions {
  std::string config;
  unsigned threads = 0;  // that fit; 0: one a hardware core
  bool quiet = false;    // warnings and errors alone
  bool verbose = false;
};

/// The daemon, until it is told to stop.
Exit serve(const ServeOptions& options, Streams& streams);

}  // namespace halfturn::cli
