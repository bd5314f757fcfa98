// SPDX-License-Identifier: Apache-2.0
#include <algorithm>
#include <cmath>

#include "model/infer/amplitude_response.hpp"
#include "model/infer/scan_objective.hpp"

/// Between the solver's vector and what a scan depends on.
namespace halfturn::infer {
namespace {

using Kind = dynamics::Ensemble::Kind;

// A signal at exactly 0 or 1 makes the information of a binomial point infinite. 1e-7 costs at most 2e-7 of deviance a shot.
constexpr double kSignalMargin = 1e-7;
// A flop that turns by less than this in all, rad, is a parabola whatever its frequency, to a part in a thousand of its rise.
constexpr double kLeastPhase = 0.1;
// |Delta| is taken as at least this part of the generalised frequency while Delta^2 is fitted, so that dP/d(Delta^2) =
// P_Delta / (2 Delta) + ... stays a number; the population changes by less than 1e-8.
constexpr double kLeastDetuning = 1e-4;
// An ensemble's parameter is taken as at least this, so that dP/d(parameter^2) = P_parameter / (2 parameter) stays a number: relative
// spread of Omega, Doppler spread over Omega, sigma of the cloud over the waist. At 60 cycles populations change by less than 1e-4.
constexpr double kLeastSpread = 5e-5, kLeastDoppler = 5e-5, kLeastCloud = 2e-3;
// Ensembles wider than this are no oscillation: relative spread of Omega, sigma of the cloud over the waist, phonons.
constexpr double kMostSpread = 0.5, kMostCloud = 1.0, kMostPhonons = 500.0;
// A drift beyond this is no slow change.
constexpr double kMostDrift = 0.5;
// Of two components the second is the smaller one, but for what noise makes of equal ones; couplings further apart than this are two
// transitions.
constexpr double kMostShare = 0.6, kMostRatio = 4.0;
// Priors are normal; beyond this many sigmas a parameter is held back.
constexpr double kPriorReach = 8.0;
// A dead time uncertain by less than this part of the pulse does not change a line by more than 1e-5 of the population.
constexpr double kLineDeadTime = 1e-3;

// Of an amplitude scan's pulse, whose length is fixed, at least a tenth must act.
constexpr double kMostDead = 0.9;
// At this the gain is doubled at the largest amplitude.
constexpr double kMostExpanded = 0.75;

double square(double x) { return x * x; }

}  // namespace

double longest_of(std::span<const double> axis) { return axis.empty() ? 0.0 : *std::max_element(axis.begin(), axis.end()); }

double doppler_shift(double rabi, double variance, double longest_s) {
  if (!(longest_s > 0.0)) return 0.5 * variance / rabi;
  return 0.5 * std::atan(variance * longest_s / rabi) / longest_s;
}

double Physical::rabi() const { return std::sqrt(std::max(0.0, generalised * generalised - detuning_square)); }

ScanObjective::ScanObjective(const ScanBatch& scan, const Readout& readout, const Prior& prior, Dynamics candidate, Lead lead,
                             bool negative_contrast, ObjectiveWorkspace& workspace)
    : scan_(scan), readout_(readout), prior_(prior), candidate_(candidate), lead_(lead),
      negative_contrast_(negative_contrast), work_(workspace) {
  const bool line = scan.kind == Axis::detuning;
  auto take = [this](int& slot) { slot = layout_.count++; };
  take(layout_.lead);
  if (line) take(layout_.line_offset);
  if (!line && prior.detuning && prior.detuning->sigma > 0.0) take(layout_.detuning_square);
  if (prior.dead_time.sigma > (line ? kLineDeadTime * scan.pulse_length_s : 0.0)) take(layout_.dead_time);
  take(layout_.ground);
  take(layout_.excited);
  if (candidate != Dynamics::undamped && !is_ensemble(candidate)) take(layout_.damping);
  if (has_two_rates(candidate)) take(layout_.dephasing);
  if (is_ensemble(candidate)) take(layout_.breadth);
  if (scan.kind == Axis::amplitude) take(layout_.compression);
  if (scan.kind == Axis::duration && prior.drift && prior.drift->sigma > 0.0) take(layout_.drift);
  if (prior.second && scan.kind != Axis::amplitude) take(layout_.second_share);
  if (prior.second && scan.kind != Axis::amplitude) take(layout_.second_place);
}

Bounds ScanObjective::bounds() const {
  Bounds bounds = Bounds::none(layout_.count);
  auto limit = [&bounds](int slot, double low, double high) {
    if (slot < 0) return;
    bounds.lower[slot] = low;
    bounds.upper[slot] = high;
  };
  const double infinite = std::numeric_limits<double>::infinity();
  const auto& dead = prior_.dead_time;
  // A pulse cannot be shorter than the dead time: its length as the lead coordinate is kept away by `evaluate`.
  const double slowest = scan_.kind == Axis::duration && !scan_.axis.empty() ? kLeastPhase / longest_of(scan_.axis) : 0.0;
  if (lead_.kind != Lead::Kind::pulse_length) limit(layout_.lead, slowest, infinite);
  if (prior_.detuning)
    limit(layout_.detuning_square, 0.0, square(std::abs(prior_.detuning->mean) + kPriorReach * prior_.detuning->sigma));
  limit(layout_.dead_time, dead.mean - kPriorReach * dead.sigma, dead.mean + kPriorReach * dead.sigma);
  if (scan_.kind == Axis::amplitude && layout_.dead_time >= 0)
    bounds.upper[layout_.dead_time] = std::min(bounds.upper[layout_.dead_time], kMostDead * scan_.pulse_length_s);
  if (scan_.kind == Axis::amplitude) limit(layout_.compression, -kMostExpanded / square(longest_of(scan_.axis)), infinite);
  limit(layout_.damping, 0.0, infinite);
  limit(layout_.dephasing, 0.0, infinite);
  double broadest = infinite;
  if (candidate_ == Dynamics::spread) broadest = square(kMostSpread);
  if (candidate_ == Dynamics::cloud) broadest = square(kMostCloud);
  if (candidate_ == Dynamics::thermal) broadest = kMostPhonons;
  limit(layout_.breadth, 0.0, broadest);
  limit(layout_.drift, -kMostDrift, kMostDrift);
  limit(layout_.second_share, 0.0, scan_.kind == Axis::detuning ? 1.0 : kMostShare);
  if (scan_.kind == Axis::duration) limit(layout_.second_place, 1.0 / kMostRatio, kMostRatio);
  for (const int slot : {layout_.ground, layout_.excited}) {
    if (readout_.kind == Readout::Kind::binomial) limit(slot, kSignalMargin, 1.0 - kSignalMargin);
    if (readout_.kind == Readout::Kind::poisson) limit(slot, 1e-12, infinite);
  }
  return bounds;
}

dynamics::Ensemble ScanObjective::ensemble(const Physical& p) const {
  const auto wide = [&p](double least) { return std::sqrt(std::max(p.breadth, square(least))); };
  dynamics::Ensemble ensemble;
  ensemble.follows_intensity = prior_.follows_intensity;
  ensemble.modes = prior_.motion;
  if (candidate_ == Dynamics::spread) {
    ensemble.kind = Kind::spread;
    ensemble.parameter = wide(kLeastSpread);
  } else if (candidate_ == Dynamics::doppler) {
    ensemble.kind = Kind::doppler;
    ensemble.parameter = wide(kLeastDoppler * p.generalised);
  } else if (candidate_ == Dynamics::cloud) {
    ensemble.kind = Kind::cloud;
    ensemble.parameter = wide(kLeastCloud);
  } else if (candidate_ == Dynamics::thermal) {
    ensemble.kind = Kind::thermal;
    ensemble.parameter = std::max(0.0, p.breadth);
  }
  return ensemble;
}

ScanObjective::Factor ScanObjective::lead_factor(const Physical& p) const {
  const bool pulse = lead_.kind == Lead::Kind::pulse_length;
  if (!is_ensemble(candidate_) || candidate_ == Dynamics::doppler) return {pulse ? lead_.angle_rad : 1.0, 0.0};
  if (p.breadth == factor_at_) return factor_;
  const auto of = ensemble(p);
  const auto found = pulse ? dynamics::best_pulse_phase(of, lead_.angle_rad, work_.ensemble) : dynamics::mean_coupling(of, work_.ensemble);
  const double by_breadth = candidate_ == Dynamics::thermal ? 1.0 : 0.5 / of.parameter;
  factor_at_ = p.breadth;
  return factor_ = {found.value, found.by_parameter * by_breadth};
}

double ScanObjective::mean_factor(const Physical& p) const {
  return is_ensemble(candidate_) ? dynamics::mean_coupling(ensemble(p), work_.ensemble).value : 1.0;
}

double ScanObjective::apparent_frequency(const Physical& p) const {
  if (scan_.kind == Axis::amplitude) return p.generalised * compressed(longest_of(scan_.axis), p.compression) / longest_of(scan_.axis);
  if (scan_.kind == Axis::detuning || !is_ensemble(candidate_)) return p.generalised;
  const double longest = longest_of(scan_.axis);
  if (candidate_ == Dynamics::doppler) return p.generalised + doppler_shift(p.generalised, p.breadth, longest);
  const double mean = mean_factor(p);
  if (candidate_ == Dynamics::spread || !(longest > 0.0)) return p.generalised * mean;
  const double unspread = mean_factor(Physical{}), phase = p.generalised * longest;
  return p.generalised * unspread - std::atan(phase * (unspread - mean)) / longest;
}

Vector ScanObjective::pack(const Physical& physical) const {
  Vector x(layout_.count);
  auto put = [&x](int slot, double value) {
    if (slot >= 0) x[slot] = value;
  };
  double lead = physical.generalised;
  if (lead_.kind == Lead::Kind::bare) lead = physical.rabi();
  if (lead_.kind == Lead::Kind::mean) lead = physical.generalised * lead_factor(physical).value;
  if (lead_.kind == Lead::Kind::pulse_length)
    lead = physical.dead_time + lead_factor(physical).value / (lead_.area_factor * physical.generalised);
  if (scan_.kind == Axis::amplitude) lead = amplitude_lead(physical);
  put(layout_.lead, lead);
  put(layout_.line_offset, physical.line_offset);
  put(layout_.detuning_square, physical.detuning_square);
  put(layout_.dead_time, physical.dead_time);
  put(layout_.ground, physical.signal_ground);
  put(layout_.excited, physical.signal_excited);
  put(layout_.damping, physical.damping);
  put(layout_.dephasing, physical.dephasing);
  put(layout_.breadth, physical.breadth);
  put(layout_.drift, physical.drift);
  put(layout_.compression, physical.compression);
  put(layout_.second_share, physical.second_share);
  put(layout_.second_place, physical.second_place);
  return x;
}

Physical ScanObjective::unpack(const Vector& x) const {
  auto get = [&x](int slot, double held) { return slot >= 0 ? x[slot] : held; };
  Physical p;
  p.line_offset = get(layout_.line_offset, 0.0);
  const bool line = scan_.kind == Axis::detuning;
  p.detuning_square = get(layout_.detuning_square, !line && prior_.detuning ? square(prior_.detuning->mean) : 0.0);
  p.dead_time = get(layout_.dead_time, prior_.dead_time.mean);
  p.signal_ground = x[layout_.ground];
  p.signal_excited = x[layout_.excited];
  p.damping = get(layout_.damping, 0.0);
  p.dephasing = get(layout_.dephasing, 0.0);
  p.breadth = get(layout_.breadth, 0.0);
  p.drift = get(layout_.drift, 0.0);
  p.second_share = get(layout_.second_share, 0.0);
  p.second_place = get(layout_.second_place, 0.0);
  const double lead = x[layout_.lead];
  p.generalised = lead;
  if (lead_.kind == Lead::Kind::bare) p.generalised = std::sqrt(square(lead) + p.detuning_square);
  if (lead_.kind == Lead::Kind::mean) p.generalised = lead / lead_factor(p).value;
  if (lead_.kind == Lead::Kind::pulse_length) p.generalised = lead_factor(p).value / (lead_.area_factor * (lead - p.dead_time));
  p.compression = get(layout_.compression, 0.0);
  if (scan_.kind == Axis::amplitude) p.generalised = from_amplitude_lead(lead, p);
  return p;
}

dynamics::Rates ScanObjective::rates(const Physical& p) const {
  dynamics::Rates rates;
  rates.decay = prior_.decay;
  rates.loss = prior_.loss;
  if (candidate_ == Dynamics::dephasing) rates.dephasing = p.damping;
  if (candidate_ == Dynamics::decay || candidate_ == Dynamics::decay_dephasing) rates.decay += p.damping;
  if (has_two_rates(candidate_)) rates.dephasing = p.dephasing;
  if (candidate_ == Dynamics::leak || candidate_ == Dynamics::leak_dephasing) rates.loss += p.damping;
  if (scan_.kind == Axis::detuning) {
    rates.rabi = p.generalised;
    rates.detuning = p.line_offset;
    return rates;
  }
  if (scan_.kind == Axis::amplitude) return rates_at(p, longest_of(scan_.axis));
  double square_of_detuning = p.detuning_square;
  if (layout_.detuning_square >= 0) square_of_detuning = std::max(square_of_detuning, square(kLeastDetuning * p.generalised));
  rates.detuning = std::sqrt(square_of_detuning);
  rates.rabi = std::sqrt(square(p.generalised) - square_of_detuning);
  return rates;
}

/// How the generalised frequency follows from the lead coordinate and the others.
ScanObjective::LeadSlopes ScanObjective::lead_slopes(const Physical& p) const {
  LeadSlopes slopes;
  if (lead_.kind == Lead::Kind::generalised) return slopes;
  const Factor factor = lead_.kind == Lead::Kind::bare ? Factor{1.0, 0.0} : lead_factor(p);
  if (lead_.kind == Lead::Kind::pulse_length) {
    slopes.by_dead_time = square(p.generalised) * lead_.area_factor / factor.value;  // generalised / (length - dead time)
    slopes.by_lead = -slopes.by_dead_time;
    slopes.by_breadth = p.generalised * factor.by_breadth / factor.value;
    return slopes;
  }
  if (lead_.kind == Lead::Kind::mean) {
    slopes.by_lead = 1.0 / factor.value;
    slopes.by_breadth = -p.generalised * factor.by_breadth / factor.value;
    return slopes;
  }
  slopes.by_lead = p.rabi() / p.generalised;
  slopes.by_square = 0.5 / p.generalised;
  return slopes;
}

Vector ScanObjective::lead_by_generalised(const Physical& p) const {
  const auto slopes = lead_slopes(p);
  Vector by = Vector::Zero(layout_.count);
  const auto set = [&by, &slopes](int slot, double slope) {
    if (slot >= 0) by[slot] = -slope / slopes.by_lead;
  };
  set(layout_.dead_time, slopes.by_dead_time);
  set(layout_.detuning_square, slopes.by_square);
  set(layout_.breadth, slopes.by_breadth);
  set(layout_.lead, -1.0);
  return by;
}

Minimum ScanObjective::in_coordinates(const Minimum& minimum, const Physical& p) const {
  Minimum out = minimum;
  out.x = pack(p);
  if (lead_.kind == Lead::Kind::generalised) return out;
  const auto slopes = lead_slopes(p);
  Vector by = Vector::Zero(layout_.count);  // of the generalised frequency by the coordinates
  const auto set = [&by](int slot, double slope) {
    if (slot >= 0) by[slot] = slope;
  };
  set(layout_.dead_time, slopes.by_dead_time);
  set(layout_.detuning_square, slopes.by_square);
  set(layout_.breadth, slopes.by_breadth);
  set(layout_.lead, slopes.by_lead - 1.0);  // the identity is what the rest of the transformation is
  const Vector across = minimum.information.col(layout_.lead);
  const double own = across[layout_.lead], slope = minimum.gradient[layout_.lead];
  for (Eigen::Index a = 0; a < layout_.count; ++a) {
    out.gradient[a] += by[a] * slope;
    for (Eigen::Index b = 0; b < layout_.count; ++b) out.information(a, b) += by[a] * across[b] + across[a] * by[b] + by[a] * own * by[b];
  }
  return out;
}

}  // namespace halfturn::infer
