// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <optional>
#include <string>
#include <string_view>

#include "plugin/wire/request.hpp"

/// Times of day on the wire (RFC 3339, Klyne and Newman 2002).
namespace halfturn::wire {

/// Reads an RFC 3339 date and time (`2026-02-03T04:05:06.789Z`, or with an offset such as `+01:00`; a blank or `t` for `T`
/// and `z` for `Z` are read too) as nanoseconds since 1970 UTC. Digits behind the ninth of a second are dropped. A leap
/// second
/// (`:60`, at the end of a minute) reads as the first second of the next minute. Returns nothing for anything else, for a
/// time without offset, for a day that the month does not have, and outside 1678 to 2261 (what 64 bits of nanoseconds hold).
std::optional<Time> parse_time(std::string_view text);

/// Nanoseconds since 1970 UTC from whole seconds and nanoseconds (0 to 999,999,999) as the MessagePack timestamp has them;
/// nothing outside 1678 to 2261.
std::optional<Time> time_from_parts(std::int64_t seconds, std::uint32_t nanoseconds);

/// Writes a time in UTC with `Z`; as many digits of a second as it needs: none, 3, 6 or 9. parse_time reads it back exactly.
std::string format_time(Time time);

/// The clock of this computer.
Time now();

}  // namespace halfturn::wire
