// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <cstdint>
#include <optional>
#include <string>

#include "model/quantity/result.hpp"
#include "plugin/rehearse/apparatus.hpp"

/// What a rehearsal is asked to do.
namespace halfturn::rehearse {

struct RehearseOptions {
  std::string endpoint = "tcp://127.0.0.1:7411";  // requests of the daemon
  double timeout_s = 10;                          // of one attempt; three without a reply end the rehearsal
  std::string drive;                              // of the daemon's configuration
  std::string pulse;                              // scored; empty: the one whose angle is nearest pi
  double hours = 8;                               // simulated
  std::uint64_t seed = 1;
  std::string starts_at;                          // simulated, RFC 3339; empty: so that the night ends now
  double flop_every_s = 300;
  double line_every_s = 2400;
  std::int64_t shots = 100;                       // a point
  std::int64_t flop_points = 40;
  std::int64_t line_points = 41;
  std::optional<double> rabi_hz;                  // at the start; none: what makes the scored pulse right
  ApparatusSettings apparatus;                    // its rabi_hz is replaced by the above
  bool json = false;                              // one JSON object instead of the table
};

/// A fault that names the option where one is out of range.
Result<void> check(const RehearseOptions& options);

}  // namespace halfturn::rehearse
