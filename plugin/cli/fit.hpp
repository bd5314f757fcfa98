// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <string>
#include <vector>

#include "plugin/cli/command.hpp"

namespace halfturn::cli {

struct FitOptions {
  std::vector<std::string> files;
  std::string config;  // empty: nothing is known beforehand
  std::string drive;   // empty: as each file says
  bool json = false;
  bool together = false;  // all files are scans of one drive, fitted jointly
};

/// Fits scan files without a daemon and without history. All files are read, whatever is wrong with one; fitted
/// together, they give one report, or none where one is wrong.
Exit fit(const FitOptions& options, Streams& streams);

}  // namespace halfturn::cli
