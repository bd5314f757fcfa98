// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <string>
#include <utility>
#include <vector>

#include "plugin/rehearse/apparatus.hpp"

/// Ways of keeping a pulse right, scored side by side on the same truth.
namespace halfturn::rehearse {

/// The pulse and the carrier that one way of working has in force, and how wrong they were each minute so far.
class Strategy {
 public:
  Strategy(std::string name, double first_pulse_s, double first_carrier_hz)
      : pulse_s(first_pulse_s), carrier_hz(first_carrier_hz), name_(std::move(name)) {}

  double pulse_s;     // in force
  double carrier_hz;  // in force

  /// Notes how far the pulse turns beyond `angle_rad` at this moment, and how far the carrier stands off the line.
  void note(const Apparatus& apparatus, double time_s, double angle_rad);

  const std::string& name() const { return name_; }
  const std::vector<double>& errors_rad() const { return errors_rad_; }
  const std::vector<double>& carrier_errors_hz() const { return carrier_errors_hz_; }

 private:
  std::string name_;
  std::vector<double> errors_rad_;
  std::vector<double> carrier_errors_hz_;
};

inline constexpr double kGoodRotationRad = 0.050;

/// A night in numbers; NaN where nothing was noted.
struct Score {
  double rms_rad;
  double percentile_99_rad;  // of the magnitude: the smallest noted that 99 % do not exceed
  double worst_rad;          // largest magnitude
  double good_fraction;      // of the minutes, those within kGoodRotationRad
  double carrier_rms_hz;
};

Score score(const Strategy& strategy);

}  // namespace halfturn::rehearse
