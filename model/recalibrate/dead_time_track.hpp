// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <cstdint>
#include <optional>

#include "model/infer/prior.hpp"

/// The dead time of a drive as its scans tell it.
namespace halfturn::recalibrate {

/// A constant that may drift slowly and, when hardware is changed, jump: a weighted mean of what the scans' points alone say, in which
/// earlier scans fade, beside a mean of the last few that shows when the two part (two moving averages; cf. E. S. Page, Biometrika 41, 100
/// (1954)). A fold over accepted flops; times in ns since 1970, the dead time in s.
class DeadTimeTrack {
 public:
  /// A believed flop's dead time without any prior in it, and its sigma; anything not finite is passed over. One that is more than 4 sigma
  /// from all before moves nothing unless the next one agrees with it.
  void add(std::int64_t at, double value, double sigma);

  /// Mean and standard deviation; none before three scans, and none while a scan is doubted. Wider where the scans disagree more than their errors allow, or where the
  /// last few lead away from those before.
  std::optional<infer::Known> known() const;

  std::int64_t at() const { return at_; }  // of the last scan that counted

 private:
  struct Mean {
    double value = 0.0, variance = 0.0;
    void add(double x, double v, double keep);
  };
  void restart(const infer::Known& a, const infer::Known& b);

  int scans_ = 0;
  Mean all_, last_;
  double excess_ = 1.0;  // squared innovations over their expectation, of late
  std::optional<infer::Known> doubted_;
  std::int64_t at_ = 0;
};

}  // namespace halfturn::recalibrate
