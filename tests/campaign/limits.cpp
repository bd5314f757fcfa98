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
constexpr double kSigmas95 = 1.959964;
constexpr double kFar = 2;                       // half widths: four sigma

/// What the family's intervals are of: the first pulse's length (s), or the line's offset (rad/s).
double answer_of(const Case& of) {
  return of.truth.line ? of.truth.detuning : best_pulse(of.truth, of.drive.pulses.front().angle_rad);
}

/// Bands of a family that draws scans of the imposter's kind.
Bands bands_of(infer::Dynamics dynamics) { return bands(infer::is_simple(dynamics) ? Kind::single : Kind::competing); }

Intervals intervals_of(infer::Dynamics dynamics, Level level, double stretch) {
  const auto band = bands_of(dynamics);
  if (level == Level::wide) return {reach(band.low_95, band.high_95, stretch), band.low_95};
  return {reach(band.low_68, band.high_68, stretch), band.low_68};
}

bool must_be_used(const Imposter& imposter) {
  const auto& as = imposter.as;
  return is_healthy(as, imposter.bound, as.width) && decidable(as, gaps(as), imposter.bound.offset);
}

/// The length of Halfturn's 95 % interval of the imposter's expected counts over an efficient one's.
double taken_by(const Imposter& imposter) {
  const auto fit = fit_of(imposter.as);
  const auto& e = fit.axis == infer::Axis::detuning ? fit.line_offset : fit.pulse_length_s.front();
  return (e.high - e.low) / (2 * kSigmas95 * imposter.sigma);
}

void enter_contests(const Case& of, const std::vector<Imposter>& imposters, ScanLimit& limit) {
  std::vector<const Imposter*> healthy;
  for (const auto& one : imposters) {
    if (!is_healthy(one.as, one.bound, one.as.width)) continue;
    healthy.push_back(&one);
    limit.contests.push_back({one.dynamics, one.apart, std::abs(answer_of(one.as) - answer_of(of)) / one.sigma});
  }
  const auto covered = most_covered(limit, Level::wide, 1);
  if (covered.by == nullptr || covered.most >= kNominal95) return;
  const auto at = static_cast<std::size_t>(covered.by - limit.contests.data());
  limit.contests[at].taken = taken_by(*healthy[at]);
}

/// Alike in all but a dead time's sign are, on an even grid from nought or one step, all frequencies k f_s +- f (H.
/// Nyquist, Trans. AIEE 47, 617 (1928)). An interval holds one of them, so over m of them the coverages sum to one
/// interval's, and the mean (and the least) is at most an m-th of it. One who knew how often each is drawn could do better
/// on the mean.
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

/// Of scans of two components or lines. Two lines are wrong where one leaves a deviance of 60, which an imposter's own
/// deviance then is at least.
void bound_use(const Case& of, const std::vector<Imposter>& imposters, ScanLimit& limit) {
  const auto worth = [](const Imposter& one) { return power(one.apart, kRefused) < 0.9999; };
  if (std::none_of(imposters.begin(), imposters.end(), worth)) return;
  const auto held = of.truth.line ? std::vector<double>{} : held_by_pulse(at_expectation(of));
  const double left = of.truth.line ? left_by_one_line(of) : 0;
  for (const auto& one : imposters) {
    if (!worth(one) || !must_be_used(one)) continue;
    const double away = std::abs(answer_of(one.as) - answer_of(of)) / one.sigma;
    limit.missed = std::max(limit.missed, least_missed(one.apart, away, intervals_of(one.dynamics, Level::wide, 1), kRefused));
    if (left >= 60) limit.wrong_any = limit.wrong_maximum = std::max(limit.wrong_any, 1 - power(one.apart, kRefused));
    bound_wrong(of, held, one, limit);
  }
}

/// How many half widths the truth lies from the answer, by the half on its side.
double half_widths(const Case& of, const Answered& answered) {
  const auto& fit = answered.fit;
  const auto& e = of.truth.line ? fit.line_offset : fit.pulse_length_s.front();
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

/// The mean over converged scans of the most that is covered, each at most `cap`.
double mean_covered(const std::vector<ScanLimit>& scans, Level level, double stretch, double cap) {
  std::int64_t count = 0;
  double total = 0;
  for (const auto& scan : scans) {
    if (!scan.scored.converged) continue;
    ++count;
    total += std::min(cap, most_covered(scan, level, stretch).most);
  }
  return share(total, count);
}

/// How long intervals must be for `target`.
double stretch_for(const std::vector<ScanLimit>& scans, Level level, double target, double cap) {
  const auto enough = [&](double stretch) { return mean_covered(scans, level, stretch, cap) >= target; };
  double low = 1, high = 100;
  if (enough(low)) return low;
  if (!enough(high)) return std::nan("");
  while (high - low > 0.01) {
    const double middle = (low + high) / 2;
    (enough(middle) ? high : low) = middle;
  }
  return high;
}

void tell_imposters(const std::vector<ScanLimit>& scans, Limit& limit) {
  double squares = 0;
  std::int64_t count = 0;
  for (const auto& scan : scans) {
    if (!scan.scored.converged) continue;
    const auto covered = most_covered(scan, Level::wide, 1);
    if (covered.most >= 1 - kForced && scan.half_widths > kFar) limit.losses.push_back(scan);
    if (covered.most >= kNominal95) continue;
    ++limit.imposters[scan.alike > 1 ? "alias" : std::string(infer::name(covered.by->dynamics))];
    if (covered.by == nullptr || !std::isfinite(covered.by->taken)) continue;
    squares += covered.by->taken * covered.by->taken;
    ++count;
  }
  limit.taken = std::sqrt(share(squares, count));
}

Limit coverage_limit(const std::vector<ScanLimit>& scans, Level level, const Bands& band) {
  const bool wide = level == Level::wide;
  const double highest = wide ? band.high_95 : band.high_68;
  Limit limit;
  limit.figure = wide ? Figure::low_95 : Figure::low_68;
  limit.target = wide ? band.low_95 : band.low_68;
  for (const auto& scan : scans) limit.scans += scan.scored.converged;
  limit.nobody = mean_covered(scans, level, 1, highest);
  limit.reachable = mean_covered(scans, level, 1, wide ? kNominal95 : kNominal68);
  limit.stretch = stretch_for(scans, level, limit.target, highest);
  const auto held = [wide](const ScanLimit& s) { return s.scored.converged && (wide ? s.scored.in_95 : s.scored.in_68); };
  limit.measured = share(sum(scans, held), limit.scans);
  if (wide) tell_imposters(scans, limit);
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
  limit.misstated = of.misstated;
  limit.alike = alike(of);
  if (limit.alike > 1) return limit;
  const auto imposters = imposters_of(of);
  enter_contests(of, imposters, limit);
  if (family.kind == Kind::misfit) bound_use(of, imposters, limit);
  return limit;
}

Covered most_covered(const ScanLimit& scan, Level level, double stretch) {
  Covered covered;
  if (scan.alike > 1) covered.most = (level == Level::wide ? kNominal95 : kNominal68) / static_cast<double>(scan.alike);
  for (const auto& contest : scan.contests) {
    const auto intervals = intervals_of(contest.dynamics, level, stretch);
    // Of a dead time held at a place, the estimate is drawn on towards what is configured, so farther from the truth: where
    // it is beyond reach.
    if (scan.misstated && contest.away <= intervals.reach) continue;
    const double most = most_covered(contest.apart, contest.away, intervals);
    if (most < covered.most) covered = {most, &contest};
  }
  return covered;
}

bool has_limits(const Family& family) {
  return std::any_of(not_yet().begin(), not_yet().end(), [&](const NotYet& entry) {
    const bool bounded = entry.figure == Figure::wrong || entry.figure == Figure::low_68 || entry.figure == Figure::low_95;
    return entry.family == family.name && bounded;
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
      for (const auto level : {Level::narrow, Level::wide}) add(coverage_limit(scans[f], level, bands(wanted[f]->kind)));
    }
  }
  return all;
}

}  // namespace halfturn::campaign
