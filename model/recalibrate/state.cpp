// SPDX-License-Identifier: Apache-2.0
#include "model/recalibrate/state.hpp"

#include <algorithm>
#include <cmath>

namespace halfturn::recalibrate {
namespace {

constexpr double kNanosecondsAnHour = 3.6e12;
// Weight of the newest innovation in the noise estimate: small enough that a quiet drive is averaged, large enough that a
// ramp is followed (state_test).
constexpr double kForget = 0.1;
// An innovation beyond so many sigmas is believed at once: the walk was that much wider.
constexpr double kSurprise = 3.0;
// The walk's standard deviation before there are innovations to tell, in units of its floor.
constexpr double kFirstNoise = 5.0;

double hours(Time from, Time to) { return std::max(0.0, static_cast<double>(to - from) / kNanosecondsAnHour); }

void restart(Track& track, double value, double variance, const FitEvent& event) {
  const double first = kFirstNoise * event.noise_floor;
  track.mean = value;
  track.variance = variance;
  track.noise = std::max(track.noise, first * first);
  track.floor = event.noise_floor * event.noise_floor;
  track.usual = event.sigma * event.sigma;
  track.at = event.at;
  ++track.accepted;
}

void update(Track& track, const FitEvent& event) {
  const double elapsed = hours(track.at, event.at);
  const double observed = event.sigma * event.sigma;
  const double innovation = event.value - track.mean;
  const double floor = event.noise_floor * event.noise_floor;
  if (elapsed > 0.0) {
    // Scans minutes apart say little of an hour's noise each; a minute at least keeps one of them from saying everything.
    const double seen = (innovation * innovation - observed - track.variance) / std::max(elapsed, 1.0 / 60.0);
    const double foreseen = observed + track.variance + std::max(floor, track.noise) * elapsed;
    const bool surprise = innovation * innovation > kSurprise * kSurprise * foreseen;
    // An imprecise scan says little of the noise: its say goes with the inverse square of its variance.
    const double say = kForget * std::min(1.0, (track.usual / observed) * (track.usual / observed));
    track.noise = surprise ? seen : (1.0 - say) * track.noise + say * seen;
    track.usual += kForget * (observed - track.usual);
    track.floor = floor;
  }
  const double predicted = track.variance + track.hourly() * elapsed;
  const double gain = predicted / (predicted + observed);
  track.mean += gain * innovation;
  track.variance = (1.0 - gain) * predicted;
  track.at = std::max(track.at, event.at);
  ++track.accepted;
}

void confirm(Track& track, const Pending& pending, const FitEvent& event) {
  const double a = 1.0 / (pending.sigma * pending.sigma), b = 1.0 / (event.sigma * event.sigma);
  restart(track, (a * pending.value + b * event.value) / (a + b), 1.0 / (a + b), event);
}

/// What of the state a quantity moves.
struct Followed {
  Track& track;
  std::optional<Pending>& step;
};

Followed followed(State& state, Quantity quantity) {
  if (quantity == Quantity::line) return {state.line, state.line_step};
  if (quantity == Quantity::gain) return {state.gain, state.gain_step};
  return {state.rabi, state.rabi_step};
}

}  // namespace

double Track::hourly() const { return std::max(floor, noise); }

std::optional<infer::Known> Track::predict(Time when) const {
  if (accepted == 0) return std::nullopt;
  return infer::Known{mean, std::sqrt(variance + hourly() * hours(at, when))};
}

void advance(State& state, const FitEvent& event) {
  auto [track, step] = followed(state, event.quantity);
  if (event.proposed) ++state.proposals_unanswered;
  if (event.effect == Effect::aside) {
    if (event.quantity != Quantity::rabi) return;
    state.at_other_amplitude = event.drive_amplitude == state.other_amplitude ? state.at_other_amplitude + 1 : 1;
    state.other_amplitude = event.drive_amplitude;
    return;
  }
  if (event.effect != Effect::none && event.quantity == Quantity::rabi) {
    state.at_other_amplitude = 0;
    if (event.effect != Effect::pending && std::isfinite(event.drive_amplitude)) state.drive_amplitude = event.drive_amplitude;
  }
  if (event.quantity == Quantity::rabi && (event.effect == Effect::first || event.effect == Effect::accepted || event.effect == Effect::confirmed))
    state.dead_time.add(event.at, event.dead_time_s, event.dead_time_sigma_s);
  switch (event.effect) {
    case Effect::none:
    case Effect::aside: return;
    case Effect::pending: step = Pending{event.value, event.sigma, event.span, event.spacing, event.at}; return;
    case Effect::first:
      track = Track{};
      restart(track, event.value, event.sigma * event.sigma, event);
      break;
    case Effect::accepted: update(track, event); break;
    case Effect::confirmed:
      // A line without the experiment's own carrier number has no place to be tracked at.
      if (step && (event.quantity != Quantity::line || std::isfinite(event.carrier))) confirm(track, *step, event);
      break;
  }
  step.reset();
}

void advance(State& state, const AppliedEvent& event) {
  for (const auto& [name, length] : event.pulses_s) {
    const auto [since, fresh] = state.in_force_at.try_emplace(name, event.at);
    if (!fresh && event.at < since->second) continue;  // a newer report is known already
    since->second = event.at;
    state.in_force_s[name] = length;
  }
  for (const auto& [name, amplitude] : event.amplitudes) {
    const auto [known, fresh] = state.amplitudes_in_force.try_emplace(name, InForce{amplitude, event.at});
    if (!fresh && event.at >= known->second.since) known->second = {amplitude, event.at};
  }
  if (std::isfinite(event.carrier) && event.at >= state.carrier_at) {
    state.carrier = event.carrier;
    state.carrier_at = event.at;
  }
  state.proposals_unanswered = 0;
}

}  // namespace halfturn::recalibrate
