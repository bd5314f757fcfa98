// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <string>
#include <string_view>

#include "plugin/cli/style.hpp"
#include "plugin/wire/reply.hpp"

namespace halfturn::cli {

/// A fitted scan for reading: verdict and reasons, the estimates with their intervals, the pulses, the dynamics and the
/// quality of the fit. Ends in a line feed.
std::string report(const wire::Fitted& scan, const Style& style);

/// What a field of the contract is called and measured in: `rabi_hz` is `Rabi frequency`, `Hz`. An unknown one keeps its
/// name, with the unit that its ending says.
struct Label {
  std::string text;
  std::string unit;
};
Label label(std::string_view field);

}  // namespace halfturn::cli
