// SPDX-License-Identifier: Apache-2.0
#include "tests/campaign/score.hpp"

#include <algorithm>
#include <cmath>

#include "model/quantity/constants.hpp"
#include "tests/campaign/answer.hpp"
#include "tests/campaign/bound.hpp"

namespace halfturn::campaign {
namespace {

using constants::kTwoPi;

constexpr double kOneSigma = 0.6826894921370859;
constexpr double kOffAngle = 0.050;   // rad
constexpr double kOffLine = 0.1;      // of the width
constexpr double kExcluded = 25;      // deviance
constexpr double kSigmas = 5;         // the square root of that
constexpr double kSpare = 1.5;
constexpr double kExpectedGain = 60;
constexpr double kSeenTwice = 60;     // deviance left by one line where two are plain
constexpr double kTwoSided95 = 1.959964;

const wire::Estimate* estimate(const wire::Fitted& fitted, std::string_view name) {
  for (const auto& [key, value] : fitted.estimates)
    if (key == name) return &value;
  return nullptr;
}

struct Span {
  double value, low, high;
  bool exists() const { return std::isfinite(low) && std::isfinite(high); }
  bool holds(double truth) const { return low <= truth && truth <= high; }
};

/// The quantity that the family is scored by: the pi length (s) or the line's offset (rad/s).
Span scored_quantity(const Case& of, const wire::Fitted& fitted) {
  constexpr double kNone = std::numeric_limits<double>::quiet_NaN();
  if (of.truth.line) {
    const auto* offset = estimate(fitted, "line_offset_hz");
    if (offset == nullptr) return {kNone, kNone, kNone};
    return {kTwoPi * offset->value, kTwoPi * offset->low, kTwoPi * offset->high};
  }
  if (fitted.pulses.empty()) return {kNone, kNone, kNone};
  const auto& pi = fitted.pulses.front().second;
  return {pi.exact_s, pi.low_s, pi.high_s};
}

bool healthy(const Case& of, const Family& family, const Bound& bound, double width) {
  if (of.to_be_refused || family.kind == Kind::barren || of.truth.second_weight > 0) return false;
  if (of.aliased && of.before.empty()) return false;
  if (!(bound.gain >= kExpectedGain)) return false;
  const auto& accept = of.drive.accept;
  if (of.truth.line)
    return kSpare * bound.offset <= accept.max_carrier_error * width && kSpare * std::abs(of.truth.detuning) <= accept.max_carrier_step * width;
  const auto [first, last] = std::minmax_element(of.scan.axis.begin(), of.scan.axis.end());
  const double rate = of.truth.generalised(), span = *last - *first;
  const double least = (rate - kSpare * kTwoSided95 * bound.generalised) * span / kTwoPi;
  const bool precise = std::all_of(bound.pulse_s.begin(), bound.pulse_s.end(),
                                   [&](double sigma) { return kSpare * rate * sigma <= accept.max_angle_error_rad; });
  return rate * span / kTwoPi >= 1 && least >= accept.min_cycles && precise;
}

/// How a used answer that is off by more than is allowed fares; the worst of its pulses.
struct Off {
  double held_against = std::numeric_limits<double>::quiet_NaN();  // by the data against the truth, deviance
  double in_sigmas = 0;                                            // of the answer's own
};
Off how_far_off(const Case& of, const wire::Fitted& fitted, double width) {
  Off off;
  if (of.truth.line) {
    const bool far = std::abs(scored_quantity(of, fitted).value - of.truth.detuning) > kOffLine * width;
    if (far) off.held_against = held_against(of, 0, of.truth.detuning);
    return off;
  }
  for (std::size_t i = 0; i < fitted.pulses.size(); ++i) {
    const auto& pulse = fitted.pulses[i].second;
    const double truth = best_pulse(of.truth, pulse.angle_rad);
    if (pulse.verdict == "refuse" || !(std::abs(pulse.exact_s - truth) * of.truth.generalised() > kOffAngle)) continue;
    off.held_against = std::fmax(off.held_against, held_against(of, i, truth));
    off.in_sigmas = std::max(off.in_sigmas, std::abs(pulse.exact_s - truth) / pulse.sigma_s);
  }
  return off;
}

void judge_use(const Case& of, const wire::Fitted& fitted, double width, Scored& scored) {
  if (of.to_be_refused) {
    scored.wrong = true;
    return;
  }
  if (of.truth.line && of.truth.second_weight > 0) {
    scored.held_against = left_by_one_line(of);
    scored.wrong = scored.held_against >= kSeenTwice;
    return;
  }
  const Off off = how_far_off(of, fitted, width);
  scored.held_against = off.held_against;
  scored.wrong = off.held_against > kExcluded || (of.aliased && off.in_sigmas > kSigmas);
}

/// Whether the contrast's prior lets a detuned scan tell the bare from the generalised frequency: sigma below 0.2 (Delta/Omega)^2.
bool tells_bare(const Case& of) {
  if (of.truth.detuning == 0) return true;
  const double known = of.drive.contrast ? of.drive.contrast->sigma : INFINITY;
  return known < 0.2 * std::pow(of.truth.detuning / of.truth.rabi, 2);
}

/// Where it does not, no bound on the bare frequency is to be had from the derivatives at one point.
double rabi_off(const Case& of, const Bound& bound) {
  if (of.truth.line || !tells_bare(of)) return std::nan("");
  const auto fitted = answer(of, 0.95, of.true_dynamics);
  const auto* rabi = estimate(fitted, "rabi_hz");
  return rabi == nullptr ? std::nan("") : (kTwoPi * rabi->value - of.truth.rabi) / bound.rabi;
}

}  // namespace

Scored score(const Case& of, const Family& family) {
  const double width = of.truth.line ? line_width(of.truth) : 0;
  const Bound at_best = bound(of);
  const auto fitted = answer(of, 0.95);
  Scored scored;
  scored.healthy = healthy(of, family, at_best, width);
  scored.used = fitted.verdict != "refuse";
  if (scored.used) judge_use(of, fitted, width, scored);
  else if (!fitted.reasons.empty()) scored.refusal = fitted.reasons.front().code;
  for (const auto& reason : fitted.reasons)
    scored.rightly_refused = scored.rightly_refused ||
                             (!scored.used && std::find(family.refusals.begin(), family.refusals.end(), reason.code) != family.refusals.end());
  if (family.kind == Kind::barren) return scored;

  const auto wide = scored_quantity(of, fitted), narrow = scored_quantity(of, answer(of, kOneSigma));
  const double truth = of.truth.line ? of.truth.detuning : best_pulse(of.truth, constants::kPi);
  scored.converged = wide.exists() && narrow.exists();
  scored.in_95 = scored.converged && wide.holds(truth);
  scored.in_68 = scored.converged && narrow.holds(truth);
  if (!scored.healthy || !scored.used) return scored;
  scored.off = (wide.value - truth) / (of.truth.line ? at_best.offset : at_best.pulse_s.front());
  if (!of.true_dynamics.empty()) scored.rabi_off = rabi_off(of, at_best);
  return scored;
}

Row gather(const Family& family, std::span<const Scored> scans) {
  Row row;
  row.family = std::string(family.name);
  double squares = 0, rabi_squares = 0;
  for (const auto& scan : scans) {
    ++row.scans;
    row.healthy += scan.healthy;
    row.used += scan.used;
    row.healthy_used += scan.healthy && scan.used;
    row.wrong += scan.wrong;
    row.converged += scan.converged;
    row.in_68 += scan.in_68;
    row.in_95 += scan.in_95;
    row.used_converged += scan.used && scan.converged;
    row.used_in_68 += scan.used && scan.in_68;
    row.used_in_95 += scan.used && scan.in_95;
    row.rightly_refused += scan.rightly_refused;
    if (!scan.refusal.empty()) ++row.refusals[scan.refusal];
    if (std::isfinite(scan.off)) {
      ++row.measured;
      squares += scan.off * scan.off;
    }
    if (std::isfinite(scan.rabi_off)) {
      ++row.rabi_measured;
      rabi_squares += scan.rabi_off * scan.rabi_off;
    }
  }
  if (row.measured > 0) row.rms_over_bound = std::sqrt(squares / static_cast<double>(row.measured));
  if (row.rabi_measured > 0) row.rabi_rms_over_bound = std::sqrt(rabi_squares / static_cast<double>(row.rabi_measured));
  return row;
}

}  // namespace halfturn::campaign
