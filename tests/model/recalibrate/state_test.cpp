// SPDX-License-Identifier: Apache-2.0
// The tracker: a scalar Kalman filter of a random walk (R. E. Kalman, J. Basic Eng. 82, 35 (1960)).
#include "model/recalibrate/state.hpp"

#include <cmath>
#include <random>

#include "tests/support/catch.hpp"

using namespace halfturn::recalibrate;

namespace {

constexpr Time kMinute = 60'000'000'000;

FitEvent event(Effect effect, double value, double sigma, Time at) {
  FitEvent e;
  e.at = at;
  e.effect = effect;
  e.value = value;
  e.sigma = sigma;
  e.noise_floor = kRabiNoise;
  e.span = 10e-6;
  e.spacing = 0.2e-6;
  return e;
}

}  // namespace

TEST_CASE("two scans at one time combine as independent measurements") {
  State state;
  advance(state, event(Effect::first, 1.0, 0.02, 0));
  advance(state, event(Effect::accepted, 1.03, 0.01, 0));
  const auto known = state.rabi.predict(0);
  REQUIRE(known);
  // Weights 1/4 and 1.
  CHECK(known->mean == Approx((0.25 * 1.0 + 1.03) / 1.25));
  CHECK(known->sigma == Approx(0.02 / std::sqrt(5.0)));
}

TEST_CASE("predictions widen with time and never below the floor") {
  State state;
  advance(state, event(Effect::first, 1.0, 0.001, 0));
  const double now = state.rabi.predict(0)->sigma, later = state.rabi.predict(60 * kMinute)->sigma;
  CHECK(later * later - now * now >= kRabiNoise * kRabiNoise);
  CHECK(state.rabi.predict(-60 * kMinute)->sigma == now);
}

TEST_CASE("a ramp is followed: the noise estimate grows until the filter keeps up") {
  State state;
  const double a_scan = 0.004;  // per five minutes: 5 % an hour
  double worst = 0.0;
  for (int i = 0; i < 60; ++i) {
    const Time at = 5 * kMinute * i;
    advance(state, event(i == 0 ? Effect::first : Effect::accepted, a_scan * i, 0.003, at));
    if (i > 20) worst = std::max(worst, std::abs(state.rabi.predict(at)->mean - a_scan * i));
  }
  // Less than two scans behind, 25 mrad of a pi pulse.
  CHECK(worst < 0.008);
}

TEST_CASE("a quiet drive is averaged over many scans") {
  std::mt19937_64 random(3);
  std::normal_distribution<double> normal(0.0, 0.01);
  State state;
  double squares = 0.0;
  int counted = 0;
  for (int i = 0; i < 400; ++i) {
    advance(state, event(i == 0 ? Effect::first : Effect::accepted, normal(random), 0.01, 5 * kMinute * i));
    if (i < 50) continue;
    squares += state.rabi.mean * state.rabi.mean;
    ++counted;
  }
  // Better than half the error of a single scan; by chance not in 1e6 runs.
  CHECK(std::sqrt(squares / counted) < 0.005);
}

TEST_CASE("a confirmed step restarts the track between the two scans") {
  State state;
  for (int i = 0; i < 5; ++i) advance(state, event(i == 0 ? Effect::first : Effect::accepted, 0.0, 0.01, i * kMinute));
  advance(state, event(Effect::pending, 0.5, 0.01, 6 * kMinute));
  CHECK(state.rabi.mean == Approx(0.0).margin(1e-12));
  REQUIRE(state.rabi_step);
  advance(state, event(Effect::none, 3.0, 0.01, 7 * kMinute));
  REQUIRE(state.rabi_step);
  advance(state, event(Effect::confirmed, 0.52, 0.01, 8 * kMinute));
  CHECK(state.rabi.mean == Approx(0.51));
  CHECK_FALSE(state.rabi_step);
}

TEST_CASE("what the experiment reports is in force, and answers proposals") {
  State state;
  auto fit = event(Effect::first, 1.0, 0.01, 0);
  fit.proposed = true;
  for (int i = 0; i < 3; ++i) advance(state, fit);
  CHECK(state.proposals_unanswered == 3);
  advance(state, AppliedEvent{0, {{"flip", 4.2e-6}}, kAbsent});
  CHECK(state.proposals_unanswered == 0);
  CHECK(state.in_force_s.at("flip") == 4.2e-6);
  CHECK(std::isnan(state.carrier));
}
