// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <optional>
#include <string>
#include <vector>

#include "model/infer/fit.hpp"
#include "model/recalibrate/policy.hpp"
#include "model/recalibrate/reason.hpp"
#include "model/recalibrate/state.hpp"

/// From a fit and the drive's history to verdicts and pulses.
namespace halfturn::recalibrate {

/// Most cautious last: a scan's verdict is the most cautious of its pulses'.
enum class Verdict : std::uint8_t { apply, keep, refuse };
std::string_view name(Verdict verdict);

/// What is decided for one pulse; values are lengths in s or relative drive amplitudes, as `adjust` says, angles in rad. NaN where
/// the fit gives no value.
struct PulseDecision {
  std::string name;
  Adjust adjust = Adjust::length;
  Verdict verdict = Verdict::keep;
  double angle_rad = 0.0;
  double value = 0.0;       // what to load: the one in force unless the verdict is `apply`
  double exact = kAbsent, sigma = kAbsent, low = kAbsent, high = kAbsent;
  std::int64_t steps = 0;   // of value; 0 without a step
  double previous = 0.0;
  double change = 0.0;      // value / previous - 1
  double rotation_error_rad = kAbsent;  // previous rotates this much too far (negative: not far enough)
  double step_error_rad = kAbsent;      // what rounding to the step costs, magnitude
  double transfer = kAbsent;            // population moved by value under the fitted dynamics, from a pure start
};

/// What the decision rests on besides the fit.
struct Context {
  std::vector<Pulse> pulses;
  Accept accept;
  std::optional<infer::Expected> expect;
  Time taken_at = 0;
  double carrier = kAbsent;            // the experiment's own number for its carrier, rad/s
  double transition_frequency = kAbsent;  // rad/s, of the transition; for the rotating-wave check
  double drive_amplitude = kAbsent;    // relative; absent where the scan does not say
  std::vector<std::string> scan_names; // of a joint fit, in its order
  Reasons given;                       // refusals found before: by the other half of a joint fit
};

struct Decision {
  Verdict verdict = Verdict::refuse;
  Reasons reasons;                     // most serious first
  std::vector<PulseDecision> pulses;
  double carrier_shift = 0.0;          // rad/s; 0 unless a line scan's verdict is `apply`
  FitEvent event;                      // what the state is to be advanced by
};

/// Whether a scan was taken at the drive amplitude that is tracked, to 1e-3; one that does not say is taken to be.
bool same_amplitude(double tracked, double taken);

/// Decides on a fit. `prior` is what it was fitted under. The angles fitted are those of `context.pulses`, in their order.
Decision decide(const State& state, const infer::Fit& fit, const infer::Prior& prior, const Context& context);

}  // namespace halfturn::recalibrate
