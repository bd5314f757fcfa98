// SPDX-License-Identifier: Apache-2.0
#include "model/recalibrate/decide.hpp"

#include <algorithm>
#include <cmath>

#include "model/dynamics/two_level.hpp"
#include "model/quantity/constants.hpp"
#include "model/quantity/format.hpp"
#include "model/recalibrate/gates.hpp"

namespace halfturn::recalibrate {
namespace {

using constants::kTwoPi;

// The least rotation worth a change.
constexpr double kLeastRotation = 5e-3;
// A line is moved to when it is this part of its width away, and its sigma as well.
constexpr double kLeastCarrierStep = 5e-3;

double population_moved(const infer::Fit& fit, const infer::Prior& prior, double length_s, double dead_time_s) {
  dynamics::Start pure = prior.start;
  pure.impurity = 0.0;
  const double before = dynamics::population({}, pure, 0.0);
  return std::abs(infer::population_after(fit, pure, length_s - dead_time_s) - before);
}

double in_force(const State& state, const Pulse& pulse) {
  const auto found = state.in_force_s.find(pulse.name);
  return found == state.in_force_s.end() ? pulse.length_s : found->second;
}

/// The tick nearest to `length`, inside the limits. Rotation is linear in length, so the nearest rotates best.
double on_tick(const Pulse& pulse, double length) {
  if (!(pulse.tick_s > 0.0)) return std::clamp(length, pulse.minimum_s, pulse.maximum_s);
  double ticks = std::round(length / pulse.tick_s);
  // 1e-9 of a tick is rounding of the limits themselves.
  if (ticks * pulse.tick_s < pulse.minimum_s) ticks = std::ceil(pulse.minimum_s / pulse.tick_s - 1e-9);
  if (ticks * pulse.tick_s > pulse.maximum_s) ticks = std::floor(pulse.maximum_s / pulse.tick_s + 1e-9);
  return ticks * pulse.tick_s;
}

/// A length that keeps what is in force, with what the fit says of it.
PulseDecision kept(const State& state, const Pulse& pulse, Verdict verdict) {
  PulseDecision decision;
  decision.name = pulse.name;
  decision.verdict = verdict;
  decision.angle_rad = pulse.angle_rad;
  decision.previous_s = decision.length_s = in_force(state, pulse);
  if (pulse.tick_s > 0.0) decision.ticks = std::llround(decision.length_s / pulse.tick_s);
  return decision;
}

void describe(PulseDecision& decision, const Pulse& pulse, const infer::Fit& fit, const infer::Estimate& exact, const infer::Prior& prior) {
  const double rate = fit.generalised.value * pulse.area_factor;  // rotation per length
  decision.exact_s = exact.value;
  decision.sigma_s = exact.sigma;
  decision.low_s = exact.low;
  decision.high_s = exact.high;
  decision.rotation_error_rad = rate * (decision.previous_s - exact.value);
  decision.tick_error_rad = rate * std::abs(on_tick(pulse, exact.value) - exact.value);
  const double effective = (decision.length_s - fit.physical.dead_time) * pulse.area_factor;
  decision.transfer = population_moved(fit, prior, effective, 0.0);
}

/// What refuses a length that a believed fit gives; empty code where nothing does.
Reason length_gate(const Pulse& pulse, const infer::Fit& fit, const infer::Estimate& exact, bool first, double longest_s, const Accept& accept) {
  const double rate = fit.generalised.value * pulse.area_factor;
  if (!std::isfinite(exact.sigma) || !std::isfinite(exact.low) || !std::isfinite(exact.high))
    return {"uncertain", "The scan does not bound the length of `" + pulse.name + "`. Scan longer pulses with more shots.", true};
  if (rate * exact.sigma > accept.max_angle_error_rad)
    return {"uncertain",
            "`" + pulse.name + "`, " + with_uncertainty(exact.value, exact.sigma, "s") + ", is uncertain by " + plain(1e3 * rate * exact.sigma, 3) +
                " mrad of rotation (allowed: " + plain(1e3 * accept.max_angle_error_rad, 3) + " mrad). Take more shots, or more cycles.",
            true};
  if (exact.value < pulse.minimum_s || exact.value > pulse.maximum_s)
    return {"outside_limits",
            "`" + pulse.name + "` would need " + engineering(exact.value, "s") + ", outside its limits, " + engineering(pulse.minimum_s, "s") + " to " +
                engineering(pulse.maximum_s, "s") + ". Restore the power or the alignment, or widen the limits.",
            true};
  if (first && exact.value > longest_s)
    return {"beyond_scan",
            "`" + pulse.name + "`, " + engineering(exact.value, "s") + ", is longer than any pulse of this first scan (" +
                engineering(longest_s, "s") + "). Scan past it once.",
            true};
  return {};
}

PulseDecision decide_length(const State& state, const Pulse& pulse, const infer::Fit& fit, const infer::Estimate& exact,
                            const infer::Known& tracked, const infer::Prior& prior) {
  PulseDecision decision = kept(state, pulse, Verdict::keep);
  const double rate = fit.generalised.value * pulse.area_factor;
  // The tracked frequency moves the length from the fit's own in proportion, dead time aside.
  const double working = pulse.angle_rad / rate;
  const double target = exact.value + working * (std::log(fit.rabi_mean.value) - tracked.mean);
  const double sigma = working * tracked.sigma;
  const double wanted = on_tick(pulse, target);
  const double least = std::max({sigma, 0.5 * pulse.tick_s, kLeastRotation / rate});
  if (std::abs(target - decision.previous_s) > least && wanted != decision.previous_s) {
    decision.verdict = Verdict::apply;
    decision.length_s = wanted;
    decision.change = wanted / decision.previous_s - 1.0;
    if (pulse.tick_s > 0.0) decision.ticks = std::llround(wanted / pulse.tick_s);
  }
  describe(decision, pulse, fit, exact, prior);
  return decision;
}

FitEvent event_of(const State& state, const infer::Fit& fit, const Context& context) {
  FitEvent event;
  event.at = context.taken_at;
  event.span = fit.sampling.span;
  event.spacing = fit.sampling.spacing;
  event.drive_amplitude = context.drive_amplitude;
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
  event.value = std::log(fit.rabi_mean.value);
  event.sigma = fit.rabi_mean.sigma / fit.rabi_mean.value;
  event.noise_floor = kRabiNoise;
  event.dead_time_s = fit.dead_time_s.value;
  event.dead_time_sigma_s = fit.dead_time_s.sigma;
  return event;
}

/// The Rabi frequency as it will be tracked when this fit has been taken.
infer::Known tracked_after(const State& state, const FitEvent& event) {
  State after = state;
  advance(after, event);
  return *after.rabi.predict(event.at);
}

void decide_pulses(const State& state, const infer::Fit& fit, const infer::Prior& prior, const Context& context, Decision& decision) {
  const bool first = decision.event.effect == Effect::first;
  const infer::Known tracked = tracked_after(state, decision.event);
  for (std::size_t i = 0; i < context.pulses.size(); ++i) {
    const Pulse& pulse = context.pulses[i];
    const auto& exact = fit.pulse_length_s[i];
    Reason reason = length_gate(pulse, fit, exact, first, fit.longest, context.accept);
    if (reason.refuses) {
      decision.pulses.push_back(kept(state, pulse, Verdict::refuse));
      describe(decision.pulses.back(), pulse, fit, exact, prior);
      decision.reasons.push_back(std::move(reason));
    } else {
      decision.pulses.push_back(decide_length(state, pulse, fit, exact, tracked, prior));
    }
  }
}

void keep_all(const State& state, const infer::Fit& fit, const infer::Prior& prior, const Context& context, Verdict verdict,
              Decision& decision) {
  const bool lengths = fit.outcome == infer::FitOutcome::fitted && fit.axis == infer::Axis::duration;
  for (std::size_t i = 0; i < context.pulses.size(); ++i) {
    decision.pulses.push_back(kept(state, context.pulses[i], verdict));
    if (lengths) describe(decision.pulses.back(), context.pulses[i], fit, fit.pulse_length_s[i], prior);
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

Verdict most_cautious(const std::vector<PulseDecision>& pulses) {
  Verdict verdict = Verdict::apply;
  for (const auto& pulse : pulses) verdict = std::max(verdict, pulse.verdict);
  return pulses.empty() ? Verdict::keep : verdict;
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
    decision.verdict = most_cautious(decision.pulses);
  }
  const bool placed = fit.axis == infer::Axis::duration || std::isfinite(decision.event.carrier);
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
