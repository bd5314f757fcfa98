// SPDX-License-Identifier: Apache-2.0
#include "model/infer/second_doubt.hpp"

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

const FitOptions kPi1 = [] {
  FitOptions options;
  options.pulses = {{kPi, 1.0}};
  return options;
}();

/// Three cycles of two components that few shots hardly tell from one.
void take_two(Sample& sample, double share, double ratio, std::mt19937_64& random) {
  Truth first, second;
  first.rabi = kTwoPi * 1e6;
  second.rabi = ratio * first.rabi;
  take_flop(sample, first, even(0.0, 3e-6, 40), 40, random);
  for (std::size_t i = 0; i < sample.axis.size(); ++i) {
    const double bright = (1.0 - share) * first.signal(sample.axis[i]) + share * second.signal(sample.axis[i]);
    sample.observed[i] = std::binomial_distribution<int>(40, bright)(random);
  }
}

/// The top of a fine grid of the mean of both rotations.
double best_length(double share, double ratio) {
  double best = 0.0, most = -2.0;
  for (double t = 0.3e-6; t < 0.8e-6; t += 2e-11) {
    const double turned = -(1.0 - share) * std::cos(kTwoPi * 1e6 * t) - share * std::cos(ratio * kTwoPi * 1e6 * t);
    if (turned > most) {
      most = turned;
      best = t;
    }
  }
  return best;
}

}  // namespace

// Two components that are not seen: a pulse length of one of them, with the error of one, was off by four of its sigmas. Truth: Rabi's formula
// (I. I. Rabi, Phys. Rev. 51, 652 (1937)) and a grid. Seeded.
TEST_CASE("two components that are in doubt widen the length of a pulse") {
  std::mt19937_64 random(31);
  Prior prior;
  prior.dead_time = {0.0, 5e-9};
  const double truth = best_length(0.2, 1.3);
  int doubted = 0, held = 0;
  for (int i = 0; i < 120; ++i) {
    Sample sample;
    take_two(sample, 0.2, 1.3, random);
    const auto fit = fit_one(sample, prior, kPi1);
    REQUIRE(fit.outcome == FitOutcome::fitted);
    if (fit.quality.second) continue;
    ++doubted;
    held += std::abs(fit.pulse_length_s[0].value - truth) < 2.0 * fit.pulse_length_s[0].sigma;
  }
  INFO(held << " of " << doubted);
  CHECK(doubted >= 20);
  CHECK(held >= 0.6 * doubted);
}
