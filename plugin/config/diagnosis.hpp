// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <string>

namespace halfturn::config {

/// A fault of a file: the place as `line:column` (from 1; 0 where it has no place) and `path`
/// (`drives.red.pulses.flip.length`).
struct Diagnosis {
  int line = 0, column = 0;
  std::string path;
  std::string message;  // `found ..., expected ...`
};

/// `file:line:column: path: message`, as `check` prints it; without the parts that are empty.
std::string to_text(const Diagnosis& diagnosis, const std::string& file);

}  // namespace halfturn::config
