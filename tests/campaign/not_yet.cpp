// SPDX-License-Identifier: Apache-2.0
#include "tests/campaign/not_yet.hpp"

namespace halfturn::campaign {
namespace {

constexpr std::string_view kNothingSeen = "scans refused for showing no oscillation, or not enough of one, are fitted all the same; those used are covered";
constexpr std::string_view kNoTwoDampings = "no candidate has two dampings at once";
constexpr std::string_view kNoEnsemble = "no candidate averages over an ensemble yet";
constexpr std::string_view kDeadTimeHeld = "a dead time that the data contradict is held to what is configured until it is three sigma off";
constexpr std::string_view kAlike = "two frequencies fit alike, so that an interval is the right one half of the time, whoever computes it";
constexpr std::string_view kNoOutliers = "no likelihood allows for outliers yet";
constexpr std::string_view kScatterRefused = "scatter above four times the variance, or with a large residual, is refused";
constexpr std::string_view kNoDrift = "a change of the coupling along the scan is not looked for";
constexpr std::string_view kSecondComponent = "a second component passes for scatter";
constexpr std::string_view kRanAway = "a scan without oscillation from which every start runs away is refused as no_fit";
constexpr std::string_view kOverdamped = "more damping than oscillation: only the product of squared coupling and time is seen";
constexpr std::string_view kOtherShape = "a line of another shape and centre fits a narrow window nearly as well";
constexpr std::string_view kOneSide = "one side of a line is told from a ramp only where its top lies well inside the window";
constexpr std::string_view kOutside = "the line lies outside the window, where nothing tells its centre, and noise is fitted";
constexpr std::string_view kSecondLine = "a second line passes for scatter or for the breadth of the first";

}  // namespace

// Reached over 20,000 scans of seed 1; figures within three sigma of their target stand by the target. `used` is of the decidable
// scans (10,000 scans).
const std::vector<NotYet>& not_yet() {
  static const std::vector<NotYet> table = {
      {"few_shots", Figure::low_95, 0.882, kNothingSeen},
      {"grid_random", Figure::low_95, 0.889, kNothingSeen},
      {"grid_geometric", Figure::low_95, 0.895, kNothingSeen},
      {"grid_gapped", Figure::low_95, 0.9, kNothingSeen},
      {"decay", Figure::low_95, 0.868, kNothingSeen},
      {"dephasing", Figure::low_95, 0.892, kNothingSeen},
      {"leak", Figure::low_95, 0.882, kNothingSeen},
      {"combinations", Figure::wrong, 0.009, kNoTwoDampings},
      {"combinations", Figure::used, 0.923, kNoTwoDampings},
      {"combinations", Figure::low_68, 0.537, kNoTwoDampings},
      {"combinations", Figure::low_95, 0.795, kNoTwoDampings},
      {"doppler", Figure::wrong, 0.1573, kNoEnsemble},
      {"doppler", Figure::low_68, 0.349, kNoEnsemble},
      {"doppler", Figure::low_95, 0.558, kNoEnsemble},
      {"cloud", Figure::wrong, 0.0449, kNoEnsemble},
      {"cloud", Figure::used, 0.923, kNoEnsemble},
      {"cloud", Figure::low_68, 0.507, kNoEnsemble},
      {"cloud", Figure::low_95, 0.742, kNoEnsemble},
      {"thermal", Figure::wrong, 0.0315, kNoEnsemble},
      {"thermal", Figure::low_68, 0.534, kNoEnsemble},
      {"thermal", Figure::low_95, 0.768, kNoEnsemble},
      {"dead_time_beyond", Figure::low_68, 0.338, kDeadTimeHeld},
      {"dead_time_beyond", Figure::low_95, 0.501, kDeadTimeHeld},
      {"under_one_cycle", Figure::low_95, 0.895, kNothingSeen},
      {"alias_inside", Figure::low_68, 0.247, kAlike},
      {"alias_inside", Figure::low_95, 0.342, kAlike},
      {"low_contrast", Figure::low_68, 0.578, kNothingSeen},
      {"low_contrast", Figure::low_95, 0.811, kNothingSeen},
      {"outliers", Figure::used, 0.356, kNoOutliers},
      {"scatter", Figure::used, 0.8, kScatterRefused},
      {"drifting", Figure::wrong, 0.027, kNoDrift},
      {"drifting", Figure::used, 0.902, kNoDrift},
      {"drifting", Figure::low_95, 0.754, kNoDrift},
      {"two_component", Figure::wrong, 0.0518, kSecondComponent},
      {"two_component", Figure::low_95, 0.674, kSecondComponent},
      {"flat", Figure::refused, 0.935, kRanAway},
      {"ramp", Figure::refused, 0.932, kRanAway},
      {"saturated", Figure::low_68, 0.29, kOverdamped},
      {"saturated", Figure::low_95, 0.476, kOverdamped},
      {"line_clean", Figure::low_68, 0.58, kOtherShape},
      {"line_clean", Figure::low_95, 0.828, kOtherShape},
      {"line_far", Figure::low_95, 0.85, kOtherShape},
      {"line_power", Figure::used, 0.805, kOtherShape},
      {"line_power", Figure::low_68, 0.429, kOtherShape},
      {"line_power", Figure::low_95, 0.742, kOtherShape},
      {"line_doppler", Figure::low_68, 0.405, kNoEnsemble},
      {"line_doppler", Figure::low_95, 0.638, kNoEnsemble},
      {"line_decay", Figure::low_68, 0.498, kOtherShape},
      {"line_decay", Figure::low_95, 0.751, kOtherShape},
      {"line_edge", Figure::used, 0.839, kOneSide},
      {"line_edge", Figure::low_68, 0.533, kOneSide},
      {"line_edge", Figure::low_95, 0.751, kOneSide},
      {"line_beyond", Figure::low_68, 0.262, kOutside},
      {"line_beyond", Figure::low_95, 0.4, kOutside},
      {"line_side_lobe", Figure::low_68, 0.175, kOutside},
      {"line_side_lobe", Figure::low_95, 0.282, kOutside},
      {"line_two", Figure::wrong, 0.0405, kSecondLine},
      {"line_two", Figure::low_95, 0.178, kSecondLine},
  };
  return table;
}

}  // namespace halfturn::campaign
