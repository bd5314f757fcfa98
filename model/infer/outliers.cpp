// SPDX-License-Identifier: Apache-2.0
#include "model/infer/outliers.hpp"

#include <algorithm>
#include <cmath>
#include <numeric>

#include "model/infer/scatter.hpp"
#include "model/infer/statistics.hpp"

namespace halfturn::infer {
namespace {

using Kind = Readout::Kind;
// Rounds of expectation and maximisation; the share then changes by less than a hundredth of itself.
constexpr int kRounds = 30;
// A linear solve leaves points out that lie so many standard deviations (1.4826 medians of the distance) from the median. The extremes
// of a sine lie 1.0 of its own such from it, those of a flop that is mostly at rest further: 4 leaves both in.
constexpr double kFarFromMost = 4.0, kMedianToSigma = 1.4826;

struct Range {
  double low = 0.0, high = 0.0;
};

Range range_of(const Readout& readout) {
  Range range{std::numeric_limits<double>::infinity(), -std::numeric_limits<double>::infinity()};
  for (std::size_t i = 0; i < readout.observed.size(); ++i) {
    if (!measured(readout, i)) continue;
    range.low = std::min(range.low, reading(readout, i));
    range.high = std::max(range.high, reading(readout, i));
  }
  return range;
}

/// Log of the uniform law of an outlier's reading.
double log_uniform(const Readout& readout, std::size_t i, const Range& range) {
  if (readout.kind == Kind::binomial) return -std::log(readout.weight[i] + 1.0);
  if (readout.kind == Kind::poisson) return -std::log(readout.weight[i] * std::max(range.high, 0.0) + 1.0);
  return -std::log(std::max(range.high - range.low, readout.weight[i]));
}

/// g / f of every point (likelihood.hpp).
std::vector<double> ratios(const Readout& readout) {
  const Range range = range_of(readout);
  std::vector<double> out(readout.observed.size(), 1.0);
  for (std::size_t i = 0; i < out.size(); ++i)
    if (measured(readout, i)) out[i] = std::exp(log_uniform(readout, i, range) - log_own(readout.kind, readout.observed[i], readout.weight[i]));
  return out;
}

/// With scatter counted, without outliers.
std::vector<double> plain_half_deviances(const Readout& readout, std::span<const double> mean) {
  std::vector<double> out(mean.size());
  half_deviances({readout.kind, readout.observed, readout.weight, {}, 0.0, readout.dispersion}, mean, out);
  return out;
}

/// The readout with every point's weight multiplied by a part of 0...1.
struct Weighed {
  std::vector<double> observed, weight;

  Weighed(const Readout& of, std::span<const double> part) : observed(of.observed.begin(), of.observed.end()), weight(of.weight.begin(), of.weight.end()) {
    for (std::size_t i = 0; i < part.size(); ++i) {
      if (of.kind == Kind::gaussian) {
        weight[i] /= std::sqrt(std::max(part[i], 1e-30));
      } else {
        observed[i] *= part[i];
        weight[i] *= part[i];
      }
    }
  }
};

/// Half deviance of the best curve of a direction with outliers, from given probabilities of the points' being none.
double settle(const Readout& readout, std::span<const double> axis, int direction, std::vector<double> good) {
  constexpr int kTurns = 12;
  std::vector<double> half(axis.size());
  double best = std::numeric_limits<double>::infinity();
  for (int turn = 0; turn < kTurns; ++turn) {
    const Weighed weighed(readout, good);
    const auto mean = monotone_means({readout.kind, weighed.observed, weighed.weight, {}, 0.0, 1.0}, axis, direction);
    if (mean.empty()) break;
    double now = 0.0;
    evaluate(readout, mean, now, {}, {});
    if (!(now < best - 1e-3)) break;
    best = now;
    half = plain_half_deviances(readout, mean);
    for (std::size_t i = 0; i < good.size(); ++i) good[i] = 1.0 / (1.0 + readout.odds[i] * std::exp(std::min(half[i], 700.0)));
  }
  return best;
}

double median(std::vector<double> values) {
  const auto middle = values.begin() + static_cast<std::ptrdiff_t>(values.size() / 2);
  std::nth_element(values.begin(), middle, values.end());
  return *middle;
}

/// Weight of a middling point with these shots or exposures.
double middling_weight(const Readout& readout, std::size_t i, double typical) {
  const double n = readout.weight[i];
  if (readout.kind == Kind::gaussian) return 1.0 / (n * n);
  return readout.kind == Kind::poisson ? n / std::max(typical, 1.0 / n) : 4.0 * n;
}

}  // namespace

void outlier_odds(const Readout& plain, double share, std::span<double> odds) {
  const auto ratio = ratios(plain);
  for (std::size_t i = 0; i < odds.size(); ++i) odds[i] = share / (1.0 - share) * ratio[i];
}

double fitted_share(const Readout& plain, std::span<const double> mean) {
  const auto ratio = ratios(plain), half = plain_half_deviances(plain, mean);
  double points = 0.0, share = 0.1;
  for (std::size_t i = 0; i < mean.size(); ++i) points += measured(plain, i) ? 1.0 : 0.0;
  for (int round = 0; round < kRounds; ++round) {
    double outliers = 0.0;
    for (std::size_t i = 0; i < mean.size(); ++i) {
      if (!measured(plain, i)) continue;
      const double odds = share / (1.0 - share) * ratio[i] * std::exp(std::min(half[i], 700.0));
      outliers += odds / (1.0 + odds);
    }
    share = (outliers + 1.0) / (points + 2.0);
  }
  return share;
}

double contaminated_deviance(const Readout& plain, std::span<const double> mean, double share) {
  const auto ratio = ratios(plain), half = plain_half_deviances(plain, mean);
  double sum = 0.0;
  for (std::size_t i = 0; i < mean.size(); ++i)
    if (measured(plain, i)) sum -= std::log((1.0 - share) * std::exp(-half[i]) + share * ratio[i]);
  return 2.0 * sum;
}

Kept set_aside(const Readout& readout, std::span<const double> mean) {
  Kept kept;
  kept.weight.assign(readout.weight.begin(), readout.weight.end());
  if (readout.odds.empty()) return kept;
  const auto half = plain_half_deviances(readout, mean);
  for (std::size_t i = 0; i < mean.size(); ++i) {
    if (!measured(readout, i) || readout.odds[i] * std::exp(std::min(half[i], 700.0)) <= 1.0) continue;
    kept.distrusted.push_back(static_cast<int>(i));
    kept.weight[i] = readout.kind == Kind::gaussian ? std::numeric_limits<double>::infinity() : 0.0;
  }
  return kept;
}

double together_p_value(const Readout& readout, std::span<const double> axis, std::span<const int> distrusted) {
  if (distrusted.size() < 2) return 1.0;
  std::vector<std::size_t> order;
  for (std::size_t i = 0; i < axis.size(); ++i)
    if (measured(readout, i)) order.push_back(i);
  std::stable_sort(order.begin(), order.end(), [&](std::size_t a, std::size_t b) { return axis[a] < axis[b]; });
  int blocks = 0;
  bool inside = false;
  for (const auto i : order) {
    const bool aside = std::binary_search(distrusted.begin(), distrusted.end(), static_cast<int>(i));
    if (aside && !inside) ++blocks;
    inside = aside;
  }
  const auto log_choose = [](double n, double k) { return log_factorial(n) - log_factorial(k) - log_factorial(n - k); };
  const auto some = static_cast<double>(distrusted.size()), others = static_cast<double>(order.size()) - some;
  double sum = 0.0;
  for (double b = 1.0; b <= std::min<double>(blocks, others + 1.0); b += 1.0)
    sum += std::exp(log_choose(some - 1.0, b - 1.0) + log_choose(others + 1.0, b) - log_choose(some + others, some));
  return std::min(1.0, sum);
}

MonotoneFit contaminated_monotone(const Readout& readout, std::span<const double> axis, const Kept& kept) {
  const std::vector<double> all(axis.size(), 1.0);
  std::vector<double> trusted = all;
  for (const int i : kept.distrusted) trusted[static_cast<std::size_t>(i)] = 0.0;
  const auto best = [&](int direction) { return std::min(settle(readout, axis, direction, all), settle(readout, axis, direction, trusted)); };
  return {best(1), best(-1), best(0)};
}

void level_points(const Readout& readout, std::span<double> value, std::span<double> weight) {
  std::vector<double> readings, distances;
  for (std::size_t i = 0; i < value.size(); ++i)
    if (measured(readout, i)) readings.push_back(reading(readout, i));
  std::fill(weight.begin(), weight.end(), 0.0);
  std::fill(value.begin(), value.end(), 0.0);
  if (readings.empty()) return;
  const double middle = median(readings);
  for (const double at : readings) distances.push_back(std::abs(at - middle));
  const double reach = kFarFromMost * kMedianToSigma * median(distances);
  for (std::size_t i = 0; i < value.size(); ++i) {
    if (!measured(readout, i)) continue;
    value[i] = reading(readout, i);
    if (!(reach > 0.0) || std::abs(value[i] - middle) <= reach) weight[i] = middling_weight(readout, i, middle);
  }
}

}  // namespace halfturn::infer
