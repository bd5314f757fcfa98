// SPDX-License-Identifier: Apache-2.0
// Derivatives of a line by a damping where there is none: closed forms, in vector code.
#include <algorithm>
#include <cmath>
#include <random>
#include <vector>

#include "model/dynamics/two_level.hpp"
#include "tests/support/catch.hpp"

using namespace halfturn::dynamics;

namespace {

struct ByDamping {
  std::vector<double> population, decay, loss, dephasing;
};

ByDamping line(double rabi, const Start& start, const std::vector<double>& detuning, double length_s) {
  const auto n = detuning.size();
  ByDamping by{std::vector<double>(n), std::vector<double>(n), std::vector<double>(n), std::vector<double>(n)};
  Derivatives out;
  out.population = by.population;
  out.by_rate[kByDecay] = by.decay;
  out.by_rate[kByLoss] = by.loss;
  out.by_rate[kByDephasing] = by.dephasing;
  const Rates rates{rabi, 0, 0, 0, 0};
  Status status = Status::not_finite;
  Workspace workspace;
  detuning_scan({&rates, 1}, start, detuning, {&length_s, 1}, out, {&status, 1}, workspace);
  REQUIRE(status == Status::ok);
  return by;
}

}  // namespace

// Source: on resonance w = -exp(-g t/2) (cos l t + g/(2 l) sin l t), l^2 = W^2 - g^2/4, under pure dephasing g (Torrey 1949, case of
// no longitudinal decay), of which the derivative at g = 0 is (t cos W t - sin(W t)/W)/2.
TEST_CASE("dephasing of a resonant pulse to first order") {
  for (const double rabi : {0.3, 1.0, 3.0, 30.0}) {
    const double expected = 0.25 * (std::cos(rabi) - std::sin(rabi) / rabi);
    CHECK(line(rabi, {}, {0.0}, 1.0).dephasing[0] == Approx(expected).margin(1e-12));
  }
}

// The scan over lengths goes another way (modes and series): both agree for every start, readout of the lost, and detuning.
TEST_CASE("derivatives by a damping agree with those of a duration scan") {
  std::mt19937_64 random(5);
  std::uniform_real_distribution<double> uniform(0.0, 1.0);
  double worst = 0.0;
  for (int i = 0; i < 500; ++i) {
    Start start;
    start.prepared = uniform(random) < 0.5 ? Prepared::ground : Prepared::excited;
    start.impurity = 0.3 * uniform(random);
    start.lost_reads = uniform(random) < 0.5 ? LostReads::dark : LostReads::bright;
    const double rabi = std::exp(-2.0 + 6.0 * uniform(random)), detuning = 20.0 * rabi * (uniform(random) - 0.5), length = 1.0;
    const auto by = line(rabi, start, {detuning}, length);
    double decay = 0, loss = 0, dephasing = 0;
    Derivatives out;
    out.by_rate[kByDecay] = {&decay, 1};
    out.by_rate[kByLoss] = {&loss, 1};
    out.by_rate[kByDephasing] = {&dephasing, 1};
    const Rates rates{rabi, detuning, 0, 0, 0};
    Status status = Status::not_finite;
    Workspace workspace;
    duration_scan({&rates, 1}, start, {&length, 1}, {}, out, {&status, 1}, workspace);
    REQUIRE(status == Status::ok);
    worst = std::max({worst, std::abs(by.decay[0] - decay), std::abs(by.loss[0] - loss), std::abs(by.dephasing[0] - dephasing)});
  }
  CHECK(worst < 1e-10);
}
