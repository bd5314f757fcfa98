// SPDX-License-Identifier: Apache-2.0
#include "plugin/service/answer.hpp"

#include <algorithm>
#include <cmath>

#include "model/atom/light.hpp"
#include "model/infer/statistics.hpp"
#include "model/quantity/constants.hpp"
#include "plugin/service/known.hpp"

namespace halfturn::service {
namespace {

using constants::kTwoPi;

constexpr std::int64_t kOverlayPoints = 200;

wire::Estimate estimate(const infer::Estimate& e, double unit = 1.0) {
  return {e.value / unit, e.sigma / unit, e.low / unit, e.high / unit, std::string(e.why)};
}

wire::Estimate none(std::string why) {
  wire::Estimate e;
  e.why = std::move(why);
  return e;
}

/// A quantity that goes as a power of the Rabi frequency.
wire::Estimate scaled(const wire::Estimate& rabi_hz, double value, double power) {
  wire::Estimate e;
  e.value = value;
  e.sigma = value * power * rabi_hz.sigma / rabi_hz.value;
  e.low = value * std::pow((rabi_hz.low < 0.0 ? 0.0 : rabi_hz.low) / rabi_hz.value, power);
  e.high = value * std::pow(rabi_hz.high / rabi_hz.value, power);
  e.why = rabi_hz.why;
  return e;
}

void add_light(const config::Drive* drive, const wire::Estimate& rabi_hz, wire::Fitted& fitted) {
  auto& out = fitted.estimates;
  const bool magnetic = drive != nullptr && drive->transition && drive->transition->multipole == atom::Multipole::magnetic_dipole;
  if (magnetic) {
    const auto flux = atom::flux_from_rabi_hz(*drive->transition, rabi_hz.value);
    out.emplace_back("flux_density_t", flux ? scaled(rabi_hz, flux->flux_density_t, 1.0) : none(flux.error().message));
    return;
  }
  std::string why = "the configuration states no transition";
  if (drive != nullptr && drive->transition) {
    const auto light = atom::light_from_rabi_hz(*drive->transition, rabi_hz.value, drive->waist_m);
    if (light) {
      out.emplace_back("intensity_w_m2", scaled(rabi_hz, light->intensity_w_m2, 2.0));
      out.emplace_back("field_v_m", scaled(rabi_hz, light->field_v_m, 1.0));
      out.emplace_back("saturation", light->saturation ? scaled(rabi_hz, *light->saturation, 2.0) : none("the transition states no linewidth"));
      if (light->power_w) out.emplace_back("power_w", scaled(rabi_hz, *light->power_w, 2.0));
      return;
    }
    why = std::isfinite(rabi_hz.value) ? light.error().message : rabi_hz.why;
  }
  for (const char* name : {"intensity_w_m2", "field_v_m", "saturation"}) out.emplace_back(name, none(why));
}

/// What the chosen dynamics add.
void add_breadth(const infer::Fit& fit, std::vector<std::pair<std::string, wire::Estimate>>& out) {
  using infer::Dynamics;
  if (fit.chosen == Dynamics::spread) out.emplace_back("rabi_spread", estimate(fit.breadth));
  if (fit.chosen == Dynamics::doppler) out.emplace_back("detuning_spread_hz", estimate(fit.breadth, kTwoPi));
  if (fit.chosen == Dynamics::cloud) out.emplace_back("cloud_ratio", estimate(fit.breadth));
  if (fit.chosen == Dynamics::thermal) out.emplace_back("mean_phonons", estimate(fit.breadth));
  if (std::isfinite(fit.drift.value)) out.emplace_back("rabi_drift", estimate(fit.drift));
}

void add_estimates(const Answer& answer, wire::Fitted& fitted) {
  const auto& fit = answer.fit;
  auto& out = fitted.estimates;
  if (fit.outcome != infer::FitOutcome::fitted) {
    for (const char* name : {"rabi_hz", "rabi_mean_hz", "line_offset_hz", "decay_s", "dephasing_s", "loss_s", "envelope_s", "contrast", "floor",
                             "dead_time_s", "intensity_w_m2", "field_v_m", "saturation"})
      out.emplace_back(name, none("the scan was not fitted"));
    return;
  }
  const wire::Estimate rabi_hz = fit.axis == infer::Axis::amplitude ? none("the amplitude was stepped; see rabi_per_amplitude_hz")
                                                                    : estimate(fit.rabi, kTwoPi);
  out.emplace_back("rabi_hz", rabi_hz);
  out.emplace_back("rabi_mean_hz", fit.axis == infer::Axis::amplitude ? rabi_hz : estimate(fit.rabi_mean, kTwoPi));
  if (fit.axis == infer::Axis::amplitude) {
    out.emplace_back("rabi_per_amplitude_hz", estimate(fit.rabi_per_amplitude, kTwoPi));
    out.emplace_back("compression", estimate(fit.compression));
  }
  out.emplace_back("line_offset_hz", estimate(fit.line_offset, kTwoPi));
  out.emplace_back("decay_s", estimate(fit.decay_s));
  out.emplace_back("dephasing_s", estimate(fit.dephasing_s));
  out.emplace_back("loss_s", estimate(fit.loss_s));
  out.emplace_back("envelope_s", estimate(fit.envelope_s));
  out.emplace_back("contrast", estimate(fit.contrast));
  out.emplace_back("floor", estimate(fit.floor));
  out.emplace_back("dead_time_s", estimate(fit.dead_time_s));
  add_breadth(fit, out);
  add_light(answer.drive, rabi_hz, fitted);
}

wire::Pulse pulse(const recalibrate::PulseDecision& decision) {
  wire::Pulse p;
  p.verdict = std::string(name(decision.verdict));
  p.angle_rad = decision.angle_rad;
  p.in_amplitude = decision.adjust == recalibrate::Adjust::amplitude;
  p.length_s = decision.value;
  p.exact_s = decision.exact;
  p.sigma_s = decision.sigma;
  p.low_s = decision.low;
  p.high_s = decision.high;
  p.ticks = decision.steps;
  p.previous_s = decision.previous;
  p.change = decision.change;
  p.rotation_error_rad = decision.rotation_error_rad;
  p.tick_error_rad = decision.step_error_rad;
  p.transfer = decision.transfer;
  return p;
}

wire::Quality quality(const infer::Fit& fit) {
  const auto& q = fit.quality;
  wire::Quality out;
  out.deviance = q.deviance;
  out.dof = q.dof;
  out.p_value = q.p_value;
  out.cycles = q.cycles;
  out.points = q.points;
  const double unit = fit.axis == infer::Axis::amplitude ? kTwoPi * fit.effective_length_s() : kTwoPi;
  out.range_low_hz = q.range_low / unit;
  out.range_high_hz = q.range_high / unit;
  out.scatter = q.scatter;
  out.distrusted.assign(q.distrusted.begin(), q.distrusted.end());
  out.condition = q.conditioning.condition;
  if (std::isfinite(q.conditioning.correlation))
    out.correlation = wire::Correlation{{std::string(q.conditioning.one), std::string(q.conditioning.other)}, q.conditioning.correlation};
  out.at_bound.assign(q.conditioning.at_bound.begin(), q.conditioning.at_bound.end());
  if (q.rival) out.rival = wire::Rival{q.rival->frequency / unit, q.rival->deviance_above};
  return out;
}

std::optional<wire::Overlay> overlay(const Answer& answer) {
  const auto wanted = static_cast<std::size_t>(answer.options.overlay_points.value_or(kOverlayPoints));
  if (answer.fit.outcome != infer::FitOutcome::fitted || wanted < 2) return std::nullopt;
  const auto [low, high] = std::minmax_element(answer.scan.axis.begin(), answer.scan.axis.end());
  wire::Overlay curve;
  curve.axis_kind = answer.scan.axis_kind;
  for (auto* array : {&curve.axis, &curve.signal, &curve.low, &curve.high}) array->resize(wanted);
  for (std::size_t i = 0; i < wanted; ++i) curve.axis[i] = *low + (*high - *low) * static_cast<double>(i) / static_cast<double>(wanted - 1);
  const ModelScan model = model_scan(answer.scan);
  std::vector<double> axis = curve.axis;
  if (model.batch.kind == infer::Axis::detuning)
    for (double& detuning : axis) detuning *= kTwoPi;
  const double z = infer::normal_quantile(0.5 + 0.5 * answer.options.level.value_or(0.95));
  if (!infer::overlay(model.batch, answer.fit, axis, z, curve.signal, curve.low, curve.high)) return std::nullopt;
  return curve;
}

std::string_view effect_name(recalibrate::Effect effect) {
  constexpr std::array<std::string_view, 6> kNames = {"none", "first", "accepted", "pending", "confirmed", "aside"};
  return kNames[static_cast<std::size_t>(effect)];
}

recalibrate::Effect effect_named(std::string_view name) {
  using recalibrate::Effect;
  for (const auto effect : {Effect::first, Effect::accepted, Effect::pending, Effect::confirmed, Effect::aside})
    if (effect_name(effect) == name) return effect;
  return Effect::none;
}

recalibrate::FitEvent fit_event(const log::Event& row) {
  recalibrate::FitEvent event;
  event.at = row.happened_at;
  event.effect = effect_named(row.effect);
  event.proposed = !row.pulses_s.empty() || !row.amplitudes.empty() || (row.axis == "detuning" && row.verdict == "apply");
  const double unit = row.axis == "detuning" ? kTwoPi : 1.0;
  event.span = row.span * unit;
  event.spacing = row.spacing * unit;
  event.drive_amplitude = row.drive_amplitude;
  if (row.axis == "detuning") {
    event.quantity = recalibrate::Quantity::line;
    event.carrier = kTwoPi * row.carrier_hz;
    event.value = kTwoPi * (row.line_offset_hz + (std::isfinite(row.carrier_hz) ? row.carrier_hz : 0.0));
    event.sigma = kTwoPi * row.line_offset_sigma_hz;
    event.noise_floor = recalibrate::kLineNoise * kTwoPi * row.line_width_hz;
  } else {
    const bool gain = row.axis == "amplitude";
    if (gain) event.quantity = recalibrate::Quantity::gain;
    if (gain) event.drive_amplitude = recalibrate::kAbsent;
    const double rabi_hz = gain ? row.rabi_per_amplitude_hz : row.rabi_mean_hz;
    event.value = std::log(kTwoPi * rabi_hz);
    event.sigma = (gain ? row.rabi_per_amplitude_sigma_hz : row.rabi_mean_sigma_hz) / rabi_hz;
    event.noise_floor = recalibrate::kRabiNoise;
    event.dead_time_s = row.dead_time_points_s;
    event.dead_time_sigma_s = row.dead_time_points_sigma_s;
  }
  return event;
}

}  // namespace

wire::Fitted fitted_from(const Answer& answer) {
  wire::Fitted fitted;
  fitted.scan_name = answer.scan.scan_name;
  fitted.drive = answer.scan.drive;
  fitted.taken_at = answer.taken_at;
  fitted.verdict = std::string(name(answer.decision.verdict));
  for (const auto& reason : answer.decision.reasons) fitted.reasons.push_back({reason.code, reason.text});
  fitted.assumed = answer.assumed;
  add_estimates(answer, fitted);
  for (const auto& decision : answer.decision.pulses) fitted.pulses.emplace_back(decision.name, pulse(decision));
  fitted.carrier_shift_hz = answer.decision.carrier_shift / kTwoPi;
  if (answer.fit.outcome == infer::FitOutcome::fitted) fitted.dynamics = std::string(infer::name(answer.fit.chosen));
  for (int i = 0; i < answer.fit.candidate_count; ++i) {
    const auto& score = answer.fit.candidates[static_cast<std::size_t>(i)];
    fitted.candidates.push_back({std::string(infer::name(score.dynamics)), score.aicc, score.weight});
  }
  fitted.quality = quality(answer.fit);
  fitted.overlay = overlay(answer);
  return fitted;
}

log::Event event_from(const Answer& answer, const wire::Fitted& fitted) {
  log::Event event;
  const auto& fit = answer.fit;
  event.drive = fitted.drive;
  event.kind = "fit";
  event.happened_at = answer.taken_at;
  event.scan_name = fitted.scan_name;
  constexpr std::array<std::string_view, 3> kAxes = {"duration", "detuning", "amplitude"};
  event.axis = kAxes[static_cast<std::size_t>(answer.scan.axis_kind)];
  event.verdict = fitted.verdict;
  event.effect = std::string(effect_name(answer.decision.event.effect));
  for (const auto& reason : fitted.reasons) event.reasons += (event.reasons.empty() ? "" : " ") + reason.code;
  const double unit = fit.axis == infer::Axis::detuning ? kTwoPi : 1.0;
  event.span = fit.sampling.span / unit;
  event.spacing = fit.sampling.spacing / unit;
  event.carrier_hz = answer.decision.event.carrier / kTwoPi;
  if (answer.scan.carrier_hz) event.carrier_hz = *answer.scan.carrier_hz;
  if (answer.scan.drive_amplitude) event.drive_amplitude = *answer.scan.drive_amplitude;
  for (const auto& decision : answer.decision.pulses)
    if (decision.verdict == recalibrate::Verdict::apply)
      (decision.adjust == recalibrate::Adjust::amplitude ? event.amplitudes : event.pulses_s)[decision.name] = decision.value;
  if (fit.outcome != infer::FitOutcome::fitted) return event;
  event.rabi_per_amplitude_hz = fit.rabi_per_amplitude.value / kTwoPi;
  event.rabi_per_amplitude_sigma_hz = fit.rabi_per_amplitude.sigma / kTwoPi;
  event.compression = fit.compression.value;
  event.rabi_hz = fit.rabi.value / kTwoPi;
  event.rabi_sigma_hz = fit.rabi.sigma / kTwoPi;
  event.rabi_low_hz = fit.rabi.low / kTwoPi;
  event.rabi_high_hz = fit.rabi.high / kTwoPi;
  event.rabi_mean_hz = fit.rabi_mean.value / kTwoPi;
  event.rabi_mean_sigma_hz = fit.rabi_mean.sigma / kTwoPi;
  event.generalised_hz = fit.generalised.value / kTwoPi;
  event.generalised_sigma_hz = fit.generalised.sigma / kTwoPi;
  event.line_offset_hz = fit.line_offset.value / kTwoPi;
  event.line_offset_sigma_hz = fit.line_offset.sigma / kTwoPi;
  event.line_width_hz = fit.quality.line_width / kTwoPi;
  event.dead_time_s = fit.dead_time_s.value;
  event.dead_time_sigma_s = fit.dead_time_s.sigma;
  event.dead_time_points_s = fit.dead_time_points.mean;
  event.dead_time_points_sigma_s = fit.dead_time_points.sigma;
  for (const auto& [name, estimate] : fitted.estimates)
    if (name == "intensity_w_m2") event.intensity_w_m2 = estimate.value;
  return event;
}

void fold(recalibrate::State& state, const log::Event& event) {
  if (event.kind == "fit") {
    recalibrate::advance(state, fit_event(event));
    state.last_verdict = event.verdict;
  } else if (event.kind == "applied") {
    recalibrate::advance(state, recalibrate::AppliedEvent{event.happened_at, event.pulses_s, kTwoPi * event.carrier_hz, event.amplitudes});
  } else if (event.kind == "hold" || event.kind == "release") {
    state.held = event.kind == "hold";
    state.held_by = event.by;
    state.held_why = event.why;
  }
}

}  // namespace halfturn::service
