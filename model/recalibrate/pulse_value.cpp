// SPDX-License-Identifier: Apache-2.0
#include "model/recalibrate/pulse_value.hpp"

#include <algorithm>

#include "model/dynamics/two_level.hpp"
#include "model/infer/amplitude_response.hpp"
#include "model/quantity/format.hpp"

namespace halfturn::recalibrate {
namespace {

double effective_length(const Pulse& pulse, double length_s, const infer::Fit& fit) {
  return (length_s - fit.physical.dead_time) * pulse.area_factor;
}

/// From a flop at `drive_amplitude`, in proportion: what the length would have to change by, the amplitude changes by.
PulseResponse reckoned(const Pulse& pulse, const infer::Estimate& length, const infer::Fit& fit, double drive_amplitude) {
  PulseResponse response;
  const double wanted = effective_length(pulse, length.value, fit), given = effective_length(pulse, pulse.length_s, fit);
  if (!(drive_amplitude > 0.0) || !(wanted > 0.0) || !(given > 0.0)) return response;
  const double ratio = wanted / given;
  const double dead = std::isfinite(fit.dead_time_s.sigma) ? fit.dead_time_s.sigma * pulse.area_factor / given : 0.0;
  const double relative = std::hypot(length.sigma * pulse.area_factor / wanted, dead, kAmplifier * std::log(ratio));
  response.exact.value = drive_amplitude * ratio;
  response.exact.sigma = response.exact.value * relative;
  response.slope = pulse.angle_rad / response.exact.value;
  response.reckoned = true;
  return response;
}

}  // namespace

PulseResponse response_of(const Pulse& pulse, std::size_t index, const infer::Fit& fit, double drive_amplitude) {
  PulseResponse response;
  if (fit.outcome != infer::FitOutcome::fitted || fit.axis == infer::Axis::detuning) return response;
  const bool amplitudes = fit.axis == infer::Axis::amplitude;
  if (pulse.adjust == Adjust::amplitude && !amplitudes) return reckoned(pulse, fit.pulse_length_s[index], fit, drive_amplitude);
  if (pulse.adjust == Adjust::length && amplitudes) return response;
  response.exact = amplitudes ? fit.pulse_amplitude[index] : fit.pulse_length_s[index];
  if (!response.told()) return response;
  if (amplitudes) response.compression = fit.physical.compression;
  response.slope = amplitudes ? pulse.angle_rad * infer::logarithmic_slope(response.exact.value, fit.physical.compression)
                              : fit.generalised.value * pulse.area_factor;
  return response;
}

double rotation_beyond(const Pulse& pulse, const PulseResponse& response, double value) {
  if (pulse.adjust == Adjust::length) return response.slope * (value - response.exact.value);
  const double q = response.compression;
  return pulse.angle_rad * (infer::compressed(value, q) / infer::compressed(response.exact.value, q) - 1.0);
}

double transfer(const Pulse& pulse, double value, const infer::Fit& fit, const infer::Prior& prior, double drive_amplitude) {
  dynamics::Start pure = prior.start;
  pure.impurity = 0.0;
  const bool by_amplitude = pulse.adjust == Adjust::amplitude;
  const double before = dynamics::population({}, pure, 0.0), length = effective_length(pulse, by_amplitude ? pulse.length_s : value, fit);
  if (!by_amplitude) return std::abs(infer::population_after(fit, pure, length) - before);
  infer::Fit there = fit;
  if (fit.axis == infer::Axis::amplitude)
    there.rates.rabi = fit.physical.generalised / fit.effective_length_s() * infer::compressed(value, fit.physical.compression);
  else
    there.rates.rabi *= value / drive_amplitude;
  return std::abs(infer::population_after(there, pure, length) - before);
}

double in_force(const State& state, const Pulse& pulse) {
  if (pulse.adjust == Adjust::amplitude) {
    const auto found = state.amplitudes_in_force.find(pulse.name);
    return found == state.amplitudes_in_force.end() ? pulse.amplitude : found->second.value;
  }
  const auto found = state.in_force_s.find(pulse.name);
  return found == state.in_force_s.end() ? pulse.length_s : found->second;
}

double on_step(const Pulse& pulse, double value) {
  if (!(pulse.step > 0.0)) return std::clamp(value, pulse.minimum, pulse.maximum);
  double steps = std::round(value / pulse.step);
  // 1e-9 of a step is rounding of the limits themselves.
  if (steps * pulse.step < pulse.minimum) steps = std::ceil(pulse.minimum / pulse.step - 1e-9);
  if (steps * pulse.step > pulse.maximum) steps = std::floor(pulse.maximum / pulse.step + 1e-9);
  return steps * pulse.step;
}

std::int64_t steps_of(const Pulse& pulse, double value) { return pulse.step > 0.0 ? std::llround(value / pulse.step) : 0; }

std::string value_text(const Pulse& pulse, double value) {
  return pulse.adjust == Adjust::amplitude ? plain(value) : engineering(value, "s");
}

std::string value_text(const Pulse& pulse, const infer::Estimate& value) {
  return with_uncertainty(value.value, value.sigma, pulse.adjust == Adjust::amplitude ? "" : "s");
}

std::string value_name(const Pulse& pulse) { return pulse.adjust == Adjust::amplitude ? "amplitude" : "length"; }

}  // namespace halfturn::recalibrate
