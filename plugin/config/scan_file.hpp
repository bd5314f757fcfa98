// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <cstddef>
#include <optional>
#include <string>
#include <vector>

#include "plugin/config/diagnosis.hpp"
#include "plugin/wire/request.hpp"

/// Scan files: CSV with a header row, metadata above it.
namespace halfturn::config {

struct ScanLimits {
  std::size_t bytes = std::size_t{16} << 20;
  std::size_t points = 100'000;  // of one site
  std::size_t sites = 10'000;
};

/// A scan file as read: complete and consistent, or at most 50 faults in the order of the text.
struct ScanReading {
  std::optional<wire::Scan> scan;
  std::vector<Diagnosis> faults;
};

/// Reads a scan from the text of a file.
///
/// The first column is `duration_s`, `detuning_hz` or `amplitude`; the readout is `counts,shots`, `signal,sigma` or
/// `photons,exposures` in any order behind it; `site` may stand anywhere behind it. A point with an empty cell,
/// with `null` or with 0 shots was not measured. `shots`, `sigma` or `exposures` may be metadata instead of a column, one
/// number for all points.
///
/// A line before the header `# key: value` is metadata where the key is one of the scan object: scan_name, drive, taken_at,
/// pulse_s, drive_amplitude, carrier_hz, prepared, references and ambient (as `# references: {bright_counts: 950, ...}` or
/// one by one as `# references.bright_counts: 950`), at_s (`[0, 1.5, ...]`). A key that is nearly one of them is a fault;
/// any other line that begins with # is a remark. In a scan of durations pulse_s means nothing and is left out.
///
/// With sites the axis holds the points of all of them, in the order in which they first appear; a point that a site lacks
/// was not measured there.
ScanReading read_scan(const std::string& text, const ScanLimits& limits = {});

/// Reads the file; a file that cannot be read is a fault at 0:0. A scan without a name takes the file's, without folder and
/// ending.
ScanReading read_scan_file(const std::string& path, const ScanLimits& limits = {});

}  // namespace halfturn::config
