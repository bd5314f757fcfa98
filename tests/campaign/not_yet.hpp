// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <string_view>
#include <vector>

/// Figures of the campaign that are not where they should be, and where they are instead.
namespace halfturn::campaign {

enum class Figure { wrong, used, refused, low_68, high_68, low_95, high_95, efficiency, rabi_efficiency };

struct NotYet {
  std::string_view family;
  Figure figure;
  double reached;         // a bound that must not get worse
  std::string_view why;
};

const std::vector<NotYet>& not_yet();

}  // namespace halfturn::campaign
