// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <vector>
#include <optional>
#include <string>

#include "plugin/cli/command.hpp"

namespace halfturn::cli {

struct IntensityOptions {
  std::string transition;
  std::optional<double> rabi_hz, intensity_w_m2, power_w;  // one of them
  std::optional<double> waist_m;
  bool json = false;
  bool list = false;  // the catalogue instead
};

/// Rabi frequency, field, intensity and power of a transition, each from one of them.
Exit intensity(const IntensityOptions& options, Streams& streams);

/// Each source once. A number made of several names all of them (`X; Y`), which are taken apart; a source that only says more
/// of another (`X, table 2` beside `X`) is told with it, as `X: table 2`.
std::vector<std::string> sources_once(const std::vector<std::string>& given);

}  // namespace halfturn::cli
