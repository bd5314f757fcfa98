// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <functional>
#include <iosfwd>
#include <nlohmann/json.hpp>
#include <optional>
#include <string>
#include <vector>

#include "plugin/rehearse/drive.hpp"

/// The night: minute after minute, every drive in turn.
namespace halfturn::rehearse {

/// Where the night stands, for whoever watches it.
struct Moment {
  double done = 0;        // fraction of the night
  std::string time;       // simulated, RFC 3339
  std::string verdict;    // the last one
};

/// Called every simulated minute; the night ends early where it returns false.
using Watch = std::function<bool(const Moment&)>;

/// The night as it was, or as far as it came.
struct Night {
  std::string starts_at;         // simulated, RFC 3339
  double minutes = 0;            // simulated
  double wall_s = 0;
  bool interrupted = false;      // by the watcher
  std::optional<Fault> ended_by; // what ended it early otherwise
  std::uint64_t seed = 0;
  std::vector<RehearsedDrive> drives;
};

/// Rehearses a night. A Fault where it cannot begin (options, an unknown drive, no daemon); later ones are in `ended_by`.
Result<Night> rehearse_night(const RehearseOptions& options, const Ask& ask, const Watch& watch);

/// The table that a person reads: a block a drive.
void write_table(const Night& night, std::ostream& out);

/// The same as one JSON object; angles in rad, times in s, frequencies in Hz.
nlohmann::json to_json(const Night& night);

}  // namespace halfturn::rehearse
