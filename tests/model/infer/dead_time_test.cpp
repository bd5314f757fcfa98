// SPDX-License-Identifier: Apache-2.0
#include "model/infer/dead_time.hpp"

#include "tests/model/infer/fit_samples.hpp"
#include "tests/support/catch.hpp"

using namespace halfturn;
using namespace halfturn::infer;
using namespace halfturn::tests;
using constants::kTwoPi;

namespace {

Prior switched(double mean, double sigma) {
  Prior prior;
  prior.dead_time = {mean, sigma};
  prior.candidates = DynamicsSet::none();
  prior.candidates.add(Dynamics::undamped);
  return prior;
}

Truth late() {
  Truth truth;
  truth.rabi = kTwoPi * 125e3;
  truth.dead_time = 60e-9;
  return truth;
}

}  // namespace

TEST_CASE("without a normal prior the other half of a product is left") {
  // Product of N(60, 20) and N(0, 30): variance 1 / (1/400 + 1/900), mean 900 / 1300 of 60.
  const double variance = 1.0 / (1.0 / 400 + 1.0 / 900), mean = 60.0 * 900 / 1300;
  // The contaminated prior at z = mean / 30 = 1.38: its slope over z is a little less than 1.
  const double curvature = contaminated(mean / 30.0).curvature;
  const double whole = 1.0 / (1.0 / 400 + curvature / 900), at = 60.0 / 400 * whole;
  const auto points = without_prior(mean, variance, {0.0, 30.0}, 1.0);
  CHECK(points.mean == Approx(60.0).epsilon(0.05));
  const auto exact = without_prior(at, whole, {0.0, 30.0}, 1.0);
  const double held = contaminated(at / 30.0).curvature;
  CHECK(exact.sigma == Approx(1.0 / std::sqrt(1.0 / whole - held / 900)));
  CHECK(without_prior(mean, variance, {0.0, 30.0}, 4.0).sigma == Approx(2.0 * points.sigma));
  CHECK(std::isnan(without_prior(0.0, 908.9, {0.0, 30.0}, 1.0).sigma));
  CHECK(std::isnan(without_prior(0.0, 400.0, {0.0, 0.0}, 1.0).sigma));
}

TEST_CASE("what the points say of the dead time does not depend on its prior") {
  std::mt19937_64 random(17);
  for (int i = 0; i < 12; ++i) {
    Sample sample;
    take_flop(sample, late(), even(0.4e-6, 16e-6, 40), 100, random);
    const Fit free = fit_one(sample, switched(0.0, 10e-6));
    const Fit held = fit_one(sample, switched(30e-9, 40e-9));
    const Fit tight = fit_one(sample, switched(60e-9, 8e-9));
    for (const Fit* fit : {&held, &tight}) {
      if (fit->quality.scatter != free.quality.scatter || fit->quality.dead_time_released) continue;
      // The likelihood's cubic terms are what is left.
      CHECK(std::abs(fit->dead_time_points.mean - free.dead_time_points.mean) < 0.2 * free.dead_time_points.sigma);
      CHECK(fit->dead_time_points.sigma == Approx(free.dead_time_points.sigma).epsilon(0.1));
    }
    CHECK(free.dead_time_points.mean == Approx(free.dead_time_s.value).margin(0.01 * free.dead_time_s.sigma));
  }
}

TEST_CASE("a scan that contradicts the dead time of the scans before is fitted as configured") {
  std::mt19937_64 random(18);
  Sample sample;
  take_flop(sample, late(), even(0.4e-6, 16e-6, 40), 100, random);
  Prior prior = switched(400e-9, 5e-9);
  prior.dead_time_otherwise = Known{0.0, 100e-9};
  const Fit doubted = fit_one(sample, prior);
  const Fit configured = fit_one(sample, switched(0.0, 100e-9));
  CHECK(doubted.quality.dead_time_doubted);
  CHECK_FALSE(doubted.quality.dead_time_released);
  CHECK(doubted.rabi.value == Approx(configured.rabi.value).epsilon(1e-6));
  CHECK(doubted.dead_time_s.sigma == Approx(configured.dead_time_s.sigma).epsilon(1e-3));
  prior.dead_time = {60e-9, 5e-9};
  const Fit believed = fit_one(sample, prior);
  CHECK_FALSE(believed.quality.dead_time_doubted);
  CHECK(believed.dead_time_s.sigma < 5.3e-9);
}
