// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <string>
#include <vector>

namespace halfturn::recalibrate {

/// Why a scan was refused, or what to bear in mind where it was not: a stable code (schemas/reasons.yaml) and a sentence: what
/// was seen, what it may mean at the apparatus, what to do or to scan next.
struct Reason {
  std::string code;
  std::string text;
  bool refuses = false;  // else a caution
};

using Reasons = std::vector<Reason>;

}  // namespace halfturn::recalibrate
