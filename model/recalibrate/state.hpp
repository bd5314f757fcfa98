// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <cstdint>
#include <limits>
#include <map>
#include <optional>
#include <string>

#include "model/infer/prior.hpp"
#include "model/recalibrate/dead_time_track.hpp"

/// What is known of a drive from its history: a fold over events, the same for the running program and for a log read again.
namespace halfturn::recalibrate {

/// Nanoseconds since 1970-01-01 00:00:00 UTC.
using Time = std::int64_t;

inline constexpr double kAbsent = std::numeric_limits<double>::quiet_NaN();

/// Floors of the random walks, per square root of an hour: of the log Rabi frequency (and the gain), and of the line in parts of
/// its width.
inline constexpr double kRabiNoise = 1e-3;
inline constexpr double kLineNoise = 2e-3;

/// How a fit moved the tracked state: `none` not at all; `first` begins it; `accepted` updates it; `pending` waits for a second
/// scan to confirm a step; `confirmed` restarts it at the step; `aside` was taken at another drive amplitude.
enum class Effect : std::uint8_t { none, first, accepted, pending, confirmed, aside };

/// What a scan of durations, of detunings, or of amplitudes tells.
enum class Quantity : std::uint8_t { rabi, line, gain };

/// A fit's contribution to the state.
struct FitEvent {
  Time at = 0;
  Quantity quantity = Quantity::rabi;
  Effect effect = Effect::none;
  bool proposed = false;           // the verdict was `apply`
  /// ln(Omega / (rad/s)); the line's place in the experiment's own carrier numbers, rad/s; or, of the gain, ln of the coupling per
  /// relative drive amplitude, rad/s, at small amplitudes.
  double value = kAbsent;
  double carrier = kAbsent;        // rad/s, the experiment's own number; absent: a line's place is its offset alone
  double sigma = kAbsent;
  double noise_floor = 0.0;        // of the random walk, in the units of value per square root of an hour
  double dead_time_s = kAbsent, dead_time_sigma_s = kAbsent;  // as the points alone tell it
  double span = 0.0, spacing = 0.0;  // of the scan's axis
  double drive_amplitude = kAbsent;  // relative; absent where the scan did not say
};

/// What the experiment reports to use from now on.
struct AppliedEvent {
  Time at = 0;
  std::map<std::string, double> pulses_s;
  double carrier = kAbsent;        // rad/s, the experiment's own number
  std::map<std::string, double> amplitudes{};  // of pulses whose amplitude is adjusted
};

/// A value in use, and since when.
struct InForce {
  double value = 0.0;
  Time since = 0;
};

/// A random walk tracked by a scalar Kalman filter (R. E. Kalman, J. Basic Eng. 82, 35 (1960)); its noise is estimated from the
/// innovations (method of moments, exponentially forgotten) above a floor.
struct Track {
  int accepted = 0;
  double mean = 0.0, variance = 0.0;
  double noise = 0.0;              // variance an hour as estimated; may be below 0 while the scans agree better than their errors
  double floor = 0.0;              // and the least that is taken
  double usual = 0.0;              // usual variance of an observation, against which others are weighed
  Time at = 0;

  double hourly() const;           // variance an hour as taken

  /// Mean and standard deviation predicted for a time; a time before the last scan's counts as that. None before the first.
  std::optional<infer::Known> predict(Time when) const;
};

/// A step that waits for confirmation.
struct Pending {
  double value = 0.0, sigma = 0.0;
  double span = 0.0, spacing = 0.0;
  Time at = 0;
};

struct State {
  Track rabi, line, gain;
  std::optional<Pending> rabi_step, line_step, gain_step;
  DeadTimeTrack dead_time;
  std::map<std::string, double> in_force_s;  // as last reported, by the time of application
  std::map<std::string, Time> in_force_at;
  std::map<std::string, InForce> amplitudes_in_force;  // the same of pulses whose amplitude is adjusted
  double carrier = kAbsent;                  // as last reported, rad/s
  Time carrier_at = 0;
  int proposals_unanswered = 0;              // `apply` since the experiment last reported what it uses
  double drive_amplitude = kAbsent;          // at which the tracked Rabi frequency was taken
  double other_amplitude = kAbsent;          // at which the last scans were taken, if at another
  int at_other_amplitude = 0;                // how many in a row
  bool held = false;
  std::string held_by, held_why;
  std::string last_verdict;                  // of the last scan
};

/// The state after an event.
void advance(State& state, const FitEvent& event);
void advance(State& state, const AppliedEvent& event);

}  // namespace halfturn::recalibrate
