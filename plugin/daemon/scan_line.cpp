// SPDX-License-Identifier: Apache-2.0
#include "plugin/daemon/scan_line.hpp"

#include <cmath>
#include <string_view>

#include "model/quantity/format.hpp"

namespace halfturn::daemon {

namespace {

/// Line scans are about the offset, all others about the coupling, or the coupling per amplitude.
std::string frequency(const wire::Fitted& scan) {
  for (const std::string_view wanted : {"line_offset_hz", "rabi_hz", "rabi_per_amplitude_hz"})
    for (const auto& [name, estimate] : scan.estimates) {
      if (name != wanted || !std::isfinite(estimate.value)) continue;
      const auto text = with_uncertainty(estimate.value, estimate.sigma, "Hz");
      if (wanted == "rabi_per_amplitude_hz") return text + " per unit of amplitude";
      return wanted == "rabi_hz" ? text : "line offset " + text;
    }
  return {};
}

}  // namespace

std::string scan_line(const wire::Fitted& scan) {
  std::string line = (scan.drive.empty() ? "(no drive)" : scan.drive) + " " + scan.scan_name + ": " + scan.verdict;
  if (!scan.stored) line += " (not stored)";
  if (const auto found = frequency(scan); !found.empty()) line += ", " + found;
  const char* separator = "; ";
  for (const auto& reason : scan.reasons) {
    line += separator + reason.code;
    separator = " ";
  }
  return line;
}

}  // namespace halfturn::daemon
