// SPDX-License-Identifier: Apache-2.0
#include "model/infer/statistics.hpp"

#include <algorithm>
#include <cmath>
#include <fstream>
#include <limits>
#include <numeric>
#include <random>
#include <sstream>
#include <vector>

#include "model/infer/monotone.hpp"
#include "tests/support/catch.hpp"

using namespace halfturn::infer;

// mpmath.gammainc(..., regularized=True) at 40 digits; scipy.special.gammaincc and gammainc (SciPy 1.10.1) agree to 14.
TEST_CASE("regularised incomplete gamma functions") {
  const double cases[][4] = {{0.5, 0.02, 0.841480581121794, 0.158519418878206},
                             {0.5, 9, 2.20904969985854e-5, 0.999977909503001},
                             {1, 1, 0.367879441171442, 0.632120558828558},
                             {2.5, 0.3, 0.988003242794094, 0.0119967572059063},
                             {7, 15.2, 0.00671998056749203, 0.993280019432508},
                             {30, 29, 0.549170885281876, 0.450829114718124},
                             {30, 80, 4.90322955581075e-11, 0.999999999950968},
                             {450, 400, 0.992545672519997, 0.00745432748000292},
                             {450, 520, 0.00079353559682612, 0.999206464403174},
                             {5e4, 5.08e4, 0.000185220953912174, 0.999814779046088},
                             {1e6, 9.98e5, 0.977303885993263, 0.0226961140067368}};
  for (const auto& c : cases) {
    CHECK(gamma_q(c[0], c[1]) == Approx(c[2]).epsilon(1e-12));
    CHECK(gamma_p(c[0], c[1]) == Approx(c[3]).epsilon(1e-12));
  }
  CHECK(gamma_p(2.0, 0.0) == 0.0);
  CHECK(gamma_q(2.0, 0.0) == 1.0);
  CHECK(gamma_q(2.0, std::numeric_limits<double>::infinity()) == 0.0);
  CHECK(std::isnan(gamma_q(-1.0, 1.0)));
  CHECK(std::isnan(gamma_p(1.0, -1.0)));
}

// scipy.stats.chi2.isf(tail, dof), SciPy 1.10.1.
TEST_CASE("chi-square quantiles") {
  const double cases[][3] = {{0.05, 1, 3.8414588206941285},    {0.3173105078629141, 1, 0.9999999999999882},
                             {1e-4, 57, 105.47564755577773},   {0.05, 2, 5.991464547107983},
                             {0.9, 0.37, 5.078334262040366e-6}, {0.999, 3, 0.02429758581569275},
                             {1e-12, 10.5, 79.67999439346148}, {0.5, 2e5, 199999.3333337284},
                             {1e-9, 0.1, 30.233480160353597}};
  for (const auto& c : cases) {
    CHECK(chi_square_quantile(c[0], c[1]) == Approx(c[2]).epsilon(1e-10));
    CHECK(chi_square_tail(c[2], c[1]) == Approx(c[0]).epsilon(1e-9));
  }
  CHECK(chi_square_tail(-1.0, 3.0) == 1.0);
  CHECK(std::isnan(chi_square_quantile(0.0, 3.0)));
}

// scipy.stats.norm.cdf and ppf, SciPy 1.10.1.
TEST_CASE("normal distribution") {
  CHECK(normal_cdf(-10) == Approx(7.61985302416047e-24).epsilon(1e-12));
  CHECK(normal_cdf(-1.5) == Approx(0.06680720126885807).epsilon(1e-14));
  CHECK(normal_cdf(0.2) == Approx(0.579259709439103).epsilon(1e-14));
  CHECK(normal_cdf(3) == Approx(0.9986501019683699).epsilon(1e-14));
  CHECK(std::abs(normal_quantile(0.975) - 1.959963984540054) < 1e-12);
  CHECK(std::abs(normal_quantile(0.5)) < 1e-12);
  CHECK(std::abs(normal_quantile(0.3) + 0.5244005127080409) < 1e-12);
  CHECK(std::abs(normal_quantile(1e-4) + 3.7190164854556804) < 1e-12);
  CHECK(std::abs(normal_quantile(1e-20) + 9.262340089798409) < 1e-12);
  CHECK(std::abs(normal_quantile(1e-300) + 37.0470962993612) < 1e-12);
  CHECK(std::isnan(normal_quantile(1.5)));
}

// Newcombe, Stat. Med. 17, 857 (1998), Table I, method 3 (as quoted), to its four printed digits.
TEST_CASE("Wilson intervals") {
  const double table[][4] = {{81, 263, .2553, .3662}, {15, 148, .0624, .1605}, {0, 20, 0, .1611}, {1, 29, .0061, .1718}};
  for (const auto& row : table) {
    const Interval found = wilson_interval(row[0], row[1], 0.95);
    CHECK(std::abs(found.low - row[2]) < 5.01e-5);
    CHECK(std::abs(found.high - row[3]) < 5.01e-5);
  }
}

// SciPy 1.10.1: scipy.stats.binomtest(k, n).proportion_ci(level, method="wilson"), to its digits.
TEST_CASE("Wilson intervals at other levels, and at the ends") {
  const double table[][5] = {{7, 20, .6827, 0.2528128788254427, 0.4614734263041853}, {7, 20, .99, 0.1463934413769389, 0.6283381789526872}, {99, 100, .9, 0.9564182264659439, 0.9977659071665451}, {3, 3, .95, 0.4385029682449546, 1}};
  for (const auto& row : table) {
    const Interval found = wilson_interval(row[0], row[1], row[2]);
    CHECK(found.low == Approx(row[3]).epsilon(1e-12));
    CHECK(found.high == Approx(row[4]).epsilon(1e-12));
    // The same successes counted as failures turn the interval over.
    const Interval turned = wilson_interval(row[1] - row[0], row[1], row[2]);
    CHECK(turned.low == Approx(1.0 - found.high).margin(1e-15));
    CHECK(turned.high == Approx(1.0 - found.low).margin(1e-15));
  }
}

TEST_CASE("Wilson intervals of the file of published intervals") {
  NEEDS_REFERENCE_DATA(folder);
  std::ifstream file(*folder + "/intervals95.csv");
  int rows = 0;
  for (std::string line; std::getline(file, line);) {
    std::replace(line.begin(), line.end(), ',', ' ');
    double k, n, low, high;
    std::string method;
    if (!(std::istringstream(line) >> k >> n >> method >> low >> high) || method != "wilson") continue;
    const Interval found = wilson_interval(k, n, 0.95);
    CHECK(std::abs(found.low - low) < 1e-9);
    CHECK(std::abs(found.high - high) < 1e-9);
    ++rows;
  }
  CHECK(rows == 18);
}

// Counted over all arrangements (Python's itertools.combinations): arrangements with at most r runs, of all.
TEST_CASE("runs of signs") {
  struct Case {
    int plus, minus;
    std::vector<double> signs;
    double favourable, all;
  };
  const Case cases[] = {
      {5, 7, {1, 1, 1, -1, -1, -1, -1, 1, 1, -1, -1, -1}, 60, 792},            // 4 runs
      {5, 7, {1, -1, 1, -1, 1, -1, 1, -1, 1, -1, -1, -1}, 786, 792},           // 10 runs
      {2, 9, {-1, -1, 1, 1, -1, -1, -1, -1, -1, -1, -1}, 11, 55},              // 3 runs
      {8, 8, {1, 1, 1, 1, -1, -1, -1, -1, 1, 1, 1, -1, -1, -1, -1, 1}, 408, 12870},  // 5 runs
      {1, 6, {-1, -1, 0, -1, -1, -1, -1, 1}, 2, 7},                            // 2 runs, a zero left out
  };
  for (const Case& c : cases) CHECK(runs_p_value(c.signs) == Approx(c.favourable / c.all).epsilon(1e-12));
  CHECK(runs_p_value(std::vector<double>{1, 2, 3}) == 1.0);
  CHECK(runs_p_value({}) == 1.0);
}

// 1000 signs are summed exactly and 1001 go by the normal law: in the body of the distribution the two agree to its
// accuracy.
TEST_CASE("exact and normal laws of runs meet") {
  std::mt19937_64 random(5);
  std::vector<double> signs(1001);
  for (int trial = 0; trial < 5; ++trial) {
    for (auto& s : signs) s = random() % 2 ? 1.0 : -1.0;
    signs[1000] = signs[999];
    const double longer = runs_p_value(signs), exact = runs_p_value(std::span(signs).first(1000));
    CHECK(std::abs(longer - exact) < 0.02);
  }
}

TEST_CASE("lag-one autocorrelation") {
  // Over all 5040 orders of seven numbers (numpy): (sum - mean of sums) / their standard deviation.
  const std::vector<double> seven{0.3, -1.2, 0.7, 2.1, -0.4, 0.1, -0.9};
  CHECK(autocorrelation_z(seven) == Approx(0.10350263741224598).epsilon(1e-12));
  std::vector<double> slow(60);
  for (int i = 0; i < 60; ++i) slow[i] = std::sin(0.3 * i);
  CHECK(autocorrelation_z(slow) > 6.0);
  CHECK(std::isnan(autocorrelation_z(std::vector<double>{1, 1, 1, 1, 1})));
  CHECK(std::isnan(autocorrelation_z(std::vector<double>{1, 2})));
}

namespace {
const std::vector<double> kAxis{3, 1, 2, 5, 4, 4, 6, 7};
struct Scan {
  Readout::Kind kind;
  std::vector<double> observed, weight;
  double rising, flat;
};
const Scan kScans[] = {
    {Readout::Kind::binomial, {9, 4, 2, 8, 14, 11, 19, 15}, {20, 20, 10, 20, 25, 20, 20, 20},
     2.3669752573322036, 18.813264282429948},
    {Readout::Kind::gaussian, {.31, .22, .18, .42, .55, .47, .93, .71}, {.05, .05, .1, .05, .04, .05, .05, .08},
     4.967311648954555, 70.55111703022843},
    {Readout::Kind::poisson, {31, 12, 9, 55, 48, 40, 90, 71}, {10, 5, 5, 10, 8, 10, 10, 10},
     3.142059488881426, 33.67288881642818},
};
}  // namespace

// scipy.optimize.minimize(method="SLSQP") of each likelihood itself over means with increments >= 0 (SciPy 1.10.1, ftol
// 1e-15, five starts). Its accuracy is that of the comparison.
TEST_CASE("monotone fits") {
  std::vector<double> mirrored(kAxis);
  for (auto& a : mirrored) a = -a;
  for (const Scan& scan : kScans) {
    const Readout readout{scan.kind, scan.observed, scan.weight};
    const MonotoneFit fit = monotone_half_deviance(readout, kAxis), mirror = monotone_half_deviance(readout, mirrored);
    CHECK(fit.rising == Approx(scan.rising).epsilon(1e-7));
    CHECK(fit.flat == Approx(scan.flat).epsilon(1e-7));
    CHECK(fit.falling == Approx(scan.flat).epsilon(1e-7));  // nothing falls in these scans
    CHECK(mirror.falling == Approx(fit.rising).epsilon(1e-12));
    CHECK(mirror.rising == Approx(fit.falling).epsilon(1e-12));
  }
}

TEST_CASE("monotone fits leave out what was not measured") {
  for (const Scan& scan : kScans) {
    const Readout readout{scan.kind, scan.observed, scan.weight};
    const MonotoneFit before = monotone_half_deviance(readout, kAxis);
    std::vector<double> axis(kAxis), observed(scan.observed), weight(scan.weight);
    for (const double a : {0.5, 2.5, 6.5, 9.0}) {
      axis.push_back(a), observed.push_back(std::numeric_limits<double>::quiet_NaN()), weight.push_back(1.0);
    }
    const MonotoneFit after = monotone_half_deviance(Readout{scan.kind, observed, weight}, axis);
    CHECK(after.rising == Approx(before.rising).epsilon(1e-12));
    CHECK(after.falling == Approx(before.falling).epsilon(1e-12));
    CHECK(after.flat == Approx(before.flat).epsilon(1e-12));
  }
  CHECK(monotone_half_deviance(Readout{}, {}).rising == 0.0);
  const std::vector<double> dark{0, 0, 0}, shots{5, 5, 5}, axis{1, 2, 3};
  CHECK(monotone_half_deviance(Readout{Readout::Kind::binomial, dark, shots}, axis).flat == 0.0);
}
