// SPDX-License-Identifier: Apache-2.0
#include "model/infer/scatter.hpp"

#include <algorithm>
#include <cmath>
#include <numbers>

#include "model/infer/statistics.hpp"

namespace halfturn::infer {
namespace {

using Kind = Readout::Kind;
constexpr double kPlain = 1.0001, kMostDispersion = 400.0;
// A tail is summed to this part of its largest term, over at most so many counts; by then a normal law tells it as well.
constexpr double kTermHeard = 1e-12;
constexpr double kMostTerms = 1e5;
// Tails of points nearer than so many sigmas are not looked at: they decide nothing.
constexpr double kFarOut = 2.5;

double log_choose(double n, double k) { return log_factorial(n) - log_factorial(k) - log_factorial(n - k); }
double log_gamma(double x) { return log_factorial(x) - std::log(x); }
double xlogy(double x, double y) { return x > 0.0 ? x * std::log(y) : 0.0; }

double log_binomial(double k, double n, double p) { return log_choose(n, k) + xlogy(k, p) + xlogy(n - k, 1.0 - p); }
double log_poisson(double k, double expected) { return xlogy(k, expected) - expected - log_factorial(k); }

double log_beta_binomial(double k, double n, double p, double dispersion) {
  const double size = (n - 1.0) / (std::min(dispersion, 0.99 * n) - 1.0) - 1.0;
  if (!(size > 0.0)) return log_binomial(k, n, p);
  const double a = p * size, b = (1.0 - p) * size;
  return log_choose(n, k) + log_gamma(k + a) + log_gamma(n - k + b) - log_gamma(n + size) + log_gamma(size) - log_gamma(a) - log_gamma(b);
}

/// Variance `dispersion` times the mean.
double log_negative_binomial(double k, double expected, double dispersion) {
  const double size = expected / (dispersion - 1.0);
  return log_gamma(k + size) - log_gamma(size) - log_factorial(k) - size * std::log(dispersion) + xlogy(k, (dispersion - 1.0) / dispersion);
}

double log_normal(double signal, double mean, double sigma) {
  const double z = (signal - mean) / sigma;
  return -0.5 * z * z - std::log(sigma) - 0.5 * std::log(2.0 * std::numbers::pi);
}

struct Law {
  Kind kind;
  double weight, mean, dispersion;
  double expected() const { return weight * mean; }
  double sigma() const {
    if (kind == Kind::gaussian) return weight * std::sqrt(dispersion);
    return std::sqrt(dispersion * expected() * (kind == Kind::binomial ? 1.0 - mean : 1.0));
  }
  double most() const { return kind == Kind::binomial ? weight : std::numeric_limits<double>::infinity(); }
};

/// Probability of a reading as far out on its side or further, twice, at most 1.
double two_sided(const Law& law, double observed) {
  const double centre = law.kind == Kind::gaussian ? law.mean : law.expected(), z = (observed - centre) / law.sigma();
  const double normal = std::min(1.0, 2.0 * normal_cdf(-std::abs(z)));
  if (law.kind == Kind::gaussian || !(std::abs(z) > kFarOut)) return std::abs(z) > kFarOut ? normal : 1.0;
  const double step = z > 0.0 ? 1.0 : -1.0;
  double sum = 0.0, largest = 0.0, terms = 0.0;
  for (double k = observed; k >= 0.0 && k <= law.most(); k += step) {
    const double term = std::exp(log_dispersed(law.kind, k, law.weight, law.mean, law.dispersion));
    sum += term;
    largest = std::max(largest, term);
    if (term < kTermHeard * largest) break;
    if (++terms > kMostTerms) return normal;
  }
  return std::min(1.0, 2.0 * sum);
}

double possible_mean(Kind kind, double mean) {
  if (kind == Kind::gaussian) return mean;
  const double low = std::max(mean, 1e-9);
  return kind == Kind::binomial ? std::min(low, 1.0 - 1e-9) : low;
}

}  // namespace

double log_own(Kind kind, double observed, double weight) {
  if (kind == Kind::gaussian) return log_normal(0.0, 0.0, weight);
  if (kind == Kind::poisson) return log_poisson(observed, observed);
  return log_binomial(observed, weight, observed / weight);
}

double log_dispersed(Kind kind, double observed, double weight, double mean, double dispersion) {
  if (kind == Kind::gaussian) return log_normal(observed, mean, weight * std::sqrt(std::max(1.0, dispersion)));
  const bool plain = dispersion < kPlain;
  if (kind == Kind::poisson)
    return plain ? log_poisson(observed, weight * mean) : log_negative_binomial(observed, weight * mean, dispersion);
  return plain || weight < 2.0 ? log_binomial(observed, weight, mean) : log_beta_binomial(observed, weight, mean, dispersion);
}

double dispersed_deviance(const Readout& readout, std::span<const double> mean, double dispersion) {
  double sum = 0.0;
  for (std::size_t i = 0; i < mean.size(); ++i) {
    if (!measured(readout, i)) continue;
    const double k = readout.observed[i], n = readout.weight[i];
    sum += log_own(readout.kind, k, n) - log_dispersed(readout.kind, k, n, possible_mean(readout.kind, mean[i]), dispersion);
  }
  return 2.0 * sum;
}

double fitted_dispersion(const Readout& readout, std::span<const double> mean) {
  // Golden section in the logarithm; there is one minimum in practice, and a wrong one only makes scatter look less likely.
  const double ratio = 0.5 * (std::sqrt(5.0) - 1.0);
  const auto at = [&](double log_dispersion) { return dispersed_deviance(readout, mean, std::exp(log_dispersion)); };
  double low = 0.0, high = std::log(kMostDispersion), a = high - ratio * (high - low), b = low + ratio * (high - low);
  double at_a = at(a), at_b = at(b);
  while (high - low > 0.01) {
    if (at_a < at_b) {
      high = b, b = a, at_b = at_a;
      a = high - ratio * (high - low);
      at_a = at(a);
    } else {
      low = a, a = b, at_a = at_b;
      b = low + ratio * (high - low);
      at_b = at(b);
    }
  }
  return std::exp(0.5 * (low + high));
}

double furthest_p_value(const Readout& readout, std::span<const double> mean, double dispersion) {
  double least = 1.0, points = 0.0;
  for (std::size_t i = 0; i < mean.size(); ++i) {
    if (!measured(readout, i)) continue;
    points += 1.0;
    const Law law{readout.kind, readout.weight[i], possible_mean(readout.kind, mean[i]), std::max(1.0, dispersion)};
    least = std::min(least, two_sided(law, readout.observed[i]));
  }
  return -std::expm1(points * std::log1p(-std::min(least, 1.0 - 1e-16)));
}

}  // namespace halfturn::infer
