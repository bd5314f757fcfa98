// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <cstdint>
#include <string>

namespace halfturn::recalibrate {

/// What of a pulse is proposed anew: its length, in s, or the relative drive amplitude, its length being fixed.
enum class Adjust : std::uint8_t { length, amplitude };

/// A calibrated pulse of a drive, as configured. Its value is what is adjusted, in s or as a relative drive amplitude.
struct Pulse {
  std::string name;
  double angle_rad = 0.0;
  double length_s = 0.0;     // in force until the experiment reports another; fixed where the amplitude is adjusted
  double step = 0.0;         // values are multiples of it; 0: any value
  double minimum = 0.0;
  double maximum = 0.0;      // limits of what may be proposed
  double area_factor = 1.0;  // pulse area over peak times length, of its shape
  Adjust adjust = Adjust::length;
  double amplitude = 0.0;    // in force until the experiment reports another, where it is adjusted

  double configured() const { return adjust == Adjust::amplitude ? amplitude : length_s; }
};

/// When a fit is believed. Defaults are those of the contract.
struct Accept {
  double max_step = 0.20;              // relative, against the tracked prediction
  double min_cycles = 0.75;            // lower end of the interval of the cycles seen
  double max_angle_error_rad = 0.100;  // one sigma, of a pulse
  double min_evidence = 30.0;          // deviance gained over a flat line and over the best monotone curve
  double rival_margin = 25.0;          // deviance by which the runner-up must fit worse
  double min_p_value = 1e-4;           // goodness of fit, after excess scatter is counted
  double max_carrier_step = 0.5;       // of the line's full width at half maximum
  double max_carrier_error = 0.05;     // of the line's full width at half maximum, one sigma
};

}  // namespace halfturn::recalibrate
