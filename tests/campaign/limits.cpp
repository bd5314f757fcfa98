// SPDX-License-Identifier: Apache-2.0
#include "tests/campaign/limits.hpp"

#include <algorithm>
#include <cmath>

#include "model/quantity/constants.hpp"
#include "tests/campaign/held.hpp"
#include "tests/campaign/imposter.hpp"
#include "tests/campaign/targets.hpp"
#include "tests/campaign/undecidable.hpp"

namespace halfturn::campaign {
namespace {

constexpr double kNominal68 = 0.6826894921370859, kNominal95 = 0.95;
constexpr double kRefused = 1 - kUsed + kWrong;  // of scans that must be used and right
constexpr double kForced = 0.1;                  // below this probability nothing forces a wrong scan or a miss
constexpr double kFar = 2;                       // half widths: four sigma

/// What the family's intervals are of: the first pulse's length (s), or the line's offset (rad/s).
double answer_of(const Case& of) { return of.truth.line ? of.truth.detuning : best_pulse(of.truth, of.drive.pulses.front().angle_rad); }

/// Bands of a family that draws scans of the imposter's kind.
Bands bands_of(infer::Dynamics dynamics) { return bands(infer::is_simple(dynamics) ? Kind::single : Kind::competing); }

bool must_be_used(const Imposter& imposter) {
  const auto& as = imposter.as;
  return is_healthy(as, imposter.bound, as.width) && decidable(as, gaps(as), imposter.bound.offset);
}

void bound_coverage(const Case& of, const Imposter& imposter, ScanLimit& limit) {
  const double away = std::abs(answer_of(imposter.as) - answer_of(of)) / imposter.sigma;
  const auto band = bands_of(imposter.dynamics);
  const double reach_68 = reach(band.low_68, band.high_68), reach_95 = reach(band.low_95, band.high_95);
  // Of a dead time held at a place, the estimate is drawn on towards what is configured, so farther from the truth: where it is beyond reach.
  if (!of.misstated || away > reach_68) limit.covered_68 = std::min(limit.covered_68, most_covered(imposter.apart, away, reach_68));
  if (of.misstated && away <= reach_95) return;
  const double covered = most_covered(imposter.apart, away, reach_95);
  if (covered < limit.covered_95) limit.by = infer::name(imposter.dynamics);
  limit.covered_95 = std::min(limit.covered_95, covered);
}

/// Alike in all but a dead time's sign are, on an even grid from nought or one step, all frequencies k f_s +- f (H. Nyquist, Trans. AIEE 47,
/// 617 (1928)). An interval holds one of them, so over m of them the coverages sum to one interval's, and the mean (and the least) is at most
/// an m-th of it. One who knew how often each is drawn could do better on the mean.
std::int64_t alike(const Case& of) {
  if (!of.aliased || !of.before.empty() || !of.drive.expect) return 1;
  const double rate = constants::kTwoPi / (of.scan.axis[1] - of.scan.axis[0]), f = of.truth.rabi;
  const auto inside = [&](double at) { return of.drive.expect->low <= at && at <= of.drive.expect->high; };
  std::int64_t count = 0;
  for (int k = 0; k * rate - f <= of.drive.expect->high; ++k) count += (k > 0 && inside(k * rate - f)) + inside(k * rate + f);
  return std::max<std::int64_t>(1, count);
}


/// What expected counts hold against the truth's own lengths, by pulse: the data's part of what makes an answer wrong.
std::vector<double> held_by_pulse(const Case& quiet) {
  const auto fit = fit_of(quiet);
  std::vector<double> held;
  for (std::size_t i = 0; i < quiet.drive.pulses.size(); ++i)
    held.push_back(held_against(quiet, fit, i, best_pulse(quiet.truth, quiet.drive.pulses[i].angle_rad)));
  return held;
}

double off_by(const Case& of, const Imposter& imposter, std::size_t pulse) {
  const double angle = of.drive.pulses[pulse].angle_rad;
  return std::abs(best_pulse(imposter.as.truth, angle) - best_pulse(of.truth, angle)) * of.truth.generalised();
}

void bound_wrong(const Case& of, const std::vector<double>& held, const Imposter& imposter, ScanLimit& limit) {
  for (std::size_t i = 0; i < held.size(); ++i) {
    const double off = off_by(of, imposter, i);
    limit.wrong_any = std::max(limit.wrong_any, least_wrong(imposter.apart, off, held[i], kRefused, Answers::any));
    limit.wrong_maximum = std::max(limit.wrong_maximum, least_wrong(imposter.apart, off, held[i], kRefused, Answers::maximum));
  }
}

/// Of scans of two components or lines. Two lines are wrong where one leaves a deviance of 60, which an imposter's own deviance then is at least.
void bound_use(const Case& of, const std::vector<Imposter>& imposters, ScanLimit& limit) {
  const auto worth = [](const Imposter& one) { return power(one.apart, kRefused) < 0.9999; };
  if (std::none_of(imposters.begin(), imposters.end(), worth)) return;
  const auto held = of.truth.line ? std::vector<double>{} : held_by_pulse(at_expectation(of));
  const double left = of.truth.line ? left_by_one_line(of) : 0;
  for (const auto& one : imposters) {
    if (!worth(one) || !must_be_used(one)) continue;
    const auto band = bands_of(one.dynamics);
    const double away = std::abs(answer_of(one.as) - answer_of(of)) / one.sigma;
    limit.missed = std::max(limit.missed, least_missed(one.apart, away, reach(band.low_95, band.high_95), kRefused));
    if (left >= 60) limit.wrong_any = limit.wrong_maximum = std::max(limit.wrong_any, 1 - power(one.apart, kRefused));
    bound_wrong(of, held, one, limit);
  }
}

/// How many half widths the truth lies from the answer, by the half on its side.
double half_widths(const Case& of, const Answered& answered) {
  const auto& fit = answered.fit;
  const auto& e = of.truth.line || fit.pulse_length_s.empty() ? fit.line_offset : fit.pulse_length_s.front();
  const double truth = answer_of(of);
  return std::abs(truth - e.value) / (truth > e.value ? e.high - e.value : e.value - e.low);
}

double share(double part, std::int64_t whole) { return whole > 0 ? part / static_cast<double>(whole) : std::nan(""); }

template <class F>
double sum(const std::vector<ScanLimit>& scans, const F& of) {
  double total = 0;
  for (const auto& scan : scans) total += of(scan);
  return total;
}

Limit wrong_limit(const std::vector<ScanLimit>& scans) {
  Limit limit;
  limit.figure = Figure::wrong;
  limit.scans = static_cast<std::int64_t>(scans.size());
  limit.target = kWrong;
  limit.nobody = share(sum(scans, [](const auto& s) { return s.wrong_any; }), limit.scans);
  limit.reachable = share(sum(scans, [](const auto& s) { return s.wrong_maximum; }), limit.scans);
  limit.measured = share(sum(scans, [](const auto& s) { return s.scored.wrong; }), limit.scans);
  for (const auto& scan : scans)
    if (scan.scored.wrong && scan.wrong_maximum < kForced) limit.losses.push_back(scan);
  return limit;
}

Limit coverage_limit(const std::vector<ScanLimit>& scans, Figure figure, const Bands& band) {
  const bool wide = figure == Figure::low_95;
  const double nominal = wide ? kNominal95 : kNominal68, highest = wide ? band.high_95 : band.high_68;
  Limit limit;
  limit.figure = figure;
  limit.target = wide ? band.low_95 : band.low_68;
  for (const auto& scan : scans) {
    if (!scan.scored.converged) continue;
    const double most = wide ? scan.covered_95 : scan.covered_68;
    ++limit.scans;
    limit.nobody += std::min(most, highest);
    limit.reachable += std::min(most, nominal);
    limit.measured += wide ? scan.scored.in_95 : scan.scored.in_68;
    if (wide && most < nominal) ++limit.imposters[scan.by];
    if (wide && most >= 1 - kForced && scan.half_widths > kFar) limit.losses.push_back(scan);
  }
  for (double* figure_of : {&limit.nobody, &limit.reachable, &limit.measured}) *figure_of = share(*figure_of, limit.scans);
  return limit;
}

/// Of used scans that no candidate describes. Whoever uses all that converged and misses only what is forced covers most.
Limit used_limit(const std::vector<ScanLimit>& scans) {
  Limit limit;
  limit.figure = Figure::low_95;
  limit.target = kMisfitCoverage;
  double held = 0, forced = 0, all = 0;
  for (const auto& scan : scans) {
    all += scan.scored.converged;
    forced += scan.missed;
    if (!scan.scored.used || !scan.scored.converged) continue;
    ++limit.scans;
    held += scan.scored.in_95;
    if (!scan.scored.in_95 && scan.missed < kForced) limit.losses.push_back(scan);
  }
  limit.nobody = 1 - forced / all;
  limit.reachable = held / (held + forced);
  limit.measured = share(held, limit.scans);
  return limit;
}

}  // namespace

ScanLimit limit_of(const Case& of, const Family& family) {
  ScanLimit limit;
  limit.seed = of.seed;
  limit.index = of.index;
  const auto answered = answer(of);
  limit.scored = score(of, family, answered);
  if (limit.scored.converged) limit.half_widths = half_widths(of, answered);
  const auto count = alike(of);
  if (count > 1) {
    limit.covered_68 = kNominal68 / static_cast<double>(count);
    limit.covered_95 = kNominal95 / static_cast<double>(count);
    limit.by = "alias";
    return limit;
  }
  const auto imposters = imposters_of(of);
  for (const auto& one : imposters) bound_coverage(of, one, limit);
  if (family.kind == Kind::misfit) bound_use(of, imposters, limit);
  return limit;
}

bool has_limits(const Family& family) {
  return std::any_of(not_yet().begin(), not_yet().end(), [&](const NotYet& entry) {
    return entry.family == family.name && (entry.figure == Figure::wrong || entry.figure == Figure::low_68 || entry.figure == Figure::low_95);
  });
}

std::vector<Limit> limits(const Order& order, const std::vector<const Family*>& wanted) {
  std::vector<std::vector<ScanLimit>> scans(wanted.size());
  for (std::size_t f = 0; f < wanted.size(); ++f) scans[f].resize(scans_of(f, wanted.size(), order.scans));
  for_all(order.scans, order.threads, "bounded", [&](std::int64_t i) {
    const auto at = place_of(i, wanted.size(), order.seeds);
    scans[at.family][at.number] = limit_of(draw(*wanted[at.family], at.seed, at.index), *wanted[at.family]);
  });
  std::vector<Limit> all;
  for (std::size_t f = 0; f < wanted.size(); ++f) {
    const auto add = [&](Limit limit) {
      limit.family = std::string(wanted[f]->name);
      all.push_back(std::move(limit));
    };
    if (wanted[f]->kind == Kind::misfit) {
      add(wrong_limit(scans[f]));
      add(used_limit(scans[f]));
    } else if (wanted[f]->kind != Kind::barren) {
      for (const auto figure : {Figure::low_68, Figure::low_95}) add(coverage_limit(scans[f], figure, bands(wanted[f]->kind)));
    }
  }
  return all;
}

}  // namespace halfturn::campaign
