// SPDX-License-Identifier: Apache-2.0
#include <algorithm>
#include <cmath>

#include <Eigen/LU>

#include "model/infer/amplitude_response.hpp"
#include "model/infer/profile.hpp"
#include "model/infer/solution.hpp"
#include "model/infer/statistics.hpp"
#include "model/quantity/constants.hpp"

namespace halfturn::infer {
namespace {

// A candidate with less Akaike weight than this moves no estimate by more than a fiftieth of what it is off by.
constexpr double kWeightHeard = 0.02;

constexpr std::string_view kNotInDynamics = "the chosen dynamics have no such rate";
constexpr std::string_view kAtBound = "the best value is at its bound";
constexpr std::string_view kNotDetermined = "the scan does not determine it";
constexpr std::string_view kOpenInterval = "the likelihood stays high out to the bound";
constexpr std::string_view kOutOfReach = "the drive saturates below it";
constexpr std::string_view kNotThisScan = "a scan of this kind does not hold it";

struct Scale {
  double scatter = 1.0;
  double level = 0.95;
  double z = 0.0;  // of the level, two-sided; its square is the deviance's quantile
  double quantile() const { return z * z; }

  Scale(double scatter_, double level_) : scatter(scatter_), level(level_), z(normal_quantile(0.5 + 0.5 * level_)) {}
};

/// Inverse of the information over the parameters that are not at a bound; rows and columns of those that are stay 0.
Matrix covariance_of(const Minimum& minimum) {
  const auto k = minimum.x.size();
  Matrix information = minimum.information;
  auto held = [&minimum](Eigen::Index i) { return minimum.at_bound[static_cast<std::size_t>(i)] != 0 || !(minimum.information(i, i) > 0.0); };
  for (Eigen::Index i = 0; i < k; ++i) {
    if (!held(i)) continue;
    information.row(i).setZero();
    information.col(i).setZero();
    information(i, i) = 1.0;
  }
  // Scaled to a unit diagonal first: rates and probabilities differ by ten orders of magnitude.
  Vector scale(k);
  for (Eigen::Index i = 0; i < k; ++i) scale[i] = 1.0 / std::sqrt(std::max(information(i, i), 1e-300));
  const Matrix scaled = scale.asDiagonal() * information * scale.asDiagonal();
  const Eigen::FullPivLU<Matrix> factors(scaled);
  Matrix covariance = Matrix::Constant(k, k, kUnknown);
  if (factors.isInvertible()) covariance = scale.asDiagonal() * factors.inverse() * scale.asDiagonal();
  for (Eigen::Index i = 0; i < k; ++i)
    if (held(i)) {
      covariance.row(i).setZero();
      covariance.col(i).setZero();
    }
  return covariance;
}

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

/// Estimate of one coordinate with its profile interval.
Estimate profiled(const ScanObjective& objective, const Minimum& minimum, int index, const Scale& scale) {
  Estimate e = from_covariance(minimum.x[index], covariance_of(minimum)(index, index), scale);
  const auto interval = profile_interval(objective, minimum, index, scale.quantile() * scale.scatter, objective.bounds());
  auto end = [](const ProfileEnd& at) { return at.kind == ProfileEnd::Kind::reached ? at.at : kUnknown; };
  e.low = end(interval.low);
  e.high = end(interval.high);
  if (interval.lower_found) e.low = e.high = kUnknown;
  if (!std::isfinite(e.low) || !std::isfinite(e.high)) e.why = kOpenInterval;
  return e;
}

/// The same solution in the coordinates of another lead.
Minimum in_coordinates(const ScanObjective& objective, const Solution& solution) {
  Minimum minimum = solution.minimum;
  minimum.x = objective.pack(solution.physical);
  objective.evaluate(minimum.x, minimum.value, &minimum.gradient, &minimum.information);
  return minimum;
}

struct Part {
  double weight;
  Estimate estimate;
};

/// Probability below x under a normal law whose sides are as wide as the interval's.
double below(const Estimate& e, double x, double z) {
  const double side = x < e.value ? (e.value - e.low) / z : (e.high - e.value) / z;
  return normal_cdf((x - e.value) / std::max(side, 1e-300));
}

double mixture_quantile(std::span<const Part> parts, double probability, double z) {
  double low = parts[0].estimate.low, high = parts[0].estimate.high;
  for (const auto& part : parts) {
    low = std::min(low, 2.0 * part.estimate.low - part.estimate.value);
    high = std::max(high, 2.0 * part.estimate.high - part.estimate.value);
  }
  for (int i = 0; i < 30; ++i) {  // to 1e-9 of the width
    const double middle = 0.5 * (low + high);
    double sum = 0.0;
    for (const auto& part : parts) sum += part.weight * below(part.estimate, middle, z);
    (sum < probability ? low : high) = middle;
  }
  return 0.5 * (low + high);
}

/// Value and variance averaged over candidates with their weights (K. P. Burnham, D. R. Anderson, Model Selection and Multimodel
/// Inference, 2nd ed. (2002), section 4.3), the interval from the mixture of their profile intervals.
Estimate averaged(std::span<Part> parts, const Scale& scale) {
  // A candidate whose rate ran where nothing holds it has no error to average: the others speak.
  const auto sure = [](const Part& part) { return std::isfinite(part.estimate.sigma); };
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

void weigh(const ModeSolutions& mode, double scatter, Fit& fit) {
  double total = 0.0;
  fit.candidate_count = 0;
  for (const auto& solution : mode.solutions) {
    // QAICc: the likelihood part is divided by the scatter (Burnham & Anderson 2002, section 2.5).
    const double difference = (solution.aicc - mode.best().aicc) / scatter;
    auto& score = fit.candidates[static_cast<std::size_t>(fit.candidate_count++)];
    score = {solution.dynamics, solution.aicc, std::exp(-0.5 * difference)};
    total += score.weight;
  }
  for (int i = 0; i < fit.candidate_count; ++i) fit.candidates[static_cast<std::size_t>(i)].weight /= total;
}

/// Estimate of one coordinate with the interval of its standard error.
Estimate normal(const Minimum& minimum, int index, const Scale& scale) {
  return from_covariance(minimum.x[index], covariance_of(minimum)(index, index), scale);
}

/// The average over candidates of a lead coordinate (or of the coordinate that `slot` picks). The best has its profile interval; the
/// others, which fit worse and weigh less, that of their standard error.
template <class Slot>
Estimate over_candidates(const Problem& problem, const ModeSolutions& mode, const Fit& fit, Lead lead, const Scale& scale, Slot slot,
                         FitWorkspace& work) {
  std::array<Part, 4> parts;
  std::size_t count = 0;
  for (std::size_t i = 0; i < mode.solutions.size(); ++i) {
    const auto& solution = mode.solutions[i];
    if (i > 0 && fit.candidates[i].weight < kWeightHeard) continue;
    const ScanObjective objective(problem.scan, problem.readout, problem.prior, solution.dynamics, lead, solution.negative_contrast,
                                  work.objective);
    const Minimum minimum = in_coordinates(objective, solution);
    const int index = slot(objective.layout());
    // A drive that saturates below what the pulse needs.
    if (!std::isfinite(minimum.x[index])) return {kUnknown, kUnknown, kUnknown, kUnknown, kOutOfReach};
    parts[count++] = {fit.candidates[i].weight, i == 0 ? profiled(objective, minimum, index, scale) : normal(minimum, index, scale)};
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

void fill_damping(const Problem& problem, const ScanObjective& objective, const Scale& scale, Fit& fit) {
  for (auto* e : {&fit.decay_s, &fit.dephasing_s, &fit.loss_s, &fit.envelope_s}) e->why = kNotInDynamics;
  const int slot = objective.layout().damping;
  if (slot >= 0) {
    const double known = fit.chosen == Dynamics::decay ? problem.prior.decay : fit.chosen == Dynamics::leak ? problem.prior.loss : 0.0;
    const Estimate time = inverse_rate(fit.physical.damping + known, fit.covariance(slot, slot) / scale.scatter, scale);
    if (fit.chosen == Dynamics::dephasing) fit.dephasing_s = time;
    if (fit.chosen == Dynamics::decay) fit.decay_s = time;
    if (fit.chosen == Dynamics::leak) fit.loss_s = time;
  }
  const double envelope = envelope_rate(fit.rates);
  if (!(envelope > 0.0)) return;
  double slope = 0.0;
  if (fit.chosen == Dynamics::dephasing || fit.chosen == Dynamics::leak) slope = 0.5;
  if (fit.chosen == Dynamics::decay) slope = 0.75;
  const double variance = slot >= 0 ? slope * slope * fit.covariance(slot, slot) / scale.scatter : 0.0;
  fit.envelope_s = inverse_rate(envelope, variance, scale);
  if (slot < 0) {
    fit.envelope_s.low = fit.envelope_s.high = fit.envelope_s.sigma = kUnknown;
    fit.envelope_s.why = "from the known lifetime alone, which is not fitted";
  }
}

void fill_readout(const ScanObjective& objective, const Scale& scale, Fit& fit) {
  const auto& layout = objective.layout();
  const auto variance = [&fit, &scale](int a, int b) { return fit.covariance(a, b) / scale.scatter; };
  fit.floor = from_covariance(fit.physical.signal_ground, variance(layout.ground, layout.ground), scale);
  fit.contrast = from_covariance(fit.physical.contrast(),
                                 variance(layout.ground, layout.ground) + variance(layout.excited, layout.excited) -
                                     2.0 * variance(layout.ground, layout.excited),
                                 scale);
  if (layout.dead_time >= 0)
    fit.dead_time_s = from_covariance(fit.physical.dead_time, variance(layout.dead_time, layout.dead_time), scale);
  else
    fit.dead_time_s = {fit.physical.dead_time, kUnknown, kUnknown, kUnknown, "held at its configured value"};
}

/// The part of the coupling lost at the largest amplitude; below 0 where the gain rises.
Estimate lost(const ScanObjective& objective, const Minimum& minimum, double largest, const Scale& scale) {
  const Estimate q = profiled(objective, minimum, objective.layout().compression, scale);
  const auto part = [largest](double compression) { return 1.0 - compressed(largest, compression) / largest; };
  return {part(q.value), q.sigma * std::abs(compressed_by_compression(largest, q.value)) / largest, part(q.low), part(q.high), q.why};
}

void fill_amplitudes(const Problem& problem, const ModeSolutions& mode, const ScanObjective& objective, const Scale& scale, Fit& fit,
                     FitWorkspace& work) {
  const auto lead_slot = [](const Layout& layout) { return layout.lead; };
  const double q = fit.physical.compression;
  const double seen = compressed(fit.longest, q) - compressed(fit.lowest, q);
  fit.rabi = {kUnknown, kUnknown, kUnknown, kUnknown, kNotThisScan};
  fit.dead_time_s = fit.rabi;  // its prior at best
  fit.quality.cycles = fit.physical.generalised * fit.generalised.low / fit.generalised.value * seen / constants::kTwoPi;
  fit.compression = lost(objective, mode.best().minimum, fit.longest, scale);
  fit.rabi_per_amplitude = over_candidates(problem, mode, fit, {Lead::Kind::per_amplitude}, scale, lead_slot, work);
  for (const auto& pulse : problem.options.pulses) {
    const Lead lead{Lead::Kind::pulse_amplitude, pulse.angle_rad, pulse.area_factor, pulse.length_s};
    const bool asked = pulse.length_s > fit.physical.dead_time;
    fit.pulse_amplitude.push_back(asked ? over_candidates(problem, mode, fit, lead, scale, lead_slot, work) : Estimate{});
  }
}

}  // namespace

void estimate(const Problem& problem, const ModeSolutions& mode, Fit& fit, FitWorkspace& work) {
  const Scale scale(fit.quality.scatter, problem.options.level);
  weigh(mode, scale.scatter, fit);
  const auto& best = mode.best();
  const ScanObjective objective(problem.scan, problem.readout, problem.prior, best.dynamics, {}, best.negative_contrast, work.objective);
  fit.chosen = best.dynamics;
  fit.physical = best.physical;
  fit.rates = objective.rates(best.physical);
  fit.negative_contrast = best.negative_contrast;
  fit.x = best.minimum.x;
  fit.covariance = covariance_of(best.minimum) * scale.scatter;
  fill_damping(problem, objective, scale, fit);
  fill_readout(objective, scale, fit);

  auto lead_slot = [](const Layout& layout) { return layout.lead; };
  auto offset_slot = [](const Layout& layout) { return layout.line_offset; };
  fit.generalised = over_candidates(problem, mode, fit, {}, scale, lead_slot, work);
  fit.rabi = fit.generalised;
  if (problem.scan.kind == Axis::detuning) {
    fit.line_offset = over_candidates(problem, mode, fit, {}, scale, offset_slot, work);
    fit.generalised = {kUnknown, kUnknown, kUnknown, kUnknown, kNotThisScan};
    return;
  }
  fit.line_offset.why = kNotThisScan;
  if (problem.scan.kind == Axis::amplitude) return fill_amplitudes(problem, mode, objective, scale, fit, work);
  if (objective.layout().detuning_square >= 0)
    fit.rabi = over_candidates(problem, mode, fit, {Lead::Kind::bare}, scale, lead_slot, work);
  for (const auto& pulse : problem.options.pulses)
    fit.pulse_length_s.push_back(
        over_candidates(problem, mode, fit, {Lead::Kind::pulse_length, pulse.angle_rad, pulse.area_factor}, scale, lead_slot, work));
  fit.quality.cycles = fit.generalised.low * problem.sampling.span / constants::kTwoPi;
}

}  // namespace halfturn::infer
