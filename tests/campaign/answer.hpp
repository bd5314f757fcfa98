// SPDX-License-Identifier: Apache-2.0
#pragma once
#include "model/infer/fit.hpp"
#include "plugin/wire/reply.hpp"
#include "tests/campaign/families.hpp"

/// The daemon's part: a case fitted and decided by the service's own calls.
namespace halfturn::campaign {

struct Answered {
  wire::Fitted fitted;  // intervals of 95 %
  infer::Fit fit;       // behind it, with the intervals of 68.27 % as its second ones
};

/// The reply to the case's scan, and its fit. A case with a history goes through a log in memory; others are not stored. The
/// clock stands.
Answered answer(const Case& of);

}  // namespace halfturn::campaign
