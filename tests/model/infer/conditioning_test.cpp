// SPDX-License-Identifier: Apache-2.0
#include "model/infer/conditioning.hpp"

#include <algorithm>

#include "tests/model/infer/fit_samples.hpp"
#include "tests/support/catch.hpp"

using namespace halfturn;
using namespace halfturn::infer;
using namespace halfturn::tests;
using constants::kPi;
using constants::kTwoPi;

namespace {

Prior under(std::initializer_list<Dynamics> candidates, double dead_time_sigma = 0.0) {
  Prior prior;
  prior.dead_time = {0.0, dead_time_sigma};
  prior.candidates = DynamicsSet::none();
  for (const auto candidate : candidates) prior.candidates.add(candidate);
  return prior;
}

bool has(const Conditioning& of, std::string_view name) { return std::count(of.at_bound.begin(), of.at_bound.end(), name) == 1; }

bool between(const Conditioning& of, std::string_view a, std::string_view b) { return (of.one == a && of.other == b) || (of.one == b && of.other == a); }

}  // namespace

// By hand, about a line y = a + b x: information n [[1, m], [m, s]] of mean m and mean square s, scaled off-diagonal r = m / sqrt(s), so
// the condition is (1 + r) / (1 - r) and the correlation of the two -r. A flop whose floor and contrast alone are told is such a line in
// the population; the frequency is told a thousand times better by many cycles at few places.
TEST_CASE("floor and contrast of a flop are as correlated as a line's two coefficients") {
  Sample sample;
  const double rabi = kTwoPi * 100e3;
  std::mt19937_64 random(5);
  double m = 0.0, s = 0.0;
  constexpr int kPoints = 400;
  for (int i = 0; i < kPoints; ++i) {
    const double t = 1e-6 * (0.05 + 0.5 * i), p = std::pow(std::sin(0.5 * rabi * t), 2);
    sample.axis.push_back(t);
    sample.observed.push_back(1.0 + 2.0 * p + 0.05 * std::normal_distribution<double>()(random));
    m += p / kPoints;
    s += p * p / kPoints;
  }
  sample.weight.assign(sample.axis.size(), 0.05);
  sample.view();
  sample.batch.readout = Readout::Kind::gaussian;
  const Fit fit = fit_one(sample, under({Dynamics::undamped}));
  const auto& found = fit.quality.conditioning;
  const double r = m / std::sqrt(s);
  CHECK(between(found, "floor", "contrast"));
  CHECK(found.correlation == Approx(-r).epsilon(0.01));
  CHECK(found.condition == Approx((1.0 + r) / (1.0 - r)).epsilon(0.02));
  CHECK(found.at_bound.empty());
}

TEST_CASE("a short flop with a free dead time cannot tell it from the Rabi frequency, a longer one can") {
  std::mt19937_64 random(6);
  Truth truth;
  truth.rabi = kTwoPi * 100e3;
  truth.floor = 0.1;
  truth.contrast = 0.8;
  double before = 1.0;
  for (const double cycles : {1.2, 3.0, 8.0}) {
    Sample sample;
    take_flop(sample, truth, even(0.0, cycles * 10e-6, 60), 200, random);
    const auto found = fit_one(sample, under({Dynamics::undamped}, 2e-6)).quality.conditioning;
    INFO(cycles << " cycles: " << found.one << ", " << found.other << " " << found.correlation);
    // A later start with a faster oscillation looks alike.
    CHECK(between(found, "rabi_hz", "dead_time_s"));
    CHECK(found.correlation > 0.7);
    CHECK(found.condition > 4.0);
    CHECK(found.correlation < before);
    before = found.correlation;
  }
}

TEST_CASE("what lies at a bound is named, and left out of the condition") {
  std::mt19937_64 random(7);
  Truth truth;
  truth.rabi = kTwoPi * 100e3;
  int at_bound = 0;
  for (int i = 0; i < 40; ++i) {
    Sample sample;
    take_flop(sample, truth, even(0.0, 30e-6, 40), 100, random);
    const Fit fit = fit_one(sample, under({Dynamics::dephasing}));
    const bool bound = fit.physical.damping == 0.0;
    CHECK(has(fit.quality.conditioning, "dephasing_s") == bound);
    CHECK((fit.dephasing_s.why == "the best value is at its bound") == bound);
    CHECK(std::isfinite(fit.quality.conditioning.condition));
    at_bound += bound ? 1 : 0;
  }
  // Half of undamped flops ask for a negative damping: 5 or fewer, or 35 or more, of 40 in one of 1e6.
  CHECK(at_bound > 5);
  CHECK(at_bound < 35);
  truth.floor = 0.0;
  truth.contrast = 1.0;
  Sample whole;
  take_flop(whole, truth, even(0.0, 30e-6, 31), 50, random);  // 0 and pi among the lengths: readings of 0 and of 50
  const auto found = fit_one(whole, under({Dynamics::undamped})).quality.conditioning;
  CHECK(has(found, "floor"));
  CHECK(has(found, "contrast"));
}

// Why no caution comes with a strong correlation: the intervals already hold what it costs.
TEST_CASE("intervals hold the truth as often where two parameters are hardly told apart") {
  std::mt19937_64 random(8);
  std::uniform_real_distribution<double> uniform(0.0, 1.0);
  int strong = 0, held = 0;
  for (int i = 0; i < 400; ++i) {
    Truth truth;
    truth.rabi = kTwoPi * 100e3;
    truth.dead_time = 500e-9 * std::normal_distribution<double>()(random);
    truth.floor = 0.1 + 0.1 * uniform(random);
    truth.contrast = 0.7;
    Sample sample;
    take_flop(sample, truth, even(2e-6, 10e-6 * (1.2 + 0.6 * uniform(random)), 40), 100, random);
    FitOptions options;
    options.pulses = {{kPi, 1.0}};
    const Fit fit = fit_one(sample, under({Dynamics::undamped}, 500e-9), options);
    REQUIRE(fit.outcome == FitOutcome::fitted);
    if (!(std::abs(fit.quality.conditioning.correlation) > 0.8)) continue;
    ++strong;
    const double length = truth.dead_time + kPi / truth.rabi;
    held += fit.pulse_length_s[0].low <= length && length <= fit.pulse_length_s[0].high ? 1 : 0;
  }
  INFO(held << " of " << strong);
  REQUIRE(strong > 150);
  // Four sigma of a binomial at 95 %: by chance in one of 3e4.
  CHECK(held > 0.95 * strong - 4.0 * std::sqrt(0.05 * 0.95 * strong));
}
