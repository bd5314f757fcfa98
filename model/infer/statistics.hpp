// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <span>

/// Distributions and tests of classical statistics.
namespace halfturn::infer {

/// Regularised incomplete gamma functions P(a, x) and Q(a, x) = 1 - P, a > 0, x >= 0 (NIST DLMF 8.2.4): series below x =
/// a + 1, continued fraction above (DLMF 8.7.1, 8.9.2). Relative error of the smaller one < 1e-12 for a <= 1e3, 1e-10 for
/// a <= 1e6. NaN outside the domain.
double gamma_p(double a, double x);
double gamma_q(double a, double x);

/// log(n!) for real n >= 0, relative error < 1e-13.
double log_factorial(double n);

/// Probability that a chi-square of `dof` > 0 (any real number) exceeds x, and the value exceeded with probability `tail`
/// (0 < tail < 1; relative error < 1e-9 for dof <= 1e6).
double chi_square_tail(double x, double dof);
double chi_square_quantile(double tail, double dof);

/// Standard normal distribution function and its inverse (0 < p < 1; |error| < 1e-12 for p >= 1e-300 below 1/2, and above
/// as far as 1 - p is known).
double normal_cdf(double z);
double normal_quantile(double p);

struct Interval {
  double low;
  double high;
};

/// Score interval of a binomial proportion (E. B. Wilson, J. Am. Stat. Assoc. 22, 209 (1927)), k of n > 0 at a confidence
/// `level` such as 0.95.
Interval wilson_interval(double k, double n, double level);

/// Probability of as few runs of equal sign as `residuals` have, or fewer, were the order random (A. Wald, J. Wolfowitz,
/// Ann. Math. Stat. 11, 147 (1940)): small where a model misses a slow shape. Zeros and NaN are left out. Exact up to
/// 1000 signs, a normal law with continuity correction beyond. 1 where one of the signs is missing.
double runs_p_value(std::span<const double> residuals);

/// The lag-one autocorrelation sum of `residuals` about their mean, less its expectation over all orders, in units of its
/// standard deviation over all orders (moments by permutation, as in A. Wald, J. Wolfowitz, Ann. Math. Stat. 14, 378
/// (1943), for the sum that is not circular). Near standard normal for random order; > 0 where neighbours agree. NaN for
/// fewer than 4 numbers or where all are equal.
double autocorrelation_z(std::span<const double> residuals);

}  // namespace halfturn::infer
