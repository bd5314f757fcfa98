// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <ostream>
#include <string>

#include "model/quantity/result.hpp"
#include "plugin/cli/style.hpp"

/// The commands: one file each, options as plain structs, results to `out` and everything else to `err`.
namespace halfturn::cli {

/// The program's exit status. Of several, the worst wins: 3, then 2, then 1.
enum Exit : int {
  kDone = 0,
  kRefused = 1,   // done, but at least one scan was refused
  kBadInput = 2,  // bad usage or bad input
  kFailed = 3,    // anything else
};

inline Exit worst(Exit a, Exit b) { return a > b ? a : b; }

struct Streams {
  std::ostream& out;
  std::ostream& err;
  Style style;  // of `out`
};

/// `halfturn: CONTEXT: where: message`; what is empty is left out.
inline void print_fault(std::ostream& err, const std::string& context, const Fault& fault) {
  err << "halfturn: ";
  if (!context.empty()) err << context << ": ";
  if (!fault.where.empty()) err << fault.where << ": ";
  err << fault.message << '\n';
}

}  // namespace halfturn::cli
