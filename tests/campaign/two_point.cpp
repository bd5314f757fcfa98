// SPDX-License-Identifier: Apache-2.0
#include "tests/campaign/two_point.hpp"

#include <algorithm>
#include <cmath>

#include "model/infer/statistics.hpp"

namespace halfturn::campaign {
namespace {

constexpr double kEdge = 1e-12;
constexpr double kOff = 0.050;  // rad, as in score.cpp
constexpr double kSigmas = 5;   // the square root of the deviance there
constexpr double kEfficient = 1.05;  // root mean square error over the Cramer-Rao bound, as in targets.cpp

double logit(double p) { return std::log(p) - std::log1p(-p); }

/// ln of the ratio's mean where `p` holds, over `shots`.
double distance(double shots, double p, double other) {
  return shots * (p * std::log(p / other) + (1 - p) * std::log((1 - p) / (1 - other)));
}

/// The probability that the answer stays on I's side, far enough from T's.
double stays(double off, double held, Answers answers) {
  const double root = std::sqrt(held), beyond = root * (1 - kOff / off);
  if (answers == Answers::maximum) return infer::normal_cdf(std::min(root - kSigmas, beyond));
  return off > 2 * kOff ? infer::normal_cdf(beyond - kSigmas) : 0;
}

/// The most that an interval of I's scans holds T's answer.
double holds_other(double away, const Intervals& intervals) {
  const double beyond = away - intervals.reach;
  return std::min(1.0, infer::normal_cdf(-beyond) + astray(beyond, intervals.low));
}

}  // namespace

void Apart::add_binomial(double shots, double p_true, double p_imposter) {
  const double p = std::clamp(p_true, kEdge, 1 - kEdge), q = std::clamp(p_imposter, kEdge, 1 - kEdge);
  const double step = logit(p) - logit(q);
  mean_true += distance(shots, p, q);
  mean_imposter -= distance(shots, q, p);
  variance_true += shots * p * (1 - p) * step * step;
  variance_imposter += shots * q * (1 - q) * step * step;
}

void Apart::add_normal(double shift) {
  const double square = shift * shift;
  mean_true += square / 2;
  mean_imposter -= square / 2;
  variance_true += square;
  variance_imposter += square;
}

double power(const Apart& apart, double size) {
  if (!(size > 0)) return 0;
  if (size >= 1) return 1;
  if (!(apart.variance_true > 0)) return size;
  const double threshold = apart.mean_imposter + infer::normal_quantile(1 - size) * std::sqrt(apart.variance_imposter);
  return infer::normal_cdf((apart.mean_true - threshold) / std::sqrt(apart.variance_true));
}

double reach(double low, double high, double stretch) {
  const double half = stretch * infer::normal_quantile((1 + high) / 2);
  double near = half, far = 2 * half;  // the coverage falls as the interval is shifted
  for (int i = 0; i < 60; ++i) {
    const double middle = (near + far) / 2;
    const bool covers = infer::normal_cdf(middle) - infer::normal_cdf(middle - 2 * half) >= low;
    (covers ? near : far) = middle;
  }
  return far;
}

double astray(double beyond, double low) {
  const double most = 1 - low;
  return beyond > 0 ? std::min(most, (kEfficient * kEfficient - 1) / (beyond * beyond)) : most;
}

double most_covered(const Apart& apart, double away, const Intervals& intervals) { return power(apart, holds_other(away, intervals)); }

double least_missed(const Apart& apart, double away, const Intervals& intervals, double refused) {
  return 1 - power(apart, std::min(1.0, refused + holds_other(away, intervals)));
}

double least_wrong(const Apart& apart, double off, double held, double refused, Answers answers) {
  if (!(off > kOff) || !(held > 0)) return 0;
  const double q = stays(off, held, answers);
  return q > refused ? q * (1 - power(apart, refused / q)) : 0;
}

}  // namespace halfturn::campaign
