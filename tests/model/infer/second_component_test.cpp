// SPDX-License-Identifier: Apache-2.0
#include "model/infer/second_component.hpp"

#include <algorithm>
#include <cmath>
#include <random>

#include "tests/model/infer/fit_samples.hpp"
#include "tests/support/catch.hpp"

using namespace halfturn;
using namespace halfturn::infer;
using namespace halfturn::tests;
using constants::kPi;
using constants::kTwoPi;

namespace {

const FitOptions kPulses = [] {
  FitOptions options;
  options.pulses = {{kPi, 1.0}, {kPi / 2, 1.0}};
  return options;
}();

Prior known_switch() {
  Prior prior;
  prior.dead_time = {0.0, 20e-9};
  return prior;
}

/// A flop of two components by Rabi's formula (I. I. Rabi, Phys. Rev. 51, 652 (1937)), 1 us a period of the first.
void take_two(Sample& sample, double share, double ratio, int points, int shots, std::mt19937_64& random) {
  Truth first, second;
  first.rabi = kTwoPi * 1e6;
  second.rabi = ratio * first.rabi;
  take_flop(sample, first, even(0.0, 6e-6, points), shots, random);
  for (std::size_t i = 0; i < sample.axis.size(); ++i) {
    const double bright = (1.0 - share) * first.signal(sample.axis[i]) + share * second.signal(sample.axis[i]);
    sample.observed[i] = std::binomial_distribution<int>(shots, bright)(random);
  }
}

/// Two lines of a pi pulse of 10 us, the second `depth` as deep and so far above the first (rad/s).
void take_two_lines(Sample& sample, double depth, double apart, std::mt19937_64& random) {
  Truth truth;
  truth.rabi = kPi / 10e-6;
  take_line(sample, truth, 0.0, 10e-6, even(-kTwoPi * 300e3, kTwoPi * 300e3, 61), 200, random);
  for (std::size_t i = 0; i < sample.axis.size(); ++i) {
    Truth first = truth, second = truth;
    first.detuning = sample.axis[i];
    second.detuning = sample.axis[i] - apart;
    const double bright = first.signal(10e-6) + depth * (second.signal(10e-6) - second.floor) * (1.0 - (first.signal(10e-6) - first.floor));
    sample.observed[i] = std::binomial_distribution<int>(200, std::clamp(bright, 0.0, 1.0))(random);
  }
}

}  // namespace

// Central differences of the objective's own value: independent of the derivatives that are checked.
TEST_CASE("gradients with a second component agree with differences") {
  std::mt19937_64 random(3);
  for (const bool line : {false, true}) {
    Sample sample;
    if (line) take_two_lines(sample, 0.6, kTwoPi * 120e3, random);
    else take_two(sample, 0.3, 1.2, 40, 100, random);
    Prior prior = known_switch();
    prior.second = true;
    if (!line) prior.detuning = Known{0.0, kTwoPi * 50e3};
    ObjectiveWorkspace work;
    work.reserve(sample.axis.size());
    const Readout readout = sample.batch.site(0);
    for (const Dynamics dynamics : {Dynamics::undamped, Dynamics::dephasing, Dynamics::decay, Dynamics::spread, Dynamics::doppler}) {
      const ScanObjective objective(sample.batch, readout, prior, dynamics, {}, false, work);
      Physical at;
      at.generalised = line ? kTwoPi * 52e3 : kTwoPi * 1.02e6;
      at.detuning_square = line ? 0.0 : std::pow(kTwoPi * 40e3, 2);
      at.line_offset = kTwoPi * 3e3;
      at.damping = line ? 1e4 : 3e4;
      at.breadth = dynamics == Dynamics::spread ? 0.0025 : std::pow(0.1 * at.generalised, 2);
      at.signal_ground = 0.07;
      at.signal_excited = 0.9;
      at.second_share = 0.25;
      at.second_place = line ? kTwoPi * 110e3 : 1.22;
      const Vector x = objective.pack(at);
      double value = 0.0;
      Vector gradient;
      REQUIRE(objective.evaluate(x, value, &gradient, nullptr));
      for (Eigen::Index a = 0; a < x.size(); ++a) {
        const double step = 1e-5 * std::max(std::abs(x[a]), a == objective.layout().dead_time ? 1e-7 : 1e-3);
        Vector low = x, high = x;
        low[a] -= step;
        high[a] += step;
        double below = 0.0, above = 0.0;
        REQUIRE(objective.evaluate(low, below, nullptr, nullptr));
        REQUIRE(objective.evaluate(high, above, nullptr, nullptr));
        INFO((line ? "line " : "flop ") << name(dynamics) << ", parameter " << a);
        CHECK(gradient[a] * step == Approx(0.5 * (above - below)).epsilon(1e-3).margin(1e-5));
      }
    }
  }
}

// A fine grid of the definition: cosines alone.
TEST_CASE("the best pulse of two components is where their mean is turned best") {
  for (const double share : {0.0, 0.1, 0.3, 0.45})
    for (const double ratio : {0.7, 0.95, 1.2, 1.4}) {
      const double found = best_pulse_of_two(2.0, share, ratio, kPi);
      double best = 0.0, most = -2.0;
      for (double t = 0.25 * kPi; t <= kPi; t += 2e-5) {
        const double turned = (1.0 - share) * std::cos(2.0 * t - kPi) + share * std::cos(2.0 * ratio * t - kPi);
        if (turned > most) {
          most = turned;
          best = t;
        }
      }
      CHECK(std::abs(found - best) < 1e-4 * best);
    }
}

// Seeded. Counted: the campaign saw none in 574 flops and 107 lines (second_component.cpp); were it 4 in 1000, of 300 more than 4 would come
// once in 130 seeds.
TEST_CASE("flops and lines of one component are hardly ever taken for two") {
  std::mt19937_64 random(20);
  std::uniform_real_distribution<double> period(0.8e-6, 3e-6), offset(-kTwoPi * 60e3, kTwoPi * 60e3);
  int seen = 0;
  for (int i = 0; i < 150; ++i) {
    Sample flop, line;
    Truth truth;
    truth.rabi = kTwoPi / period(random);
    truth.decay = i % 2 == 0 ? 0.0 : 0.02 * truth.rabi;
    take_flop(flop, truth, even(0.0, 6e-6, 40), 100, random);
    seen += fit_one(flop, known_switch(), kPulses).quality.second.has_value();
    Truth on_line;
    on_line.rabi = kPi / 10e-6;
    take_line(line, on_line, offset(random), 10e-6, even(-kTwoPi * 200e3, kTwoPi * 200e3, 41), 100, random);
    seen += fit_one(line, known_switch()).quality.second.has_value();
  }
  CHECK(seen <= 4);
}

// The truth is in the draw. The gain found at ratio 0.8 is 431, against 12 at which one counts as seen.
TEST_CASE("a second component is seen, and where it is") {
  std::mt19937_64 random(21);
  for (const double ratio : {0.8, 1.25}) {
    Sample sample;
    take_two(sample, 0.2, ratio, 60, 300, random);
    const auto fit = fit_one(sample, known_switch(), kPulses);
    REQUIRE(fit.outcome == FitOutcome::fitted);
    REQUIRE(fit.quality.second);
    const auto& seen = *fit.quality.second;
    CHECK(seen.first / (kTwoPi * 1e6) == Approx(1.0).epsilon(0.02));
    CHECK(seen.second / seen.first == Approx(ratio).epsilon(0.03));
    CHECK(seen.share == Approx(0.2).margin(0.06));
  }
}

TEST_CASE("a second line is seen, and where it is") {
  std::mt19937_64 random(22);
  Sample sample;
  take_two_lines(sample, 0.5, kTwoPi * 130e3, random);
  const auto fit = fit_one(sample, known_switch());
  REQUIRE(fit.outcome == FitOutcome::fitted);
  REQUIRE(fit.quality.second);
  CHECK(std::abs(fit.quality.second->first) < kTwoPi * 8e3);
  CHECK(std::abs(fit.quality.second->second - kTwoPi * 130e3) < kTwoPi * 12e3);
  CHECK(fit.quality.second->share == Approx(0.5).margin(0.12));
}
