// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <cstddef>
#include <limits>
#include <optional>
#include <string>
#include <vector>

#include "model/drift/summary.hpp"
#include "model/quantity/result.hpp"
#include "plugin/log/log.hpp"

/// The drift report: what a log holds of a drive's fits, by day and fit by fit.
namespace halfturn::cli {

/// One drive's part. Days and trend are over the duration scans at one drive amplitude, the one that most scans were taken at:
/// a Rabi frequency at another amplitude is not drift. The scans left aside for that are counted.
struct DriveDrift {
  std::string drive;
  drift::Summary summary;
  double drive_amplitude = std::numeric_limits<double>::quiet_NaN();  // NaN: scans did not say
  std::size_t at_other_amplitudes = 0;
};

struct DriftReport {
  std::string drive;                      // the filter; empty: all
  std::optional<log::Time> since, until;  // since <= taken_at < until
  std::vector<DriveDrift> drives;         // by name
  std::vector<log::Event> fits;           // oldest first, of all drives
};

/// Reads the report from a log. Faults: `unknown_drive` where the log has never seen the drive, naming those it has;
/// `bad_value` where `until` is not after `since`; `log_unavailable`. A known drive without fits in the range is no fault.
Result<DriftReport> drift_report(log::Log& log, const std::string& drive, std::optional<log::Time> since,
                                 std::optional<log::Time> until);

/// A table for reading, a block a drive. With `colour` refused scans and falls of 5 % and more are set off by ANSI colours.
std::string to_table(const DriftReport& report, bool colour);

/// RFC 4180: a header, then a row a fit; lines end in CR LF; what is not known is an empty field. Numbers read back exactly.
std::string to_csv(const DriftReport& report);

/// One JSON object on one line, without a line feed: `drives` (by name: `days`, `trend`, `drive_amplitude`) and `fits`; units in
/// the names, null for what is not known.
std::string to_json(const DriftReport& report);

}  // namespace halfturn::cli
