// SPDX-License-Identifier: Apache-2.0
#include "model/infer/estimate.hpp"

#include <algorithm>
#include <cmath>

#include "model/infer/amplitude_response.hpp"
#include "model/infer/conditioning.hpp"
#include "model/infer/dead_time.hpp"
#include "model/infer/rules.hpp"
#include "model/infer/statistics.hpp"
#include "model/quantity/constants.hpp"

namespace halfturn::infer {
namespace {

// A candidate says nothing of its own whose error is this many times that of the best.
constexpr double kSpeaks = 8.0;

constexpr std::string_view kNotInDynamics = "the chosen dynamics have no such rate";
constexpr std::string_view kAtBound = "the best value is at its bound";
constexpr std::string_view kNotDetermined = "the scan does not determine it";
constexpr std::string_view kOpenInterval = "the likelihood stays high out to the bound";
constexpr std::string_view kNoPulse = "the couplings differ so much that no pulse turns the ensemble by this angle better than others";
constexpr std::string_view kOutOfReach = "the drive saturates below it";

}  // namespace

Scale::Scale(double scatter_, double level_) : scatter(scatter_), level(level_), z(normal_quantile(0.5 + 0.5 * level_)) {}

Estimate from_covariance(double value, double variance, const Scale& scale) {
  Estimate e;
  e.value = value;
  if (!(variance > 0.0) || !std::isfinite(variance)) {
    e.why = variance == 0.0 ? kAtBound : kNotDetermined;
    return e;
  }
  e.sigma = std::sqrt(variance * scale.scatter);
  const double z = scale.z;
  e.low = value - z * e.sigma;
  e.high = value + z * e.sigma;
  return e;
}

Estimate profiled(const Objective& objective, const Bounds& bounds, const Minimum& minimum, int index, double variance, const Scale& scale) {
  Estimate e = from_covariance(minimum.x[index], variance, scale);
  const auto interval = profile_interval(objective, minimum, index, scale.quantile() * scale.scatter, bounds);
  auto end = [](const ProfileEnd& at) { return at.kind == ProfileEnd::Kind::reached ? at.at : kUnknown; };
  e.low = end(interval.low);
  e.high = end(interval.high);
  if (interval.lower_found) e.low = e.high = kUnknown;
  if (!std::isfinite(e.low) || !std::isfinite(e.high)) e.why = kOpenInterval;
  return e;
}

namespace {

/// The same solution in the coordinates of another lead.
Minimum in_coordinates(const ScanObjective& objective, const Solution& solution) {
  if (objective.scan().kind != Axis::amplitude) return objective.in_coordinates(solution.minimum, solution.physical);
  Minimum minimum = solution.minimum;
  minimum.x = objective.pack(solution.physical);
  objective.evaluate(minimum.x, minimum.value, &minimum.gradient, &minimum.information);
  return minimum;
}

/// Probability below x under a normal law whose sides are as wide as the interval's.
double below(const Estimate& e, double x, double z) {
  const double side = x < e.value ? (e.value - e.low) / z : (e.high - e.value) / z;
  return normal_cdf((x - e.value) / std::max(side, 1e-300));
}

}  // namespace

double mixture_quantile(std::span<const Part> parts, double probability, double z) {
  double low = parts[0].estimate.low, high = parts[0].estimate.high;
  for (const auto& part : parts) {
    low = std::min(low, 2.0 * part.estimate.low - part.estimate.value);
    high = std::max(high, 2.0 * part.estimate.high - part.estimate.value);
  }
  const auto excess = [&](double x) {
    double sum = -probability;
    for (const auto& part : parts) sum += part.weight * below(part.estimate, x, z);
    return sum;
  };
  // False position with the retained end's value halved (M. Dowell, P. Jarratt, BIT 11, 168 (1971)): to 1e-7 of the width in about ten steps.
  const double close = 1e-7 * (high - low);
  double at_low = excess(low), at_high = excess(high);
  if (!(at_low < 0.0 && at_high > 0.0)) return at_low >= 0.0 ? low : high;
  double found = low;
  for (int i = 0, side = 0; i < 40; ++i) {
    const double last = found;
    found = (low * at_high - high * at_low) / (at_high - at_low);
    const double at = excess(found);
    if (at == 0.0 || (i > 0 && std::abs(found - last) < close)) break;
    if (at < 0.0) {
      low = found;
      at_low = at;
      if (side < 0) at_high *= 0.5;
      side = -1;
    } else {
      high = found;
      at_high = at;
      if (side > 0) at_low *= 0.5;
      side = 1;
    }
  }
  return found;
}

Estimate averaged(std::span<Part> parts, const Scale& scale) {
  // A candidate whose rate or breadth ran where nothing holds it has no error to average, or one far beyond that of the best (parts[0]),
  // from a slope at 0 that does not last: the others speak. A spread that the scan does not show took a sigma of 22 mrad to 54 rad so.
  const double most = std::isfinite(parts[0].estimate.sigma) ? kSpeaks * parts[0].estimate.sigma : std::numeric_limits<double>::max();
  const auto sure = [most](const Part& part) { return part.estimate.sigma <= most; };
  if (std::any_of(parts.begin(), parts.end(), sure))
    parts = parts.first(static_cast<std::size_t>(std::stable_partition(parts.begin(), parts.end(), sure) - parts.begin()));
  double total = 0.0;
  for (const auto& part : parts) total += part.weight;
  Estimate mean;
  mean.value = 0.0;
  for (auto& part : parts) {
    part.weight /= total;
    mean.value += part.weight * part.estimate.value;
  }
  double variance = 0.0;
  bool bounded = true;
  for (const auto& part : parts) {
    const double off = part.estimate.value - mean.value;
    variance += part.weight * (part.estimate.sigma * part.estimate.sigma + off * off);
    bounded = bounded && std::isfinite(part.estimate.low) && std::isfinite(part.estimate.high);
    if (!part.estimate.why.empty()) mean.why = part.estimate.why;
  }
  mean.sigma = std::sqrt(variance);
  if (!bounded) return mean;
  const double z = scale.z, tail = 0.5 * (1.0 - scale.level);
  if (parts.size() == 1) {
    mean.low = parts[0].estimate.low;
    mean.high = parts[0].estimate.high;
  } else {
    mean.low = mixture_quantile(parts, tail, z);
    mean.high = mixture_quantile(parts, 1.0 - tail, z);
  }
  return mean;
}

Estimate times(Estimate e, double factor) {
  for (double* part : {&e.value, &e.sigma, &e.low, &e.high}) *part *= factor;
  return e;
}

namespace {

/// With a standard error no smaller than the wider side of its interval where another parameter lies at its bound, such as a
/// detuning's square at 0: the error at the minimum is then that of its being there, and the likelihood reaches much further the way it
/// may leave. The campaign's counts are in bound_sigma_test.
Estimate as_wide_as_sides(Estimate e, const Minimum& minimum, const Scale& scale) {
  const auto& bound = minimum.at_bound;
  const bool held = std::any_of(bound.begin(), bound.end(), [](signed char at) { return at != 0; });
  if (held && std::isfinite(e.low) && std::isfinite(e.high)) e.sigma = std::max(e.sigma, std::max(e.high - e.value, e.value - e.low) / scale.z);
  return e;
}

/// A mode's candidates with the covariance of each that is heard, in the coordinates in which they were found.
struct Heard {
  const Problem& problem;
  const ModeSolutions& mode;
  std::array<double, kDynamicsCount> weight;
  std::array<Matrix, kDynamicsCount> covariance;

  Heard(const Problem& problem_, const ModeSolutions& mode_, const Fit& fit) : problem(problem_), mode(mode_) {
    for (std::size_t i = 0; i < mode.solutions.size(); ++i) {
      weight[i] = fit.candidates[i].weight;
      if (heard(i)) covariance[i] = covariance_of(mode.solutions[i].minimum);
    }
  }
  bool heard(std::size_t i) const { return i == 0 || weight[i] >= kWeightHeard; }
  double variance(std::size_t i, int index, const ScanObjective& objective, const Minimum& minimum) const {
    if (objective.scan().kind == Axis::amplitude) return covariance_of(minimum)(index, index);
    if (index != objective.layout().lead) return covariance[i](index, index);
    const Vector slope = objective.lead_by_generalised(mode.solutions[i].physical);
    return slope.dot(covariance[i] * slope);
  }
};

/// The average over candidates of a lead coordinate (or of the coordinate that `slot` picks). The best has its profile interval; the
/// others, which fit worse and weigh less, that of their standard error.
template <class Slot>
Estimate over_candidates(const Heard& heard, const Fit& fit, Lead lead, const Scale& scale, Slot slot, FitWorkspace& work) {
  const Problem& problem = heard.problem;
  // What a scan that shows nothing says is withheld in the end (shown.hpp), and not worth a profile.
  const bool shown = fit.quality.over_flat >= problem.options.least_evidence;
  std::array<Part, kDynamicsCount> parts;
  std::size_t count = 0;
  for (std::size_t i = 0; i < heard.mode.solutions.size(); ++i) {
    const auto& solution = heard.mode.solutions[i];
    if (!heard.heard(i)) continue;
    const ScanObjective objective(problem.scan, problem.readout, problem.prior, solution.dynamics, lead, solution.negative_contrast,
                                  work.objective);
    const Minimum minimum = in_coordinates(objective, solution);
    const int index = slot(objective.layout());
    // A drive that saturates below what the pulse needs, or couplings that no pulse turns together. What lesser candidates say is no answer.
    if (!std::isfinite(minimum.x[index]))
      return {kUnknown, kUnknown, kUnknown, kUnknown, lead.kind == Lead::Kind::pulse_amplitude ? kOutOfReach : kNoPulse};
    const double variance = heard.variance(i, index, objective, minimum);
    Estimate& e = parts[count].estimate;
    e = shown && i == 0 ? profiled(objective, objective.bounds(), minimum, index, variance, scale) : from_covariance(minimum.x[index], variance, scale);
    const bool pulse = lead.kind == Lead::Kind::pulse_length || lead.kind == Lead::Kind::pulse_amplitude;
    if (!pulse && index == objective.layout().lead) e = as_wide_as_sides(e, minimum, scale);
    parts[count++].weight = heard.weight[i];
  }
  return averaged({parts.data(), count}, scale);
}

/// 1/e time of the oscillation, resonance or not: coherence and populations damp it in the shares that the tilt of the
/// rotation axis gives (to first order in the rates over the generalised frequency).
double envelope_rate(const dynamics::Rates& r) {
  const double square = r.rabi * r.rabi, whole = square + r.detuning * r.detuning;
  const double tilt = whole > 0.0 ? 0.5 * square / whole : 0.5;
  const double coherence = 0.5 * (r.decay + r.loss) + r.dephasing;
  return coherence * (1.0 - tilt) + (r.decay + 0.5 * r.loss) * tilt;
}

Estimate inverse_rate(double rate, double variance, const Scale& scale) {
  Estimate e;
  if (!(rate > 0.0)) {
    e.why = kAtBound;
    return e;
  }
  const Estimate of_rate = from_covariance(rate, variance, scale);
  e.value = 1.0 / rate;
  e.why = of_rate.why;
  if (!(of_rate.sigma < rate)) {
    if (e.why.empty()) e.why = kNotDetermined;
    return e;
  }
  e.sigma = of_rate.sigma / (rate * rate);
  e.low = 1.0 / of_rate.high;
  if (of_rate.low > 0.0) e.high = 1.0 / of_rate.low;
  else if (e.why.empty()) e.why = "longer than the scan can tell";
  return e;
}

/// 1/e time of an ensemble's oscillation with its error, where it is of a Gaussian law or another that falls for good.
void fill_ensemble_envelope(const ScanObjective& objective, const Scale& scale, Fit& fit, FitWorkspace& work) {
  fit.envelope_s = {};
  if (fit.chosen == Dynamics::doppler) {
    fit.envelope_s.why = "a Doppler-broadened oscillation falls as a power of time and has no 1/e time";
    return;
  }
  const double rabi = fit.rates.rabi, time = dynamics::fading_phase(objective.ensemble(fit.physical), work.objective.ensemble) / rabi;
  fit.envelope_s.value = time;
  if (!std::isfinite(time)) {
    fit.envelope_s = {kUnknown, kUnknown, kUnknown, kUnknown, "the oscillation does not fall to 1/e within a thousand cycles"};
    return;
  }
  // The time goes nearly as a power of the breadth; a step of a hundredth of it tells which.
  Physical moved = fit.physical;
  moved.breadth *= 1.01;
  const double slope = (dynamics::fading_phase(objective.ensemble(moved), work.objective.ensemble) / rabi - time) / (0.01 * fit.physical.breadth);
  const int slot = objective.layout().breadth;
  fit.envelope_s = from_covariance(time, slope * slope * fit.covariance(slot, slot) / scale.scatter, scale);
}

void fill_damping(const Problem& problem, const ScanObjective& objective, const Scale& scale, Fit& fit, FitWorkspace& work) {
  for (auto* e : {&fit.decay_s, &fit.dephasing_s, &fit.loss_s, &fit.envelope_s}) e->why = kNotInDynamics;
  const auto& layout = objective.layout();
  const auto time_of = [&](int slot, double rate) { return inverse_rate(rate, fit.covariance(slot, slot) / scale.scatter, scale); };
  if (fit.chosen == Dynamics::dephasing) fit.dephasing_s = time_of(layout.damping, fit.physical.damping);
  if (fit.chosen == Dynamics::decay || fit.chosen == Dynamics::decay_dephasing)
    fit.decay_s = time_of(layout.damping, fit.physical.damping + problem.prior.decay);
  if (has_two_rates(fit.chosen)) fit.dephasing_s = time_of(layout.dephasing, fit.physical.dephasing);
  if (fit.chosen == Dynamics::leak || fit.chosen == Dynamics::leak_dephasing) fit.loss_s = time_of(layout.damping, fit.physical.damping + problem.prior.loss);
  if (is_ensemble(fit.chosen)) return fill_ensemble_envelope(objective, scale, fit, work);
  const double envelope = envelope_rate(fit.rates);
  if (!(envelope > 0.0)) return;
  Vector slope = Vector::Zero(layout.count);  // d envelope / d parameter, to first order in the rates
  if (layout.damping >= 0)
    slope[layout.damping] = fit.chosen == Dynamics::decay || fit.chosen == Dynamics::decay_dephasing ? 0.75 : 0.5;
  if (layout.dephasing >= 0) slope[layout.dephasing] = 0.5;
  fit.envelope_s = inverse_rate(envelope, slope.dot(fit.covariance * slope) / scale.scatter, scale);
  if (layout.damping < 0) {
    fit.envelope_s.low = fit.envelope_s.high = fit.envelope_s.sigma = kUnknown;
    fit.envelope_s.why = "from the known lifetime alone, which is not fitted";
  }
}

/// The parameter of a chosen ensemble, and a drift.
void fill_others(const ScanObjective& objective, const Scale& scale, Fit& fit) {
  const auto& layout = objective.layout();
  fit.breadth.why = kNotInDynamics;
  fit.drift.why = "no change of the coupling along the scan was found";
  if (layout.drift >= 0) fit.drift = from_covariance(fit.physical.drift, fit.covariance(layout.drift, layout.drift) / scale.scatter, scale);
  if (layout.breadth < 0) return;
  Estimate e = from_covariance(fit.physical.breadth, fit.covariance(layout.breadth, layout.breadth) / scale.scatter, scale);
  if (fit.chosen != Dynamics::thermal) {  // the fit's coordinate is the square
    e.value = std::sqrt(std::max(0.0, e.value));
    e.sigma = e.value > 0.0 ? 0.5 * e.sigma / e.value : kUnknown;
    e.low = std::sqrt(std::max(0.0, e.low));
    e.high = std::sqrt(std::max(0.0, e.high));
  } else {
    e.low = std::max(0.0, e.low);
  }
  fit.breadth = e;
}

void fill_readout(const ScanObjective& objective, const Scale& scale, Fit& fit) {
  const auto& layout = objective.layout();
  const auto variance = [&fit, &scale](int a, int b) { return fit.covariance(a, b) / scale.scatter; };
  fit.floor = from_covariance(fit.physical.signal_ground, variance(layout.ground, layout.ground), scale);
  fit.contrast = from_covariance(fit.physical.contrast(),
                                 variance(layout.ground, layout.ground) + variance(layout.excited, layout.excited) -
                                     2.0 * variance(layout.ground, layout.excited),
                                 scale);
  fit.dead_time_points = {kUnknown, kUnknown};
  if (layout.dead_time >= 0) {
    const double about = variance(layout.dead_time, layout.dead_time);
    fit.dead_time_s = from_covariance(fit.physical.dead_time, about, scale);
    fit.dead_time_points = without_prior(fit.physical.dead_time, about, objective.prior().dead_time, scale.scatter);
  } else {
    fit.dead_time_s = {fit.physical.dead_time, kUnknown, kUnknown, kUnknown, "held at its configured value"};
  }
}

/// The part of the coupling lost at the largest amplitude; below 0 where the gain rises.
Estimate lost(const ScanObjective& objective, const Minimum& minimum, double largest, const Scale& scale) {
  const int index = objective.layout().compression;
  const Estimate q = profiled(objective, objective.bounds(), minimum, index, covariance_of(minimum)(index, index), scale);
  const auto part = [largest](double compression) { return 1.0 - compressed(largest, compression) / largest; };
  return {part(q.value), q.sigma * std::abs(compressed_by_compression(largest, q.value)) / largest, part(q.low), part(q.high), q.why};
}

void fill_amplitudes(const Heard& heard, const ScanObjective& objective, const Scale& scale, Fit& fit, FitWorkspace& work) {
  const Problem& problem = heard.problem;
  const auto lead_slot = [](const Layout& layout) { return layout.lead; };
  const double q = fit.physical.compression;
  const double seen = compressed(fit.longest, q) - compressed(fit.lowest, q);
  fit.rabi = fit.rabi_mean = {kUnknown, kUnknown, kUnknown, kUnknown, kNotThisScan};
  fit.dead_time_s = fit.rabi;  // its prior at best
  fit.quality.cycles = fit.physical.generalised * fit.generalised.low / fit.generalised.value * seen / constants::kTwoPi;
  fit.compression = lost(objective, heard.mode.best().minimum, fit.longest, scale);
  fit.rabi_per_amplitude = over_candidates(heard, fit, {Lead::Kind::per_amplitude}, scale, lead_slot, work);
  for (const auto& pulse : problem.options.pulses) {
    const Lead lead{Lead::Kind::pulse_amplitude, pulse.angle_rad, pulse.area_factor, pulse.length_s};
    const bool asked = pulse.length_s > fit.physical.dead_time;
    fit.pulse_amplitude.push_back(asked ? over_candidates(heard, fit, lead, scale, lead_slot, work) : Estimate{});
  }
}

}  // namespace

void fill_from_covariance(const Problem& problem, const ScanObjective& objective, const Scale& scale, Fit& fit, FitWorkspace& work) {
  fill_damping(problem, objective, scale, fit, work);
  fill_others(objective, scale, fit);
  fill_readout(objective, scale, fit);
}

void estimate(const Problem& problem, const ModeSolutions& mode, Fit& fit, FitWorkspace& work) {
  const Scale scale(fit.quality.scatter, problem.options.level);
  weigh(mode.solutions, scale.scatter, fit);
  const auto& best = mode.best();
  const ScanObjective objective(problem.scan, problem.readout, problem.prior, best.dynamics, {}, best.negative_contrast, work.objective);
  fit.chosen = best.dynamics;
  fit.physical = best.physical;
  fit.rates = objective.rates(best.physical);
  fit.negative_contrast = best.negative_contrast;
  fit.x = best.minimum.x;
  const Heard heard(problem, mode, fit);
  fit.covariance = heard.covariance[0] * scale.scatter;
  fit.quality.conditioning = conditioning(objective, best.minimum);
  fill_from_covariance(problem, objective, scale, fit, work);
  fit.mean_factor = objective.mean_factor(best.physical);

  auto lead_slot = [](const Layout& layout) { return layout.lead; };
  auto offset_slot = [](const Layout& layout) { return layout.line_offset; };
  const auto ensemble = [](const Solution& solution) { return is_ensemble(solution.dynamics); };
  const bool ensembles = std::any_of(mode.solutions.begin(), mode.solutions.end(), ensemble);
  const bool detuned = problem.scan.kind == Axis::duration && objective.layout().detuning_square >= 0;
  const auto lead = [&](Lead::Kind kind) { return over_candidates(heard, fit, {kind}, scale, lead_slot, work); };
  fit.generalised = lead(ensembles ? Lead::Kind::mean : Lead::Kind::generalised);
  fit.rabi = ensembles || detuned ? lead(Lead::Kind::bare) : fit.generalised;
  fit.rabi_mean = detuned ? times(fit.rabi, fit.mean_factor) : fit.generalised;
  if (problem.scan.kind == Axis::detuning) {
    fit.line_offset = over_candidates(heard, fit, {}, scale, offset_slot, work);
    fit.generalised = {kUnknown, kUnknown, kUnknown, kUnknown, kNotThisScan};
    return;
  }
  fit.line_offset.why = kNotThisScan;
  if (problem.scan.kind == Axis::amplitude) return fill_amplitudes(heard, objective, scale, fit, work);
  for (const auto& pulse : problem.options.pulses)
    fit.pulse_length_s.push_back(
        over_candidates(heard, fit, {Lead::Kind::pulse_length, pulse.angle_rad, pulse.area_factor}, scale, lead_slot, work));
  fit.quality.cycles = fit.generalised.low * problem.sampling.span / constants::kTwoPi;
}

}  // namespace halfturn::infer
