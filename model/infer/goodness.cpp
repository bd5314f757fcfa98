// SPDX-License-Identifier: Apache-2.0
#include "model/infer/goodness.hpp"

#include <Eigen/Cholesky>
#include <algorithm>
#include <array>
#include <cmath>
#include <limits>
#include <vector>

#include "model/infer/linear.hpp"
#include "model/infer/statistics.hpp"

namespace halfturn::infer {
namespace {

using Kind = Readout::Kind;
constexpr double kFew = 20.0;
constexpr double kNan = std::numeric_limits<double>::quiet_NaN();

// At most kFew + 7 sqrt(kFew) + 13 outcomes matter.
constexpr std::size_t kOutcomes = 72;

/// k log k + (n - k) log(n - k) of the outcomes k = 0, 1, ... of n shots (of Poisson, where n is infinite, k log k alone): what of their
/// deviances does not depend on the mean, kept from point to point while n stays the same.
struct Entropies {
  double shots = kNan;
  std::array<double, kOutcomes> of;

  void fill(double n) {
    if (shots == n) return;
    shots = n;
    const auto part = [](double k) { return k > 0.0 ? k * std::log(k) : 0.0; };
    for (std::size_t i = 0; i < kOutcomes; ++i) {
      const auto k = static_cast<double>(i);
      of[i] = part(k) + (std::isfinite(n) ? part(n - k) : 0.0);
    }
  }
};

/// Sums over all outcomes that matter, from none of the rarer one upwards; probabilities by recurrence. `shots` is infinite
/// for Poisson; `expected` counts of the rarer outcome. The covariances are with the count itself.
DevianceMoments exact(double shots, double expected, Entropies& entropies) {
  entropies.fill(shots);
  const bool counted = std::isfinite(shots);
  const double p = counted ? expected / shots : 0.0, odds = counted ? p / (1.0 - p) : expected;
  double probability = counted ? std::exp(shots * std::log1p(-p)) : std::exp(-expected);
  // What lies beyond is met once in 1e15.
  const double last = std::min(shots, std::ceil(expected + 7.0 * std::sqrt(expected) + 12.0));
  const auto count = static_cast<std::size_t>(std::floor(last)) + 1;
  const double log_rarer = std::log(expected), log_other = counted ? std::log(shots - expected) : 0.0;
  double d1 = 0.0, d2 = 0.0, dk = 0.0, dkk = 0.0;
  for (std::size_t i = 0; i < count; ++i) {
    const auto k = static_cast<double>(i);
    // Half the deviance: k log(k/m) + (n - k) log((n - k)/(n - m)), of Poisson k log(k/m) - (k - m).
    const double half = entropies.of[i] - k * log_rarer - (counted ? (shots - k) * log_other : k - expected);
    const double d = std::max(0.0, 2.0 * half), weighted = probability * d, away = k - expected;
    d1 += weighted;
    d2 += weighted * d;
    dk += weighted * away;
    dkk += weighted * away * away;
    probability *= odds * (counted ? shots - k : 1.0) / (k + 1.0);
  }
  const double spread = expected * (1.0 - p);
  return {d1, d2 - d1 * d1, dk, dkk / spread - d1};
}

/// The binomial series to 1/n^3, in u = p (1 - p).
DevianceMoments binomial_series(double n, double p) {
  const double u = p * (1.0 - p), a = 1.0 / (n * u), lean = 1.0 - 2.0 * p;
  const double mean = 1.0 + a * ((1.0 - u) / 6 + a * ((1.0 - 3 * u) / 6 + a * (19 - 87 * u + 70 * u * u + u * u * u) / 60));
  const double variance =
      2.0 + a * (2 * (1.0 - u) / 3 +
                 a * (4 * (1.0 - 3 * u) / 3 + a * (701 - 3188 * u + 2520 * u * u + 24 * u * u * u) / 180));
  const double third = 57 - 174 * p + 244 * p * p - 140 * p * p * p + 70 * p * p * p * p;
  return {mean, variance, -lean * a * (1.0 / 6 + a * ((2.0 - 3 * u) / 6 + a * third / 60)), 2.0};
}

DevianceMoments poisson_series(double lambda) {
  const double a = 1.0 / lambda;
  return {1.0 + a * (1.0 / 6 + a * (1.0 / 6 + a * (19.0 / 60 + a * (0.9 + a * 863.0 / 252)))),
          2.0 + a * (2.0 / 3 + a * (4.0 / 3 + a * (701.0 / 180 + a * (449.0 / 30 + a * 90329.0 / 1260)))),
          -a * (1.0 / 6 + a * (1.0 / 3 + a * (0.95 + a * (3.6 + a * 4315.0 / 252)))), 2.0};
}

DevianceMoments binomial_moments(double shots, double mean, Entropies& entropies) {
  if (!(shots > 0.0 && mean > 0.0 && mean < 1.0)) return {0.0, 0.0, 0.0, 0.0};
  const double rarer = std::min(mean, 1.0 - mean);
  DevianceMoments out = binomial_series(shots, mean);
  if (shots * rarer < kFew) {
    out = exact(shots, shots * rarer, entropies);
    if (mean > 0.5) out.covariance = -out.covariance;
  }
  out.covariance = -out.covariance / (mean * (1.0 - mean));
  return out;
}

DevianceMoments poisson_moments(double exposures, double mean, Entropies& entropies) {
  if (!(exposures > 0.0 && mean > 0.0)) return {0.0, 0.0, 0.0, 0.0};
  const double lambda = exposures * mean;
  DevianceMoments out = lambda < kFew ? exact(std::numeric_limits<double>::infinity(), lambda, entropies) : poisson_series(lambda);
  out.covariance = -out.covariance / mean;
  return out;
}

/// 1 + E''/(2 information), with E'' the second derivative by mu of the expected deviance: what of a point's leverage
/// lowers the deviance by more than the moments under the fitted mean already say. 1 for many counts, 0 for one shot.
/// Since the score s is minus the derivative of log p and E' = -Cov[D, s], E'' follows from the moments: (quadratic - 2)
/// information + covariance times the derivative of mu (1 - mu)/weight (binomial) or mu/weight (Poisson) times
/// information.
double leverage_share(Kind kind, double weight, double mean, const DevianceMoments& moments) {
  if (kind == Kind::gaussian) return 1.0;
  const double bend = kind == Kind::binomial ? 1.0 - 2.0 * mean : 1.0;
  return 0.5 * (moments.quadratic + moments.covariance * bend / weight);
}

/// Gradients of the means, information matrix and its inverse, for the leverages of the points.
class Design {
 public:
  Design(std::span<const double> jacobian, std::size_t points, int parameters)
      : jacobian_(jacobian), points_(points), n_(parameters), information_(Matrix::Zero(n_, n_)),
        covariance_(Vector::Zero(n_)) {}

  Vector row(std::size_t point) const {
    Vector out(n_);
    for (int j = 0; j < n_; ++j) out[j] = jacobian_[static_cast<std::size_t>(j) * points_ + point];
    return out;
  }
  void add(std::size_t point, double information, double covariance) {
    const Vector r = row(point);
    information_ += information * r * r.transpose();
    covariance_ += covariance * r;
  }
  void factor() {
    const Vector unit = information_.diagonal().cwiseSqrt().unaryExpr([](double d) { return d > 0.0 ? 1.0 / d : 0.0; });
    unit_ = unit;
    Matrix scaled = unit.asDiagonal() * information_ * unit.asDiagonal();
    scaled.diagonal().array() += 1e-12;  // keeps parameters that the data do not tell apart from dividing by zero
    factor_.compute(scaled);
  }
  double leverage(std::size_t point) const { return form(row(point)); }
  double explained() const { return form(covariance_); }

 private:
  double form(const Vector& v) const {
    const Vector scaled = unit_.cwiseProduct(v);
    return scaled.dot(Vector(factor_.solve(scaled)));
  }
  std::span<const double> jacobian_;
  std::size_t points_;
  int n_;
  Matrix information_;
  Vector covariance_, unit_;
  Eigen::LDLT<Matrix> factor_;
};

/// The half deviance of a point, with the expected information as it is, not bounded.
PointLikelihood point(const Readout& readout, std::size_t i, double mean) {
  const double observed = readout.observed[i], weight = readout.weight[i];
  if (readout.kind == Kind::gaussian) return gaussian(observed, weight, mean);
  const bool counts = readout.kind == Kind::binomial;
  PointLikelihood out = counts ? binomial(observed, weight, mean) : poisson(observed, weight, mean);
  const double variance = counts ? mean * (1.0 - mean) : mean;
  out.information = out.information > 0.0 && variance > 0.0 ? weight / variance : 0.0;
  return out;
}

void judge(Goodness& out, double used) {
  out.p_value = kNan;
  if (!(out.expected > 0.0 && out.variance > 0.02 * used)) return;
  if (!std::isfinite(out.deviance)) {
    out.p_value = 0.0;
    return;
  }
  const double scale = out.variance / (2.0 * out.expected);
  out.p_value = chi_square_tail(out.deviance / scale, out.expected / scale);
}

DevianceMoments moments_of(Kind kind, double weight, double mean, Entropies& entropies) {
  if (kind == Kind::binomial) return binomial_moments(weight, mean, entropies);
  if (kind == Kind::poisson) return poisson_moments(weight, mean, entropies);
  if (!(weight < std::numeric_limits<double>::infinity())) return {0.0, 0.0, 0.0, 0.0};
  return {1.0, 2.0, 0.0, 2.0};
}

}  // namespace

DevianceMoments deviance_moments(Kind kind, double weight, double mean) {
  Entropies entropies;
  return moments_of(kind, weight, mean, entropies);
}

Goodness goodness(const Readout& readout, std::span<const double> mean, int parameters, std::span<const double> jacobian) {
  Goodness out{0.0, 0.0, 0.0, kNan};
  const bool known = !jacobian.empty() && parameters > 0;
  Design design(jacobian, mean.size(), known ? parameters : 0);
  std::vector<DevianceMoments> moments(mean.size());
  std::vector<double> information(mean.size());
  Entropies entropies;
  double used = 0.0;
  for (std::size_t i = 0; i < mean.size(); ++i) {
    const PointLikelihood at = point(readout, i, mean[i]);
    out.deviance += 2.0 * at.half_deviance;
    information[i] = at.information;
    if (!(at.information > 0.0)) continue;
    moments[i] = moments_of(readout.kind, readout.weight[i], mean[i], entropies);
    out.expected += moments[i].mean;
    out.variance += moments[i].variance;
    if (known) design.add(i, at.information, moments[i].covariance);
    used += 1.0;
  }
  if (known) design.factor();
  for (std::size_t i = 0; i < mean.size(); ++i) {
    if (!(information[i] > 0.0)) continue;
    const double leverage = known ? information[i] * design.leverage(i) : parameters / used;
    const double share = leverage_share(readout.kind, readout.weight[i], mean[i], moments[i]);
    out.expected -= share * leverage;
    out.variance += 2.0 * share * leverage * (share - moments[i].quadratic);
  }
  if (known) out.variance -= design.explained();
  judge(out, used);
  return out;
}

}  // namespace halfturn::infer
