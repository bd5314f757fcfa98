// SPDX-License-Identifier: Apache-2.0
#include "tests/campaign/not_yet.hpp"

namespace halfturn::campaign {
namespace {

constexpr std::string_view kNotSeen = "a Doppler shift whose damping does not show passes for a faster coupling, and nothing in the points tells";
constexpr std::string_view kDeadTimeHeld = "a dead time that the data contradict is held to what is configured until it is three sigma off";
constexpr std::string_view kAlike = "two frequencies fit alike, so that an interval is the right one half of the time, whoever computes it";
constexpr std::string_view kSecondComponent = "a second component passes for scatter";
constexpr std::string_view kOverdamped = "more damping than oscillation: only the product of squared coupling and time is seen";
constexpr std::string_view kFringes = "fringes of a line broadened by power and dephasing lie as close as its noise lets them";
constexpr std::string_view kOutside = "the line lies outside the window, where nothing tells its centre, and noise is fitted";
constexpr std::string_view kSecondLine = "a second line passes for scatter or for the breadth of the first";

}  // namespace

// Reached over 20,000 scans of seed 2; figures within three sigma of their target stand by the target.
const std::vector<NotYet>& not_yet() {
  static const std::vector<NotYet> table = {
      {"doppler", Figure::low_68, 0.519, kNotSeen},
      {"doppler", Figure::low_95, 0.832, kNotSeen},
      {"dead_time_beyond", Figure::low_68, 0.455, kDeadTimeHeld},
      {"dead_time_beyond", Figure::low_95, 0.664, kDeadTimeHeld},
      {"alias_inside", Figure::low_68, 0.237, kAlike},
      {"alias_inside", Figure::low_95, 0.333, kAlike},
      {"two_component", Figure::wrong, 0.036, kSecondComponent},
      {"two_component", Figure::low_95, 0.725, kSecondComponent},
      {"saturated", Figure::low_95, 0.804, kOverdamped},
      {"line_power", Figure::used, 0.827, kFringes},
      {"line_power", Figure::low_68, 0.481, kFringes},
      {"line_power", Figure::low_95, 0.821, kFringes},
      {"line_side_lobe", Figure::low_95, 0.804, kOutside},
      {"line_two", Figure::wrong, 0.0293, kSecondLine},
      {"line_two", Figure::low_95, 0.258, kSecondLine},
  };
  return table;
}

}  // namespace halfturn::campaign
