// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <cstdint>
#include <limits>
#include <span>
#include <vector>

#include "model/quantity/result.hpp"

/// Statistics of a drive's fitted quantities over days.
namespace halfturn::drift {

enum class Verdict : std::uint8_t { apply, keep, refuse };

/// Fits of one drive, in any order: arrays of equal length. NaN where a fit has no such value.
struct Fits {
  std::span<const std::int64_t> time_ns;  // since 1970-01-01 00:00:00 UTC
  std::span<const double> rabi_hz;
  std::span<const double> rabi_sigma_hz;
  std::span<const Verdict> verdict;
  std::span<const double> intensity_w_m2;
};

inline constexpr double kNone = std::numeric_limits<double>::quiet_NaN();

/// One UTC day that has scans. Medians are over its fits that were not refused and have the value; NaN where there are none.
struct Day {
  std::int64_t day = 0;  // days since 1970-01-01
  int scans = 0;
  int refused = 0;
  int used = 0;                     // fits in the median of the Rabi frequency
  double rabi_hz = kNone;           // median
  double rabi_sigma_hz = kNone;     // standard error of that median
  double intensity_w_m2 = kNone;    // median
  double since_first = kNone;       // rabi_hz over that of the first day that has one, minus 1
  double since_previous = kNone;    // the same against the latest earlier day that has one
};

/// Straight line through the Rabi frequency over time, by weighted least squares.
struct Trend {
  int fits = 0;                     // not refused, with a value and a positive sigma
  double slope_hz_per_hour = kNone;
  double slope_sigma = kNone;       // widened by scatter
  double slope_low = kNone, slope_high = kNone;  // 95 % interval
  double mean_hz = kNone;           // weighted mean
  double relative_per_hour = kNone; // slope and its interval over the weighted mean
  double relative_low = kNone, relative_high = kNone;
  double scatter = kNone;           // sqrt(chi-square / degrees of freedom): 1 where fits scatter as their sigmas say
};

struct Summary {
  std::vector<Day> days;            // ascending
  Trend trend;
};

/// Summarises the fits. The trend has an interval from three fits at two or more different times; its sigma is that of the
/// weights times `scatter` where that is above 1 (Birge, Phys. Rev. 40, 207 (1932); never narrower than the fits' own
/// sigmas), its interval that of Student's t with n - 2 degrees of freedom. The standard error of a median is 1.2533
/// sigma/sqrt(n) from three fits on (exact for many normal values, up to 15 % too large for few), with sigma the larger of
/// the fits' median sigma and 1.4826 times their median absolute deviation; below three fits it is the fits' sigma / sqrt(n).
/// Fault `bad_shape` where the arrays differ in length.
Result<Summary> summarise(const Fits& fits);

/// The median, of an even count the mean of the middle two; NaN of none. Values must not be NaN.
double median(std::vector<double> values);

/// The t with which a share `coverage` (0 to 1, exclusive) of Student's distribution lies within -t ... t.
/// |relative error| < 1e-9 for degrees >= 1. Abramowitz & Stegun (1964), 26.7.3 and 26.7.4 inverted; beyond 400 degrees 26.7.5.
double student_t(double coverage, int degrees);

}  // namespace halfturn::drift
