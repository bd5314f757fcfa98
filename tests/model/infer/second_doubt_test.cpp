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

// Two components that are not seen: a pulse length was that of one, with its error. Truth: Rabi's formula (I. I. Rabi, Phys. Rev. 51, 652
// (1937)) and a grid. Seeded.
TEST_CASE("a second component in doubt moves and widens the length of a pulse by what the gain tells") {
  std::mt19937_64 random(31);
  Sample sample;
  take_two(sample, 0.2, 1.3, random);
  Prior prior;
  prior.dead_time = {0.0, 5e-9};
  prior.second = true;
  ObjectiveWorkspace work;
  work.reserve(sample.axis.size());
  const Readout readout = sample.batch.site(0);
  const ScanObjective two(sample.batch, readout, prior, Dynamics::dephasing, {}, false, work);
  Physical start;
  start.generalised = kTwoPi * 1e6;
  start.damping = 1e4;
  start.signal_ground = 0.05;
  start.signal_excited = 0.95;
  start.second_share = 0.2;
  start.second_place = 1.3;
  const Minimum minimum = minimise(two, two.pack(start), two.bounds());
  REQUIRE(minimum.outcome == Outcome::converged);
  const auto heeded = [&](double gain, double limit) {
    Fit fit;
    fit.sampling.span = 3e-6;
    fit.sampling.limit = limit;
    fit.physical.generalised = kTwoPi * 1e6;
    fit.pulse_length_s = {{0.46e-6, 4e-9, 0.452e-6, 0.468e-6, {}}};
    heed_second({two, minimum, gain, 1.0}, kPi1, fit);
    return fit.pulse_length_s[0];
  };
  const double truth = best_length(0.2, 1.3), limit = kTwoPi * 6e6;
  const Estimate two_alone = heeded(60.0, limit), even_odds = heeded(13.0, limit), one = heeded(2.0, limit);
  // Seven standard errors apart were one seed in 1e11.
  CHECK(std::abs(two_alone.value - truth) < 7.0 * two_alone.sigma);
  CHECK(two_alone.sigma < 0.03e-6);
  // Halfway between both: the spread of a mixture of w and 1 - w is sqrt(w (1 - w)) of their distance, at least.
  const double part = (even_odds.value - 0.46e-6) / (two_alone.value - 0.46e-6);
  CHECK(part > 0.1);
  CHECK(part < 0.9);
  CHECK(even_odds.sigma >= 0.999 * std::sqrt(part * (1.0 - part)) * std::abs(two_alone.value - 0.46e-6));
  CHECK(one.value == 0.46e-6);
  CHECK(one.sigma == 4e-9);
  // Above what the sampling tells, a second one is anything's alias.
  CHECK(heeded(13.0, kTwoPi * 0.9e6).value == 0.46e-6);
}
