// SPDX-License-Identifier: Apache-2.0
#include "tests/campaign/not_yet.hpp"

namespace halfturn::campaign {
namespace {

constexpr std::string_view kNotSeen = "a Doppler shift whose damping does not show passes for a faster coupling, and nothing in the points tells";
constexpr std::string_view kDeadTimeHeld = "a dead time that the data contradict is held to what is configured until it is three sigma off";
constexpr std::string_view kAlike = "two frequencies fit alike, so that an interval is the right one half of the time, whoever computes it";
constexpr std::string_view kSecondComponent = "a second component passes for scatter";
constexpr std::string_view kBeyondKnown = "a detuning beyond what is configured passes for a smaller contrast";
constexpr std::string_view kOutside = "the line lies at the edge of the window or outside, where a wing tells of its centre";
constexpr std::string_view kLessThanCycle = "of flops of less than a cycle only those that are seen not to be monotone have an interval, and theirs are wide";
constexpr std::string_view kDrift = "a drift below what its test sees passes for a dead time";
constexpr std::string_view kFringes = "fringes of a line broadened by power and dephasing lie as close as its noise lets them";
constexpr std::string_view kSecondLine = "a second line passes for scatter or for the breadth of the first";

}  // namespace

// Reached over a million scans of seeds 1, 2 and 3; figures that chance explains there stand by
// their target. `halfturn-campaign --limits` tells how much of that the data force (limits.hpp; 444 scans of seed 2):
// - doppler: 95 % intervals hold 0.84 at most, 0.82 with nominal ones where nothing hides the shift; 0.91 takes intervals
//   1.5 times as long on scans that are only damped. What is reached is what can be. Of the 68 % ones 0.63 and 0.58.
// - dead_time_beyond: 0.81 and 0.80 (68 %: 0.62 and 0.57), 0.75 where a right dead time is set aside no oftener than three
//   sigma say. There is room: the dead time is let go later than the best test would.
// - alias_inside: half of the nominal level, 0.475 and 0.34, whichever frequency is drawn. Below that lies who always takes
//   the same side: the higher frequency needs the smaller dead time, and the family draws the lower one more often.
// - two_component: 0.0007 wrong whoever answers, 0.0022 by answers at the likelihood's maximum; used intervals 0.92 where
//   only forced ones miss. Most of the wrong ones could be told from a single component.
const std::vector<NotYet>& not_yet() {
  static const std::vector<NotYet> table = {
      {"detuned_beyond_known", Figure::wrong, 0.00027, kBeyondKnown},
      {"doppler", Figure::low_68, 0.530, kNotSeen},
      {"doppler", Figure::low_95, 0.862, kNotSeen},
      {"dead_time_beyond", Figure::low_68, 0.426, kDeadTimeHeld},
      {"dead_time_beyond", Figure::low_95, 0.616, kDeadTimeHeld},
      {"alias_inside", Figure::low_68, 0.259, kAlike},
      {"alias_inside", Figure::low_95, 0.361, kAlike},
      {"under_one_cycle", Figure::high_68, 0.741, kLessThanCycle},
      {"drifting", Figure::wrong, 0.00099, kDrift},
      {"two_component", Figure::wrong, 0.0098, kSecondComponent},
      {"line_power", Figure::used, 0.930, kFringes},
      {"line_power", Figure::low_68, 0.630, kFringes},
      {"line_power", Figure::low_95, 0.913, kFringes},
      {"line_edge", Figure::used, 0.957, kOutside},
      {"line_beyond", Figure::low_95, 0.723, kOutside},
      {"line_side_lobe", Figure::low_95, 0.867, kOutside},
      {"line_two", Figure::wrong, 0.00072, kSecondLine},
      {"line_two", Figure::low_95, 0.262, kSecondLine},
  };
  return table;
}

}  // namespace halfturn::campaign
