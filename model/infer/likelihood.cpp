// SPDX-License-Identifier: Apache-2.0
#include "model/infer/likelihood.hpp"

#include <algorithm>
#include <cmath>
#include <limits>

namespace halfturn::infer {
namespace {

constexpr double kInfinity = std::numeric_limits<double>::infinity();
constexpr PointLikelihood kNothing{0.0, 0.0, 0.0};
constexpr PointLikelihood kRuledOut{kInfinity, 0.0, 0.0};

/// k log(k/m) - (k - m), without cancellation near m = k; m where k = 0.
double entropy(double k, double m) {
  if (k <= 0.0) return m;
  const double x = (m - k) / k;
  if (std::abs(x) >= 0.02) return k * (x - std::log(m / k));
  // x - log(1 + x) = x^2 (1/2 - x/3 + x^2/4 - ...); nine terms leave less than 0.02^9/11 < 1e-16 of the first.
  double sum = 0.0;
  for (int j = 10; j >= 2; --j) sum = 1.0 / j - x * sum;
  return k * x * x * sum;
}

template <PointLikelihood (*point)(double, double, double)>
bool sum(const Readout& readout, std::span<const double> mean, double& half_deviance, std::span<double> score,
         std::span<double> information) {
  double total = 0.0;
  for (std::size_t i = 0; i < mean.size(); ++i) {
    const PointLikelihood at = point(readout.observed[i], readout.weight[i], mean[i]);
    total += at.half_deviance;
    if (!score.empty()) score[i] = at.score;
    if (!information.empty()) information[i] = at.information;
  }
  half_deviance = std::isnan(total) ? kInfinity : total;
  return std::isfinite(total);
}

}  // namespace

PointLikelihood binomial(double counts, double shots, double mean) {
  if (!(shots > 0.0) || std::isnan(counts)) return kNothing;
  if (!(mean >= 0.0 && mean <= 1.0)) return kRuledOut;
  const double dark = shots - counts, other = 1.0 - mean;
  if ((counts > 0.0 && mean <= 0.0) || (dark > 0.0 && other <= 0.0)) return kRuledOut;
  const double deviance = entropy(counts, shots * mean) + entropy(dark, shots * other);
  const double bright = counts > 0.0 ? counts / mean : 0.0, unlit = dark > 0.0 ? dark / other : 0.0;
  double variance = mean * other;
  // Half a count of the outcome that was never seen, in shots + 1.
  const double least = 0.5 * (shots + 0.5) / ((shots + 1.0) * (shots + 1.0));
  const bool unseen = (counts <= 0.0 && mean < 0.5) || (dark <= 0.0 && other < 0.5);
  if (unseen && variance < least) variance = least;
  return {deviance, unlit - bright, shots / variance};
}

PointLikelihood gaussian(double signal, double sigma, double mean) {
  if (!(sigma < kInfinity) || std::isnan(signal)) return kNothing;
  if (!std::isfinite(mean)) return kRuledOut;
  const double z = (mean - signal) / sigma;
  return {0.5 * z * z, z / sigma, 1.0 / (sigma * sigma)};
}

PointLikelihood poisson(double photons, double exposures, double mean) {
  if (!(exposures > 0.0) || std::isnan(photons)) return kNothing;
  if (!(mean >= 0.0 && mean < kInfinity) || (photons > 0.0 && mean <= 0.0)) return kRuledOut;
  const double deviance = entropy(photons, exposures * mean);
  if (photons <= 0.0) return {deviance, exposures, exposures / std::max(mean, 0.5 / exposures)};
  return {deviance, exposures - photons / mean, exposures / mean};
}

bool evaluate(const Readout& readout, std::span<const double> mean, double& half_deviance, std::span<double> score,
              std::span<double> information) {
  switch (readout.kind) {
    case Readout::Kind::binomial: return sum<binomial>(readout, mean, half_deviance, score, information);
    case Readout::Kind::gaussian: return sum<gaussian>(readout, mean, half_deviance, score, information);
    case Readout::Kind::poisson: return sum<poisson>(readout, mean, half_deviance, score, information);
  }
  return false;
}

}  // namespace halfturn::infer
