// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <cmath>
#include <string>

#include "model/infer/fit.hpp"
#include "model/recalibrate/policy.hpp"
#include "model/recalibrate/state.hpp"

/// The value of a pulse, a length in s or a relative drive amplitude, and what a fit says of it; used by decide.cpp.
namespace halfturn::recalibrate {

/// How far the coupling may be off a straight line through zero between two amplitudes: this part of the logarithm of their ratio,
/// one sigma. An amplifier at its 1 dB point (12 % of the field lost) departs by 0.2 of a small step; modulators by more.
inline constexpr double kAmplifier = 0.3;

/// What a fit says of one pulse.
struct PulseResponse {
  infer::Estimate exact;   // the value that turns by the pulse's angle; NaN where this scan does not say
  double slope = kAbsent;  // rad per unit of value, at `exact`
  double compression = 0.0;  // of the drive, for an amplitude (infer/amplitude_response.hpp)
  bool reckoned = false;   // carried over from another amplitude by a straight line, whose doubt is in exact.sigma

  bool told() const { return std::isfinite(exact.value); }
};

/// A flop tells lengths, and a scan of amplitudes amplitudes. A flop taken at a known relative amplitude (`drive_amplitude`; NaN
/// where it is not) tells amplitudes near that one as well: a straight line through zero, uncertain by kAmplifier times the
/// logarithm of the ratio, without interval. Everything else tells nothing. `index` is the pulse's in FitOptions::pulses.
PulseResponse response_of(const Pulse& pulse, std::size_t index, const infer::Fit& fit, double drive_amplitude);

/// By how much the pulse at this value turns too far, rad (negative: not far enough).
double rotation_beyond(const Pulse& pulse, const PulseResponse& response, double value);

/// Population moved by the pulse at this value, from a pure start, under the fitted dynamics.
double transfer(const Pulse& pulse, double value, const infer::Fit& fit, const infer::Prior& prior, double drive_amplitude);

/// The value in use as last reported, or the configured one.
double in_force(const State& state, const Pulse& pulse);

/// The multiple of the pulse's step nearest to a value, inside the limits. Rotation is linear in a length and nearly so in an
/// amplitude, so the nearest rotates best.
double on_step(const Pulse& pulse, double value);
/// Which multiple; 0 without a step.
std::int64_t steps_of(const Pulse& pulse, double value);

/// `3.9800 us` in its letters, or `0.52000`; the second with its standard uncertainty.
std::string value_text(const Pulse& pulse, double value);
std::string value_text(const Pulse& pulse, const infer::Estimate& value);
/// `length` or `amplitude`.
std::string value_name(const Pulse& pulse);

}  // namespace halfturn::recalibrate
