// SPDX-License-Identifier: Apache-2.0
#pragma once
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

}  // namespace halfturn::cli
