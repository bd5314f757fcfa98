// SPDX-License-Identifier: Apache-2.0
#include "model/infer/outliers.hpp"

#include <algorithm>
#include <cmath>
#include <random>
#include <vector>

#include "model/infer/scatter.hpp"
#include "tests/model/infer/fit_samples.hpp"
#include "tests/support/catch.hpp"

using namespace halfturn;
using namespace halfturn::infer;
using namespace halfturn::tests;
using constants::kPi;
using constants::kTwoPi;
using Kind = Readout::Kind;

namespace {

/// -2 log of the mixture about one mean, from one point's odds and `evaluate`: the constant that `evaluate` leaves out is put back.
double mixture(Kind kind, double observed, double weight, double mean, double share) {
  const Readout plain{kind, {&observed, 1}, {&weight, 1}};
  double odds = 0.0, half = 0.0;
  outlier_odds(plain, share, {&odds, 1});
  Readout robust = plain;
  robust.odds = {&odds, 1};
  evaluate(robust, {&mean, 1}, half, {}, {});
  return 2.0 * (half - std::log1p(odds) - std::log(1.0 - share));
}

Truth flop(double period, double contrast = 0.9) {
  Truth truth;
  truth.rabi = kTwoPi / period;
  truth.contrast = contrast;
  return truth;
}

Prior known_switch() {
  Prior prior;
  prior.dead_time = {0.0, 20e-9};
  return prior;
}

}  // namespace

// SciPy 1.10.1: -2 log((1-e) binom.pmf(k, n, p) + e/(n+1)) + 2 binom.logpmf(k, n, k/n); D. W. Hogg, J. Bovy, D. Lang,
// arXiv:1008.4686 (2010), eq. 17, with the label of each point summed out.
TEST_CASE("counts with a share of outliers have the likelihood of the mixture") {
  CHECK(mixture(Kind::binomial, 7, 20, 0.3, 0.1) == Approx(0.37861750836462793).epsilon(1e-11));
  CHECK(mixture(Kind::binomial, 0, 200, 0.9, 0.05) == Approx(16.598074363226132).epsilon(1e-11));
  CHECK(mixture(Kind::binomial, 150, 200, 0.7, 0.05) == Approx(2.5408508199523414).epsilon(1e-11));
  CHECK(mixture(Kind::binomial, 55, 200, 0.4, 0.1) == Approx(9.452654235021924).epsilon(1e-11));
  const double counts = 55, shots = 200, mean = 0.4;
  CHECK(contaminated_deviance({Kind::binomial, {&counts, 1}, {&shots, 1}}, {&mean, 1}, 0.1) == Approx(9.452654235021924).epsilon(1e-11));
}

// SciPy 1.10.1, the same with poisson.pmf and norm.pdf. Five photons an exposure and a range of 1.5 are what the second points make.
TEST_CASE("photons and signals with a share of outliers have the likelihood of the mixture") {
  std::vector<double> observed = {9, 20}, weight = {4, 4}, mean = {1.2, 1.2};
  CHECK(contaminated_deviance({Kind::poisson, observed, weight}, mean, 0.1) == Approx(2.80743127991291 + 5.852219184098102).epsilon(1e-11));
  observed = {0.3, 1.2, 1.8};
  weight = {0.05, 0.05, 0.05};
  mean = {0.42, 0.4, 1.8};
  const double own = -2.0 * std::log(0.9 + 0.1 / 1.5 * 0.05 * std::sqrt(kTwoPi));
  CHECK(contaminated_deviance({Kind::gaussian, observed, weight}, mean, 0.1) == Approx(5.664619224573629 + 9.569687882903057 + own).epsilon(1e-11));
}

TEST_CASE("scores of contaminated and softened points are the derivatives, and far points say nothing or little") {
  const double shots = 200, odds = 0.02;
  for (const double counts : {0.0, 3.0, 60.0, 199.0, 200.0})
    for (const double mean : {0.02, 0.2, 0.3, 0.34, 0.9}) {
      const double h = 1e-6;
      const auto robust = [&](double m) { return contaminated(binomial(counts, shots, m), odds); };
      const auto soft = [&](double m) { return softened(binomial(counts, shots, m), 1.5); };
      INFO("counts " << counts << " mean " << mean);
      CHECK(robust(mean).score == Approx((robust(mean + h).half_deviance - robust(mean - h).half_deviance) / (2 * h)).epsilon(1e-5).margin(1e-4));
      CHECK(soft(mean).score == Approx((soft(mean + h).half_deviance - soft(mean - h).half_deviance) / (2 * h)).epsilon(1e-5).margin(1e-4));
      CHECK(robust(mean).information >= 0.0);
      CHECK(robust(mean).information <= binomial(counts, shots, mean).information);
    }
  const auto far = contaminated(binomial(0, shots, 0.9), odds);
  CHECK(std::abs(far.score) < 1e-80);
  CHECK(far.information < 1e-80);
  CHECK(far.half_deviance == Approx(std::log1p(odds) - std::log(odds)));
  CHECK(contaminated(binomial(5, shots, 0.0), odds).half_deviance == Approx(std::log1p(odds) - std::log(odds)));
  CHECK(contaminated(binomial(60, shots, 0.3), odds).half_deviance == 0.0);
}

TEST_CASE("a contaminated readout rules out impossible means and nothing else, and leaves out what was not measured") {
  const std::vector<double> observed = {5, 0, 20}, weight = {20, 0, 20}, odds = {0.1, 1, 0.1};
  Readout readout{Kind::binomial, observed, weight, odds};
  double half = 0.0;
  std::vector<double> score(3), information(3);
  CHECK(evaluate(readout, std::vector<double>{0.0, 0.3, 0.0}, half, score, information));
  CHECK(half == Approx(2.0 * (std::log1p(0.1) - std::log(0.1))));
  CHECK(score == std::vector<double>{0, 0, 0});
  CHECK_FALSE(evaluate(readout, std::vector<double>{1.1, 0.3, 0.9}, half, {}, {}));
  CHECK_FALSE(evaluate(readout, std::vector<double>{std::nan(""), 0.3, 0.9}, half, {}, {}));
  readout.odds = {};
  CHECK_FALSE(evaluate(readout, std::vector<double>{0.0, 0.3, 0.9}, half, {}, {}));
}

// SciPy 1.10.1: betabinom.logpmf(k, n, p s, (1-p) s) with s = (n-1)/(phi-1) - 1; nbinom.logpmf(k, mu/(phi-1), 1/phi).
TEST_CASE("dispersed counts are beta-binomial, dispersed photons negative binomial") {
  CHECK(log_dispersed(Kind::binomial, 7, 20, 0.3, 2.5) == Approx(-2.276302731419811).epsilon(1e-11));
  CHECK(log_dispersed(Kind::binomial, 0, 100, 0.02, 4) == Approx(-0.9195326028131356).epsilon(1e-11));
  CHECK(log_dispersed(Kind::binomial, 88, 1000, 0.1, 6) == Approx(-4.109260580137857).epsilon(1e-10));
  CHECK(log_dispersed(Kind::binomial, 1000, 1000, 0.97, 3) == Approx(-16.621663600588903).epsilon(1e-10));
  CHECK(log_dispersed(Kind::poisson, 7, 2, 3.0, 2.0) == Approx(-2.336351955464864).epsilon(1e-11));
  CHECK(log_dispersed(Kind::poisson, 0, 5, 0.3, 1.5) == Approx(-1.2163953243244934).epsilon(1e-11));
  CHECK(log_dispersed(Kind::poisson, 1300, 100, 12.0, 5) == Approx(-6.135162474103652).epsilon(1e-10));
  CHECK(log_own(Kind::binomial, 7, 20) == Approx(-1.6906415341280008).epsilon(1e-12));
  CHECK(log_own(Kind::binomial, 0, 20) == Approx(0.0).margin(1e-12));
  CHECK(log_own(Kind::poisson, 7, 1) == Approx(-1.9037903176782223).epsilon(1e-12));
  CHECK(log_own(Kind::gaussian, 3, 0.05) == Approx(2.076793740349318).epsilon(1e-12));
}

// SciPy 1.10.1: 2 betabinom.sf(k-1, ...).
TEST_CASE("the furthest point is held against its own tail") {
  double counts = 16, shots = 20, mean = 0.2;
  CHECK(furthest_p_value({Kind::binomial, {&counts, 1}, {&shots, 1}}, {&mean, 1}, 2.5) == Approx(0.0010193665083335635).epsilon(1e-9));
  counts = 40, shots = 100, mean = 0.1;
  const double one = 0.0005454456339724079;
  CHECK(furthest_p_value({Kind::binomial, {&counts, 1}, {&shots, 1}}, {&mean, 1}, 4.0) == Approx(one).epsilon(1e-9));
  const std::vector<double> two_counts = {40, 11}, two_shots = {100, 100}, two_means = {0.1, 0.1};
  CHECK(furthest_p_value({Kind::binomial, two_counts, two_shots}, two_means, 4.0) == Approx(1.0 - std::pow(1.0 - one, 2)).epsilon(1e-9));
}

// 2,000 points of a beta-binomial with 3 times the variance: the estimate's own error is near 3 sqrt(2/2000) = 0.1, so half of one is
// left once in a million seeds.
TEST_CASE("the dispersion of scattered counts is found, and 1 for counts that do not scatter") {
  std::mt19937_64 random(5);
  std::vector<double> scattered, plain, shots(2000, 100.0), mean(2000, 0.3);
  const double size = 99.0 / 2.0 - 1.0;
  for (int i = 0; i < 2000; ++i) {
    const double a = std::gamma_distribution<double>(0.3 * size)(random), b = std::gamma_distribution<double>(0.7 * size)(random);
    scattered.push_back(std::binomial_distribution<int>(100, a / (a + b))(random));
    plain.push_back(std::binomial_distribution<int>(100, 0.3)(random));
  }
  CHECK(std::abs(fitted_dispersion({Kind::binomial, scattered, shots}, mean) - 3.0) < 0.5);
  CHECK(fitted_dispersion({Kind::binomial, plain, shots}, mean) < 1.2);
}

TEST_CASE("three outliers are named, and the pulse is what it is without them") {
  for (const unsigned seed : {11u, 12u, 13u}) {
    std::mt19937_64 random(seed);
    Sample clean, sample;
    take_flop(clean, flop(4e-6), even(0.2e-6, 16e-6, 40), 200, random);
    random.seed(seed);
    take_flop(sample, flop(4e-6), even(0.2e-6, 16e-6, 40), 200, random);
    for (const std::size_t i : {7u, 18u, 31u}) sample.observed[i] = sample.observed[i] < 100 ? 193 : 4;
    sample.view();
    FitOptions options;
    options.pulses = {{kPi, 1.0}};
    const auto without = fit_one(clean, known_switch(), options), with = fit_one(sample, known_switch(), options);
    INFO("seed " << seed);
    CHECK(with.quality.distrusted == std::vector<int>{7, 18, 31});
    REQUIRE(with.quality.distrusted_at.size() == 3);
    CHECK(with.quality.distrusted_at[1] == sample.axis[18]);
    CHECK(with.quality.points == 40);
    CHECK(with.quality.p_value > 0.001);
    const auto &a = without.pulse_length_s[0], &b = with.pulse_length_s[0];
    CHECK(std::abs(a.value - b.value) < 0.7 * a.sigma);
    CHECK(b.sigma < 1.3 * a.sigma);
    CHECK(without.quality.distrusted.empty());
    CHECK(without.outlier_share == 0.0);
  }
}

// SciPy 1.10.1, hypergeometric counting: sum over b of comb(m-1, b-1) comb(n-m+1, b) / comb(n, m).
TEST_CASE("distrusted points that stand together are told from strewn ones") {
  const std::vector<double> axis = even(40.0, 1.0, 40), observed(40, 5.0), weight(40, 20.0);
  const Readout readout{Kind::binomial, observed, weight};
  const auto p = [&](const std::vector<int>& distrusted) { return together_p_value(readout, axis, distrusted); };
  CHECK(p({7, 8, 9}) == Approx(38.0 / 9880.0));
  CHECK(p({7, 8, 20}) == Approx((38.0 + 2.0 * 703.0) / 9880.0));
  CHECK(p({7, 15, 20}) == Approx(1.0));
  CHECK(p({7}) == 1.0);
  CHECK(p({10, 11, 12, 13, 14, 15, 16}) < 1e-5);
}

// Coverage 0.95 of 240 scans has a standard deviation of 0.014: fewer than 0.89 happens once in 20,000 seeds. Readings of every kind, one
// point in ten spoilt to anything.
TEST_CASE("95 % intervals hold the truth where one point in ten is spoilt") {
  std::mt19937_64 random(2024);
  std::uniform_real_distribution<double> unit;
  FitOptions options;
  options.pulses = {{kPi, 1.0}};
  int held = 0, known = 0, right = 0, spoilt = 0;
  for (int trial = 0; trial < 240; ++trial) {
    const Truth truth = flop(4e-6 * (0.8 + 0.4 * unit(random)));
    Sample sample;
    take_flop(sample, truth, even(0.2e-6, 16e-6, 50), 100, random);
    const Kind kind = trial % 3 == 0 ? Kind::gaussian : trial % 3 == 1 ? Kind::poisson : Kind::binomial;
    for (std::size_t i = 0; i < sample.axis.size(); ++i) {
      const bool wild = unit(random) < 0.1;
      const double level = wild ? unit(random) : truth.signal(sample.axis[i]);
      if (wild) ++spoilt;
      if (kind == Kind::gaussian) {
        sample.weight[i] = 0.04;
        sample.observed[i] = level + 0.04 * std::normal_distribution<double>()(random);
      } else if (kind == Kind::poisson) {
        sample.observed[i] = std::poisson_distribution<int>(100 * 3.0 * level)(random);
      } else if (wild) {
        sample.observed[i] = std::binomial_distribution<int>(100, level)(random);
      }
    }
    sample.view();
    sample.batch.readout = kind;
    const auto fit = fit_one(sample, known_switch(), options);
    const auto& pulse = fit.pulse_length_s.at(0);
    if (!std::isfinite(pulse.low) || !std::isfinite(pulse.high)) continue;
    ++known;
    right += static_cast<int>(fit.quality.distrusted.size());
    const double best = 0.5 * kTwoPi / truth.rabi;
    held += pulse.low <= best && best <= pulse.high ? 1 : 0;
  }
  CHECK(known >= 237);
  CHECK(held > 0.89 * known);
  // Some spoilt points land on the curve.
  CHECK(right > 0.6 * spoilt);
  CHECK(right < 1.1 * spoilt);
}
