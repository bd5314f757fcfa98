// SPDX-License-Identifier: Apache-2.0
#include "plugin/rehearse/options.hpp"

#include "model/quantity/format.hpp"
#include "plugin/wire/time.hpp"

namespace halfturn::rehearse {
namespace {

Result<void> within(const char* name, double value, double low, double high, const char* unit) {
  if (value >= low && value <= high) return {};
  return fault("bad_value", name, "found " + plain(value) + ", expected " + plain(low) + " to " + plain(high) + " " + unit);
}

}  // namespace

Result<void> check(const RehearseOptions& options) {
  if (options.drive.empty()) return fault("missing_field", "drive", "name the drive to rehearse, as the daemon's configuration has it");
  if (!options.starts_at.empty() && !wire::parse_time(options.starts_at)) {
    return fault("bad_value", "starts_at", "found '" + options.starts_at + "', expected a time such as 2026-02-03T18:00:00Z");
  }
  Result<void> result = within("hours", options.hours, 1.0 / 60, 24.0 * 366, "hours");
  if (result) result = within("timeout_s", options.timeout_s, 0.01, 3600, "s");
  if (result) result = within("flop_every_s", options.flop_every_s, 60, 86400, "s");
  if (result) result = within("line_every_s", options.line_every_s, 60, 86400 * 366, "s");
  if (result) result = within("shots", static_cast<double>(options.shots), 1, 1e6, "shots a point");
  if (result) result = within("flop_points", static_cast<double>(options.flop_points), 10, 1e4, "points");
  if (result) result = within("line_points", static_cast<double>(options.line_points), 10, 1e4, "points");
  if (result && options.rabi_hz) result = within("rabi_hz", *options.rabi_hz, 1e-3, 1e12, "Hz");
  if (result) result = within("apparatus.mishap_probability", options.apparatus.mishap_probability, 0, 1, "of the scans");
  return result;
}

}  // namespace halfturn::rehearse
