// SPDX-License-Identifier: Apache-2.0
#include "model/infer/statistics.hpp"

#include <algorithm>
#include <cmath>
#include <cstddef>
#include <limits>
#include <numbers>

namespace halfturn::infer {
namespace {

constexpr double kNan = std::numeric_limits<double>::quiet_NaN();
constexpr double kEpsilon = std::numeric_limits<double>::epsilon();

/// y - log(1 + y) for y > -1, by its series near 0, where the difference cancels.
double log_excess(double y) {
  if (std::abs(y) > 0.1) return y - std::log1p(y);
  double sum = 0.0;
  for (int j = 18; j >= 2; --j) sum = 1.0 / j - y * sum;
  return y * y * sum;
}

/// x^a exp(-x) / Gamma(a). Stirling's series for large a (DLMF 5.11.3), arranged so that nothing large cancels.
double gamma_weight(double a, double x) {
  if (a < 20.0) return std::exp(a * std::log(x) - x) / std::tgamma(a);
  const double b = 1.0 / a, b2 = b * b;
  const double stirling = b * (1.0 / 12 - b2 * (1.0 / 360 - b2 * (1.0 / 1260 - b2 * (1.0 / 1680 - b2 / 1188))));
  return std::sqrt(a / (2.0 * std::numbers::pi)) * std::exp(-a * log_excess((x - a) / a) - stirling);
}

/// P by its series, for x < a + 1.
double gamma_series(double a, double x) {
  double term = 1.0 / a, sum = term;
  for (double k = a + 1.0; term > sum * 0.1 * kEpsilon; k += 1.0) sum += term *= x / k;
  return sum * gamma_weight(a, x);
}

/// Q by its continued fraction, for x >= a + 1; the method of Lentz as modified by Thompson and Barnett (J. Comput. Phys.
/// 64, 490 (1986)).
double gamma_fraction(double a, double x) {
  constexpr double tiny = 1e-300;
  double b = x + 1.0 - a, c = 1.0 / tiny, d = 1.0 / b, value = d;
  const double most = 200.0 + 20.0 * std::sqrt(a);
  for (double i = 1.0; i < most; i += 1.0) {
    const double numerator = i * (a - i);
    b += 2.0;
    d = numerator * d + b;
    c = b + numerator / c;
    d = 1.0 / (std::abs(d) < tiny ? tiny : d);
    if (std::abs(c) < tiny) c = tiny;
    value *= c * d;
    if (std::abs(c * d - 1.0) < kEpsilon) break;
  }
  return value * gamma_weight(a, x);
}

bool in_domain(double a, double x) { return a > 0.0 && x >= 0.0 && std::isfinite(a); }

double log_choose(double n, double k) { return log_factorial(n) - log_factorial(k) - log_factorial(n - k); }

/// Exact probability of at most `runs` runs among `plus` and `minus` signs in random order.
double runs_exact(std::size_t plus, std::size_t minus, std::size_t runs) {
  const auto a = static_cast<double>(plus), b = static_cast<double>(minus);
  const double all = log_choose(a + b, a);
  const auto ways = [&](double i, double j) {  // i runs of plus, j of minus
    return i < 1 || j < 1 || i > a || j > b ? 0.0 : std::exp(log_choose(a - 1, i - 1) + log_choose(b - 1, j - 1) - all);
  };
  double sum = 0.0;
  for (std::size_t r = 2; r <= runs; ++r) {
    const auto half = static_cast<double>(r / 2);
    sum += r % 2 == 0 ? 2.0 * ways(half, half) : ways(half + 1, half) + ways(half, half + 1);
  }
  return std::min(sum, 1.0);
}

}  // namespace

/// Stirling's series from 16 on. (std::lgamma writes a global variable.)
double log_factorial(double n) {
  if (n < 16.0) return std::log(std::tgamma(n + 1.0));
  const double a = n + 1.0, b = 1.0 / a, b2 = b * b;
  return (a - 0.5) * std::log(a) - a + 0.5 * std::log(2.0 * std::numbers::pi) +
         b * (1.0 / 12 - b2 * (1.0 / 360 - b2 * (1.0 / 1260 - b2 / 1680)));
}

double gamma_p(double a, double x) {
  if (!in_domain(a, x)) return kNan;
  if (x == 0.0) return 0.0;
  return x < a + 1.0 ? gamma_series(a, x) : 1.0 - gamma_q(a, x);
}

double gamma_q(double a, double x) {
  if (!in_domain(a, x)) return kNan;
  if (std::isinf(x)) return 0.0;
  return x < a + 1.0 ? 1.0 - gamma_p(a, x) : gamma_fraction(a, x);
}

double chi_square_tail(double x, double dof) { return gamma_q(0.5 * dof, std::max(0.5 * x, 0.0)); }

double chi_square_quantile(double tail, double dof) {
  if (!(tail > 0.0 && tail < 1.0 && dof > 0.0)) return kNan;
  const double a = 0.5 * dof;
  // Start: E. B. Wilson, M. M. Hilferty, Proc. Natl. Acad. Sci. 17, 684 (1931); the series' first term where that fails.
  const double c = 2.0 / (9.0 * dof), cube = 1.0 - c + normal_quantile(1.0 - tail) * std::sqrt(c);
  double x = a * cube * cube * cube;
  if (!(cube > 0.3)) x = std::exp((std::log1p(-tail) + log_factorial(a)) / a);
  double low = 0.0, high = std::numeric_limits<double>::infinity();
  for (int i = 0; i < 200; ++i) {
    const bool upper = tail < 0.5;  // work with the smaller tail, which is known to full precision
    const double excess = upper ? gamma_q(a, x) - tail : (1.0 - tail) - gamma_p(a, x);
    (excess > 0.0 ? low : high) = x;
    const double newton = excess * x / gamma_weight(a, x);
    const double bend = 1.0 - 0.5 * newton * ((a - 1.0) / x - 1.0);  // Halley's correction
    double next = x + newton / std::clamp(bend, 0.5, 2.0);
    if (!(next > low && next < high)) next = std::isfinite(high) ? 0.5 * (low + high) : 2.0 * x;
    if (std::abs(next - x) <= 4.0 * kEpsilon * x) return 2.0 * next;
    x = next;
  }
  return 2.0 * x;
}

double normal_cdf(double z) { return 0.5 * std::erfc(-z / std::numbers::sqrt2); }

double normal_quantile(double p) {
  if (!(p > 0.0 && p < 1.0)) return p == 0.0 ? -std::numeric_limits<double>::infinity()
                                             : p == 1.0 ? std::numeric_limits<double>::infinity() : kNan;
  if (p > 0.5) return -normal_quantile(1.0 - p);
  // Start: M. Abramowitz, I. A. Stegun, 26.2.23 (|error| < 4.5e-4); three Newton steps on log(cdf), which is concave.
  const double t = std::sqrt(-2.0 * std::log(p));
  double z = -(t - (2.515517 + t * (0.802853 + t * 0.010328)) / (1.0 + t * (1.432788 + t * (0.189269 + t * 0.001308))));
  for (int i = 0; i < 3; ++i) {
    const double cdf = normal_cdf(z);
    const double density = std::exp(-0.5 * z * z) / std::sqrt(2.0 * std::numbers::pi);
    z -= std::log(cdf / p) * cdf / density;
  }
  return z;
}

Interval wilson_interval(double k, double n, double level) {
  const double z = -normal_quantile(0.5 * (1.0 - level)), z2 = z * z;
  const double centre = (k + 0.5 * z2) / (n + z2);
  const double half = z / (n + z2) * std::sqrt(k * (n - k) / n + 0.25 * z2);
  return {k <= 0.0 ? 0.0 : centre - half, k >= n ? 1.0 : centre + half};
}

double runs_p_value(std::span<const double> residuals) {
  std::size_t plus = 0, minus = 0, runs = 0;
  double last = 0.0;
  for (const double r : residuals) {
    if (!(r > 0.0) && !(r < 0.0)) continue;
    (r > 0.0 ? plus : minus) += 1;
    if (last == 0.0 || (r > 0.0) != (last > 0.0)) ++runs;
    last = r;
  }
  if (plus == 0 || minus == 0) return 1.0;
  if (plus + minus <= 1000) return runs_exact(plus, minus, runs);
  const auto a = static_cast<double>(plus), b = static_cast<double>(minus), n = a + b, ab = 2.0 * a * b;
  const double mean = 1.0 + ab / n, variance = ab * (ab - n) / (n * n * (n - 1.0));
  return normal_cdf((static_cast<double>(runs) + 0.5 - mean) / std::sqrt(variance));
}

double autocorrelation_z(std::span<const double> residuals) {
  const auto n = static_cast<double>(residuals.size());
  if (residuals.size() < 4) return kNan;
  double mean = 0.0, s2 = 0.0, s4 = 0.0, sum = 0.0;
  for (const double r : residuals) mean += r / n;
  for (std::size_t i = 0; i < residuals.size(); ++i) {
    const double e = residuals[i] - mean;
    s2 += e * e;
    s4 += e * e * e * e;
    if (i > 0) sum += e * (residuals[i - 1] - mean);
  }
  // Of the (n-1)^2 products of two terms, n-1 are squares, 2(n-2) share one residual, (n-2)(n-3) share none; the moments
  // over all orders follow from the power sums.
  const double square = (s2 * s2 - s4) / n;
  const double shared = 2.0 * (2.0 * s4 - s2 * s2) / (n * (n - 1.0));
  const double apart = (3.0 * s2 * s2 - 6.0 * s4) / (n * (n - 1.0));
  const double expected = -s2 / n;
  const double variance = square + shared + apart - expected * expected;
  return variance > 0.0 ? (sum - expected) / std::sqrt(variance) : kNan;
}

}  // namespace halfturn::infer
