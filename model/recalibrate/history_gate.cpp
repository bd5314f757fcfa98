// SPDX-License-Identifier: Apache-2.0
#include <algorithm>
#include <cmath>

#include "model/recalibrate/gate_words.hpp"
#include "model/recalibrate/gates.hpp"

/// What history has to say of a fit that is believable in itself.
namespace halfturn::recalibrate {
namespace {

// `max_step` sleeps until so many scans were accepted.
constexpr int kStepAwake = 3;
// Two scans repeat one another where span and spacing agree to this.
constexpr double kSameAxis = 0.01;
// So many flops in a row at another drive amplitude make it the new one.
constexpr int kAmplitudeTaken = 3;

/// A scan at another drive amplitude than the tracked one moves nothing; several flops in a row make it the new one.
std::optional<Effect> amplitude_gate(const State& state, const FitEvent& event, Reasons& reasons) {
  if (same_amplitude(state.drive_amplitude, event.drive_amplitude)) return std::nullopt;
  const std::string seen = "Taken at the drive amplitude " + plain(event.drive_amplitude) + ", not at " + plain(state.drive_amplitude) +
                           " as the scans before. ";
  if (event.quantity == Quantity::line) {
    caution(reasons, "other_amplitude", seen + "The line may be shifted by the light, by an amount that is not known here, so the carrier rests as it is.");
    return Effect::aside;
  }
  const bool again = event.drive_amplitude == state.other_amplitude && state.at_other_amplitude + 1 >= kAmplitudeTaken;
  if (again) {
    caution(reasons, "amplitude_changed", seen + "It is the " + std::to_string(kAmplitudeTaken) +
                                              "rd in a row, so this is taken as the amplitude from now on; the history starts again.");
    return Effect::first;
  }
  caution(reasons, "other_amplitude", seen + "The pulses rest as they are. After " + std::to_string(kAmplitudeTaken) +
                                          " scans in a row at the new amplitude it becomes the one that is tracked.");
  return Effect::aside;
}

}  // namespace

Effect history_gate(const State& state, const FitEvent& event, const infer::Fit& fit, const Context& context, Reasons& reasons) {
  const bool line = event.quantity == Quantity::line;
  if (const auto effect = amplitude_gate(state, event, reasons)) return *effect;
  const bool gain = event.quantity == Quantity::gain;
  const Track& track = line ? state.line : gain ? state.gain : state.rabi;
  if (track.accepted > 0 && event.at < track.at) {
    caution(reasons, "late", "Taken before the last scan that was believed: it is logged and moves nothing.");
    return Effect::none;
  }
  const auto& step = line ? state.line_step : gain ? state.gain_step : state.rabi_step;
  const auto predicted = track.predict(event.at);
  const double width = fit.quality.line_width;
  // A carrier step is measured from the carrier as it stands: that is what the experiment relies on.
  const double off = line ? std::abs(fit.line_offset.value) / width
                          : (predicted ? std::abs(std::exp(event.value - predicted->mean) - 1.0) : 0.0);
  const double allowed = line ? context.accept.max_carrier_step : context.accept.max_step;
  const bool awake = line || track.accepted >= kStepAwake;
  if (!awake || off <= allowed) {
    if (track.accepted > 0) return Effect::accepted;
    if (!line || std::isfinite(event.carrier))
      caution(reasons, "first", std::string("First ") + (line ? "line" : gain ? "scan of amplitudes" : "flop") + " of this drive that was believed: there is no history to hold it against.");
    return Effect::first;
  }
  const std::string seen =
      line ? "The line lies " + hertz(fit.line_offset) + " from the carrier, " + percent(off) + " of its width (allowed at once: " +
                 percent(allowed) + ")"
           : "The Rabi frequency" + std::string(gain ? " per unit of amplitude, " + hertz(fit.rabi_per_amplitude) : ", " + hertz(fit.rabi)) +
                 ", is " + percent(off) + " from the " + hertz(std::exp(predicted->mean)) + " that history predicts (allowed at once: " +
                 percent(allowed) + ")";
  if (step) {
    // The drive went on drifting in between.
    const double drifted = track.hourly() * std::max(0.0, static_cast<double>(event.at - step->at)) / 3.6e12;
    const double spread = std::sqrt(step->sigma * step->sigma + event.sigma * event.sigma + drifted);
    const bool agrees = std::abs(event.value - step->value) <= 3.0 * spread;
    const bool differs = std::abs(event.span / step->span - 1.0) > kSameAxis || std::abs(event.spacing / step->spacing - 1.0) > kSameAxis;
    if (agrees && differs) {
      caution(reasons, "step_confirmed", seen + ", and a second scan with other points agrees: taken as a real change. Find out what moved.");
      return Effect::confirmed;
    }
    if (agrees) {
      refuse(reasons, "step", seen + ". A second scan agrees but has the same points, which would repeat the same mistake: scan once more with "
                                     "another span or spacing to confirm.");
      return Effect::pending;
    }
  }
  refuse(reasons, "step", seen + ". Scan again with another span or spacing: if that agrees, the change is taken as real.");
  return Effect::pending;
}

}  // namespace halfturn::recalibrate
