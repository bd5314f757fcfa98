// SPDX-License-Identifier: Apache-2.0
#include "model/infer/shown.hpp"

#include <cmath>

namespace halfturn::infer {
namespace {

constexpr std::string_view kNoLine = "the scan does not show a line, so this value follows the noise";
constexpr std::string_view kOutside = "the centre lies outside the window, and what is seen of a line's wings would do for others";
constexpr std::string_view kMonotone = "a curve that only rises or falls describes the scan as well: the beginning of a slow flop, or all of a damped one";
constexpr std::string_view kNoOscillation = "the scan does not show an oscillation, so this value follows the noise";

void withhold(Estimate& estimate, std::string_view why) {
  if (!std::isfinite(estimate.value)) return;
  estimate.sigma = estimate.low = estimate.high = kUnknown;
  estimate.why = why;
}

/// A centre outside the window is a guess: a side lobe, or one flank, of one line is that of another further off.
void withhold_outside(Fit& fit) {
  if (fit.axis != Axis::detuning || !(fit.line_offset.value < fit.lowest || fit.line_offset.value > fit.longest)) return;
  for (Estimate* estimate : {&fit.line_offset, &fit.second.line_offset}) {
    estimate->low = estimate->high = kUnknown;
    estimate->why = kOutside;
  }
}

}  // namespace

void withhold_unshown(const FitOptions& options, Fit& fit) {
  const bool line = fit.axis == Axis::detuning, flat = !(fit.quality.over_flat >= options.least_evidence);
  const bool monotone = !line && fit.quality.over_monotone < options.least_evidence;
  if (!flat && !monotone) return withhold_outside(fit);
  const std::string_view why = line ? kNoLine : flat ? kNoOscillation : kMonotone;
  for (Estimate* estimate : {&fit.rabi, &fit.rabi_mean, &fit.generalised, &fit.line_offset, &fit.contrast, &fit.breadth, &fit.drift, &fit.second.line_offset}) withhold(*estimate, why);
  for (Estimate* estimate : {&fit.decay_s, &fit.dephasing_s, &fit.loss_s, &fit.envelope_s}) withhold(*estimate, why);
  for (Estimate* estimate : {&fit.rabi_per_amplitude, &fit.compression}) withhold(*estimate, why);
  for (Estimate& length : fit.pulse_length_s) withhold(length, why);
  for (Estimate& amplitude : fit.pulse_amplitude) withhold(amplitude, why);
  for (Estimate& length : fit.second.pulse_length_s) withhold(length, why);
}

}  // namespace halfturn::infer
