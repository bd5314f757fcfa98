// SPDX-License-Identifier: Apache-2.0
#include "tests/campaign/score.hpp"

#include <algorithm>
#include <cmath>

#include "model/quantity/constants.hpp"
#include "tests/campaign/answer.hpp"
#include "tests/campaign/bound.hpp"
#include "tests/campaign/held.hpp"

namespace halfturn::campaign {
namespace {

using constants::kTwoPi;

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

/// The same at one sigma.
Span narrow_quantity(const Case& of, const infer::Fit& fit) {
  const infer::Estimate none;
  const auto& e = of.truth.line ? fit.second.line_offset : fit.second.pulse_length_s.empty() ? none : fit.second.pulse_length_s.front();
  return {e.value, e.low, e.high};
}

/// Whether a scan may be healthy at all; what is left to ask is how precise it can be.
bool may_be_healthy(const Case& of, const Family& family) {
  if (of.to_be_refused || family.kind == Kind::barren || of.truth.second_weight > 0) return false;
  return !of.aliased || !of.before.empty();
}

/// Whose answer it is. The daemon's stands at the likelihood's maximum; of another pipeline's it is asked as well what the data hold
/// against the answer.
enum class Whose { ours, theirs };

/// By how much the data tell an answer from the truth, deviance.
double apart(const Case& of, const infer::Fit& fit, std::size_t pulse, double answer, double truth, Whose whose) {
  const double against_truth = held_against(of, fit, pulse, truth);
  return whose == Whose::ours ? against_truth : std::fmax(against_truth, held_against(of, fit, pulse, answer));
}

/// How a used answer that is off by more than is allowed fares; the worst of its pulses.
struct Off {
  double held_against = std::numeric_limits<double>::quiet_NaN();  // by the data, deviance
  double in_sigmas = 0;                                            // of the answer's own
};
Off how_far_off(const Case& of, const wire::Fitted& fitted, const infer::Fit& fit, Whose whose) {
  Off off;
  if (of.truth.line) {
    const double offset = scored_quantity(of, fitted).value;
    const bool far = std::abs(offset - of.truth.detuning) > kOffLine * of.width;
    if (far) off.held_against = apart(of, fit, 0, offset, of.truth.detuning, whose);
    return off;
  }
  for (std::size_t i = 0; i < fitted.pulses.size(); ++i) {
    const auto& pulse = fitted.pulses[i].second;
    const double truth = best_pulse(of.truth, pulse.angle_rad);
    if (pulse.verdict == "refuse" || !(std::abs(pulse.exact_s - truth) * of.truth.generalised() > kOffAngle)) continue;
    off.held_against = std::fmax(off.held_against, apart(of, fit, i, pulse.exact_s, truth, whose));
    off.in_sigmas = std::max(off.in_sigmas, std::abs(pulse.exact_s - truth) / pulse.sigma_s);
  }
  return off;
}

void judge_use(const Case& of, const wire::Fitted& fitted, const infer::Fit& fit, Whose whose, Scored& scored) {
  if (of.to_be_refused) {
    scored.wrong = true;
    return;
  }
  if (of.truth.line && of.truth.second_weight > 0) {
    scored.held_against = left_by_one_line(of);
    scored.wrong = scored.held_against >= kSeenTwice;
    return;
  }
  const Off off = how_far_off(of, fitted, fit, whose);
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
double rabi_off(const Case& of, const infer::Fit& fit, const Bound& bound) {
  if (of.truth.line || of.true_dynamics.empty() || !tells_bare(of)) return std::nan("");
  return (rabi_under_truth(of, fit) - of.truth.rabi) / bound.rabi;
}

/// Use, refusal and what is wrong of a reply. `fit` is the daemon's of the same scan.
Scored score_use(const Case& of, const Family& family, const wire::Fitted& fitted, const infer::Fit& fit, Whose whose) {
  Scored scored;
  scored.used = fitted.verdict != "refuse";
  if (scored.used) judge_use(of, fitted, fit, whose, scored);
  else if (!fitted.reasons.empty()) scored.refusal = fitted.reasons.front().code;
  for (const auto& reason : fitted.reasons)
    scored.rightly_refused = scored.rightly_refused ||
                             (!scored.used && std::find(family.refusals.begin(), family.refusals.end(), reason.code) != family.refusals.end());
  return scored;
}

}  // namespace

bool is_healthy(const Case& of, const Bound& bound, double width) {
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

Scored score(const Case& of, const Family& family, const Answered& answered) {
  const auto& [fitted, fit] = answered;
  Scored scored = score_use(of, family, fitted, fit, Whose::ours);
  Bound at_best;
  if (may_be_healthy(of, family)) {
    at_best = bound(of);
    scored.healthy = is_healthy(of, at_best, of.width);
  }
  if (family.kind == Kind::barren) return scored;

  const auto wide = scored_quantity(of, fitted), narrow = narrow_quantity(of, fit);
  const double truth = of.truth.line ? of.truth.detuning : best_pulse(of.truth, constants::kPi);
  scored.converged = wide.exists() && narrow.exists();
  scored.in_95 = scored.converged && wide.holds(truth);
  scored.in_68 = scored.converged && narrow.holds(truth);
  if (!scored.healthy || !scored.used) return scored;
  scored.off = (wide.value - truth) / (of.truth.line ? at_best.offset : at_best.pulse_s.front());
  scored.rabi_off = rabi_off(of, fit, at_best);
  return scored;
}

Scored score_other(const Case& of, const Family& family, const wire::Fitted& theirs, const infer::Fit& ours) {
  Scored scored = score_use(of, family, theirs, ours, Whose::theirs);
  scored.healthy = may_be_healthy(of, family) && is_healthy(of, bound(of), of.width);
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
