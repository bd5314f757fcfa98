// SPDX-License-Identifier: Apache-2.0
#include "model/recalibrate/decide.hpp"

#include <algorithm>
#include <cmath>

#include "model/quantity/constants.hpp"
#include "model/quantity/format.hpp"
#include "model/recalibrate/gates.hpp"
#include "model/recalibrate/pulse_value.hpp"

namespace halfturn::recalibrate {
namespace {

using constants::kTwoPi;

// The least rotation worth a change.
constexpr double kLeastRotation = 5e-3;
// A line is moved to when it is this part of its width away, and its sigma as well.
constexpr double kLeastCarrierStep = 5e-3;

/// What keeps the value in force.
PulseDecision kept(const State& state, const Pulse& pulse, Verdict verdict) {
  PulseDecision decision;
  decision.name = pulse.name;
  decision.adjust = pulse.adjust;
  decision.verdict = verdict;
  decision.angle_rad = pulse.angle_rad;
  decision.previous = decision.value = in_force(state, pulse);
  decision.steps = steps_of(pulse, decision.value);
  return decision;
}

void describe(PulseDecision& decision, const Pulse& pulse, const infer::Fit& fit, const PulseResponse& response, const infer::Prior& prior,
              const Context& context) {
  if (!response.told()) return;
  const auto& exact = response.exact;
  decision.exact = exact.value;
  decision.sigma = exact.sigma;
  decision.low = exact.low;
  decision.high = exact.high;
  decision.rotation_error_rad = rotation_beyond(pulse, response, decision.previous);
  decision.step_error_rad = std::abs(rotation_beyond(pulse, response, on_step(pulse, exact.value)));
  decision.transfer = transfer(pulse, decision.value, fit, prior, context.drive_amplitude);
}

/// What refuses a value beyond anything scanned: the first scan's lengths, and any scan's amplitudes, beyond which an amplifier
/// may saturate. Empty code where nothing does.
Reason reach_gate(const Pulse& pulse, const infer::Fit& fit, double exact, bool first) {
  if (fit.axis == infer::Axis::amplitude && exact > fit.longest)
    return {"beyond_scan",
            "`" + pulse.name + "` would need the amplitude " + plain(exact) + ", more than any of this scan (up to " + plain(fit.longest) +
                "), where the drive may saturate. Scan past it.",
            true};
  if (fit.axis == infer::Axis::duration && pulse.adjust == Adjust::length && first && exact > fit.longest)
    return {"beyond_scan",
            "`" + pulse.name + "`, " + engineering(exact, "s") + ", is longer than any pulse of this first scan (" +
                engineering(fit.longest, "s") + "). Scan past it once.",
            true};
  return {};
}

/// What refuses a value that a believed fit gives; empty code where nothing does.
Reason value_gate(const Pulse& pulse, const infer::Fit& fit, const PulseResponse& response, bool first, const Accept& accept) {
  const auto& exact = response.exact;
  const std::string what = value_name(pulse);
  const bool bounded = response.reckoned || (std::isfinite(exact.low) && std::isfinite(exact.high));
  if (!std::isfinite(exact.value) && !exact.why.empty())
    return {"uncertain", "`" + pulse.name + "` has no " + what + ": " + std::string(exact.why) + ".", true};
  if (!std::isfinite(exact.sigma) || !bounded)
    return {"uncertain",
            "The scan does not bound the " + what + " of `" + pulse.name + "`. Scan " +
                (fit.axis == infer::Axis::amplitude ? "larger amplitudes" : "longer pulses") + " with more shots.",
            true};
  if (response.slope * exact.sigma > accept.max_angle_error_rad)
    return {"uncertain",
            "`" + pulse.name + "`, " + value_text(pulse, exact) + ", is uncertain by " + plain(1e3 * response.slope * exact.sigma, 3) +
                " mrad of rotation (allowed: " + plain(1e3 * accept.max_angle_error_rad, 3) + " mrad). Take more shots, or more cycles.",
            true};
  if (exact.value < pulse.minimum || exact.value > pulse.maximum)
    return {"outside_limits",
            "`" + pulse.name + "` would need " + value_text(pulse, exact.value) + ", outside its limits, " + value_text(pulse, pulse.minimum) +
                " to " + value_text(pulse, pulse.maximum) + ". Restore the power or the alignment, or widen the limits.",
            true};
  return reach_gate(pulse, fit, exact.value, first);
}

/// Where a value is wanted, and how surely.
struct Target {
  double value, sigma;
};

/// A length follows the tracked frequency: it moves from the fit's own in proportion, dead time aside. An amplitude is the scan's
/// own: the tracked gain belongs to small amplitudes, and its error and that of the compression cancel in the amplitude.
Target target_of(const Pulse& pulse, const infer::Fit& fit, const PulseResponse& response, const std::optional<infer::Known>& tracked) {
  const auto& exact = response.exact;
  if (pulse.adjust == Adjust::amplitude || !tracked) return {exact.value, exact.sigma};
  const double working = pulse.angle_rad / response.slope;
  return {exact.value + working * (std::log(fit.rabi_mean.value) - tracked->mean), working * tracked->sigma};
}

PulseDecision decide_value(const State& state, const Pulse& pulse, const infer::Fit& fit, const PulseResponse& response,
                           const std::optional<infer::Known>& tracked, const infer::Prior& prior, const Context& context) {
  PulseDecision decision = kept(state, pulse, Verdict::keep);
  const Target target = target_of(pulse, fit, response, tracked);
  const double wanted = on_step(pulse, target.value);
  const double least = std::max({target.sigma, 0.5 * pulse.step, kLeastRotation / response.slope});
  if (std::abs(target.value - decision.previous) > least && wanted != decision.previous) {
    decision.verdict = Verdict::apply;
    decision.value = wanted;
    decision.change = wanted / decision.previous - 1.0;
    decision.steps = steps_of(pulse, wanted);
  }
  describe(decision, pulse, fit, response, prior, context);
  return decision;
}

FitEvent event_of(const State& state, const infer::Fit& fit, const Context& context) {
  FitEvent event;
  event.at = context.taken_at;
  event.span = fit.sampling.span;
  event.spacing = fit.sampling.spacing;
  event.drive_amplitude = context.drive_amplitude;
  if (fit.axis == infer::Axis::amplitude) {
    event.quantity = Quantity::gain;
    event.drive_amplitude = kAbsent;  // it was stepped
  }
  if (fit.outcome != infer::FitOutcome::fitted) return event;
  if (fit.axis == infer::Axis::detuning) {
    event.quantity = Quantity::line;
    event.carrier = std::isfinite(context.carrier) ? context.carrier : state.carrier;
    event.value = fit.line_offset.value + (std::isfinite(event.carrier) ? event.carrier : 0.0);
    event.sigma = fit.line_offset.sigma;
    event.noise_floor = kLineNoise * fit.quality.line_width;
    return event;
  }
  // The mean is what lengths go by, and candidates agree on it where their peaks differ.
  const auto& coupling = event.quantity == Quantity::gain ? fit.rabi_per_amplitude : fit.rabi_mean;
  event.value = std::log(coupling.value);
  event.sigma = coupling.sigma / coupling.value;
  event.noise_floor = kRabiNoise;
  event.dead_time_s = fit.dead_time_points.mean;
  event.dead_time_sigma_s = fit.dead_time_points.sigma;
  return event;
}

/// The Rabi frequency as it will be tracked when this fit has been taken; none from a scan of amplitudes.
std::optional<infer::Known> tracked_after(const State& state, const FitEvent& event) {
  if (event.quantity != Quantity::rabi) return std::nullopt;
  State after = state;
  advance(after, event);
  return after.rabi.predict(event.at);
}

/// Whether a scan of this kind adjusts the pulse, or says something of it all the same.
bool speaks_of(const Pulse& pulse, const infer::Fit& fit, const PulseResponse& response) {
  const Adjust adjusted = fit.axis == infer::Axis::amplitude ? Adjust::amplitude : Adjust::length;
  return pulse.adjust == adjusted || response.told();
}

/// What this scan says of a pulse decides it; where it says nothing, or not enough from another amplitude, the pulse rests.
PulseDecision decide_pulse(const State& state, const infer::Fit& fit, const infer::Prior& prior, const Context& context, std::size_t index,
                           const std::optional<infer::Known>& tracked, Decision& decision) {
  const Pulse& pulse = context.pulses[index];
  const PulseResponse response = response_of(pulse, index, fit, context.drive_amplitude);
  PulseDecision one = kept(state, pulse, Verdict::keep);
  describe(one, pulse, fit, response, prior, context);
  if (!speaks_of(pulse, fit, response)) return one;
  Reason reason = value_gate(pulse, fit, response, decision.event.effect == Effect::first, context.accept);
  if (!reason.refuses) return decide_value(state, pulse, fit, response, tracked, prior, context);
  if (response.reckoned) return one;
  one.verdict = Verdict::refuse;
  decision.reasons.push_back(std::move(reason));
  return one;
}

void decide_pulses(const State& state, const infer::Fit& fit, const infer::Prior& prior, const Context& context, Decision& decision) {
  const auto tracked = tracked_after(state, decision.event);
  for (std::size_t i = 0; i < context.pulses.size(); ++i)
    decision.pulses.push_back(decide_pulse(state, fit, prior, context, i, tracked, decision));
}

void keep_all(const State& state, const infer::Fit& fit, const infer::Prior& prior, const Context& context, Verdict verdict,
              Decision& decision) {
  for (std::size_t i = 0; i < context.pulses.size(); ++i) {
    decision.pulses.push_back(kept(state, context.pulses[i], verdict));
    describe(decision.pulses.back(), context.pulses[i], fit, response_of(context.pulses[i], i, fit, context.drive_amplitude), prior, context);
  }
}

// A line further than so many sigmas from where it was known to lie has moved: what was known no longer counts.
constexpr double kLineMoved = 3.0;

/// The line's offset from the carrier: this scan's, weighed with what was known before it (how well the carrier sits on the
/// line, or the tracked line), so that the carrier is not moved after the noise of single scans.
infer::Known weighed_offset(const infer::Fit& fit, const infer::Prior& prior) {
  const infer::Known seen{fit.line_offset.value, fit.line_offset.sigma};
  if (!prior.detuning || !(prior.detuning->sigma > 0.0)) return seen;
  const infer::Known known{-prior.detuning->mean, prior.detuning->sigma};
  if (std::abs(seen.mean - known.mean) > kLineMoved * std::hypot(seen.sigma, known.sigma)) return seen;
  const double a = 1.0 / (seen.sigma * seen.sigma), b = 1.0 / (known.sigma * known.sigma);
  return {(a * seen.mean + b * known.mean) / (a + b), 1.0 / std::sqrt(a + b)};
}

void decide_carrier(const infer::Fit& fit, const infer::Prior& prior, Decision& decision) {
  const infer::Known offset = weighed_offset(fit, prior);
  decision.verdict = Verdict::keep;
  if (std::abs(offset.mean) <= std::max(offset.sigma, kLeastCarrierStep * fit.quality.line_width)) return;
  decision.verdict = Verdict::apply;
  decision.carrier_shift = offset.mean;
}

/// Over the pulses that a scan of this kind adjusts; the others rest, which is no verdict on the scan.
Verdict most_cautious(const std::vector<PulseDecision>& pulses, Adjust adjusted) {
  Verdict verdict = Verdict::apply;
  bool any = false;
  for (const auto& pulse : pulses) {
    if (pulse.adjust != adjusted && pulse.verdict == Verdict::keep) continue;
    verdict = std::max(verdict, pulse.verdict);
    any = true;
  }
  return any ? verdict : Verdict::keep;
}

void say_held(const State& state, Decision& decision) {
  decision.reasons.push_back({"held",
                              "This drive is held" + (state.held_by.empty() ? std::string() : " by " + state.held_by) +
                                  (state.held_why.empty() ? std::string() : ": " + state.held_why) + ". Nothing is proposed until it is released.",
                              false});
}

}  // namespace

std::string_view name(Verdict verdict) {
  switch (verdict) {
    case Verdict::apply: return "apply";
    case Verdict::keep: return "keep";
    case Verdict::refuse: return "refuse";
  }
  return "refuse";
}

Decision decide(const State& state, const infer::Fit& fit, const infer::Prior& prior, const Context& context) {
  Decision decision;
  decision.event = event_of(state, fit, context);
  decision.reasons = context.given;
  fit_gates(fit, context, decision.reasons);
  if (!refused(decision.reasons)) decision.event.effect = history_gate(state, decision.event, fit, context, decision.reasons);

  const bool rests = decision.event.effect == Effect::aside || (!refused(decision.reasons) && decision.event.effect == Effect::none);
  if (rests || state.held) {
    decision.verdict = Verdict::keep;
    keep_all(state, fit, prior, context, Verdict::keep, decision);
  } else if (refused(decision.reasons)) {
    decision.verdict = Verdict::refuse;
    keep_all(state, fit, prior, context, Verdict::refuse, decision);
  } else if (fit.axis == infer::Axis::detuning) {
    decide_carrier(fit, prior, decision);
    keep_all(state, fit, prior, context, Verdict::keep, decision);
  } else {
    decide_pulses(state, fit, prior, context, decision);
    decision.verdict = most_cautious(decision.pulses, fit.axis == infer::Axis::amplitude ? Adjust::amplitude : Adjust::length);
  }
  const bool placed = fit.axis != infer::Axis::detuning || std::isfinite(decision.event.carrier);
  const bool tracks = decision.event.effect == Effect::first || decision.event.effect == Effect::accepted;
  if (!std::isfinite(decision.event.value) || !(decision.event.sigma > 0.0) || (tracks && !placed)) decision.event.effect = Effect::none;
  cautions(state, fit, prior, context, decision.reasons);
  if (state.held) say_held(state, decision);
  decision.event.proposed = decision.verdict == Verdict::apply ||
                            std::any_of(decision.pulses.begin(), decision.pulses.end(), [](const auto& p) { return p.verdict == Verdict::apply; });
  std::stable_sort(decision.reasons.begin(), decision.reasons.end(), [](const Reason& a, const Reason& b) { return a.refuses && !b.refuses; });
  return decision;
}

}  // namespace halfturn::recalibrate
