// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <string>

#include "plugin/cli/command.hpp"

namespace halfturn::cli {

struct DriftOptions {
  std::string log;
  std::string drive;         // empty: all
  std::string since, until;  // RFC 3339, or a date for its first moment in UTC; empty: no bound
  std::string csv;           // a file to write the fits to; empty: none
  bool json = false;
};

/// The drift report from the log, which a daemon may be writing meanwhile.
Exit drift(const DriftOptions& options, Streams& streams);

}  // namespace halfturn::cli
