// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <optional>
#include <vector>

#include "model/dynamics/ensemble.hpp"
#include "model/infer/candidate.hpp"

namespace halfturn::infer {

/// A quantity known beforehand: normal, mean and standard deviation; sigma 0 holds it fixed.
struct Known {
  double mean = 0.0;
  double sigma = 0.0;
};

/// Where a frequency must lie, rad/s.
struct Expected {
  double low = 0.0;
  double high = 0.0;
};

/// What is known before a scan is looked at: from the configuration, and from the drive's history where it has one. Angular
/// rates in rad/s, decay rates in 1/s.
struct Prior {
  std::optional<Expected> expect;        // of the Rabi frequency; without: below the scan's sampling limit; none for scans of amplitudes
  std::optional<Known> log_rabi;         // history's prediction of ln(Omega / (rad/s)) at the scan's time and drive amplitude; for
                                         // a scan of amplitudes of ln(rotation per amplitude / rad)
  std::optional<double> rough_log_rabi;  // of lines, ln(Omega / (rad/s)) by the pulses in force: line_modes.hpp
  std::optional<Known> detuning;         // drive minus transition; without: exactly 0. The fit of a detuning scan does not read it
  std::optional<Known> floor, contrast;  // of the readout
  Known dead_time{0.0, 100e-9};          // s; normal with a wide tail (dead_time.hpp), for it is a guess at times
  std::optional<Known> dead_time_otherwise;  // what is believed where the scan contradicts `dead_time`, which is history's then
  double decay = 0.0;                    // known natural decay within the pair
  double loss = 0.0;                     // known natural decay out of the pair
  dynamics::Start start;                 // prepared state, impurity, how lost population reads
  DynamicsSet candidates;                // those to be compared; `thermal` only with motion
  std::vector<dynamics::Mode> motion;    // motional modes that the drive sees; none: no `thermal`
  bool follows_intensity = false;        // the coupling goes with the intensity (two-photon drives), not the field
  std::optional<Known> drift;            // relative change of the coupling from the scan's begin to its end; without: none
};

}  // namespace halfturn::infer
