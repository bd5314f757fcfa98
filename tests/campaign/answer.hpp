// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <string>

#include "plugin/wire/reply.hpp"
#include "tests/campaign/families.hpp"

/// The daemon's part: a case fitted and decided by the service's own calls.
namespace halfturn::campaign {

/// The reply to the case's scan, at a level of the intervals, with the named candidate alone or (empty) with those of the
/// configuration. A case with a history goes through a Service with a log in memory and a clock that stands.
wire::Fitted answer(const Case& of, double level, const std::string& dynamics = {});

/// The least deviance, priors counted and excess scatter divided out, over all candidates with the length of pulse `pulse` (lines:
/// the line's offset, rad/s) held at `value`, less the least one anywhere: what the data hold against the value. A dead time that the configuration misstates is held as loosely as it is
/// off: what is configured wrongly is not the data's word.
double held_against(const Case& of, std::size_t pulse, double value);

/// Deviance that the best single line leaves of a scan whose counts are those expected: how plainly more is seen than one line.
double left_by_one_line(const Case& of);

}  // namespace halfturn::campaign
