// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <cstdint>
#include <string>

namespace halfturn::cli {

/// `2026-02-03` from days since 1970-01-01, in the Gregorian calendar.
std::string date_text(std::int64_t day);

/// RFC 3339 in UTC from nanoseconds since 1970, with as many digits of a second as it needs (none, 3, 6 or 9):
/// `2026-02-03T04:05:06.789Z`.
std::string time_text(std::int64_t time_ns);

}  // namespace halfturn::cli
