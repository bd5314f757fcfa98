// SPDX-License-Identifier: Apache-2.0
#include "tests/campaign/undecidable.hpp"

#include <cmath>

#include "model/quantity/constants.hpp"
#include "tests/campaign/draws.hpp"
#include "tests/support/catch.hpp"

using namespace halfturn;
using namespace halfturn::campaign;
using constants::kPi;
using constants::kTwoPi;

namespace {

/// An undamped pi pulse's line in the middle of a window of two widths to either side.
Case line_of(double shots, double contrast) {
  Case c;
  c.truth.line = true;
  c.truth.rabi = kTwoPi * 50e3;
  c.truth.pulse_s = kPi / c.truth.rabi;
  c.truth.ground = 0.1;
  c.truth.excited = 0.1 + contrast;
  c.drive.dead_time = infer::Known{0.0, 20e-9};
  Plan plan;
  plan.points = 41;
  plan.shots = shots;
  Random random(1);
  finish_line(random, plan, 0.0, 0.0, 2.0, c);
  return c;
}

}  // namespace

TEST_CASE("a gate's threshold is passed with two standard deviations to spare") {
  // The deviance between two shapes is normal about the gap g with variance 4 g (the log likelihood ratio of a normal mean): at
  // g = 25 + 2 * 2 sqrt(g), which is 54.54 for 25.
  const double gap = gap_for(25.0);
  CHECK(gap - 2.0 * 2.0 * std::sqrt(gap) == Approx(25.0));
  CHECK(gap == Approx(54.54).margin(0.01));
}

TEST_CASE("gaps grow with the shots, and a scan near the edge or without contrast cannot be decided") {
  const Case few = line_of(50, 0.6), many = line_of(500, 0.6);
  const Gaps little = gaps(few), much = gaps(many);
  // Twice the Kullback-Leibler distance goes with the shots, but for what priors hold: by definition.
  CHECK(much.flat == Approx(10.0 * little.flat).epsilon(0.02));
  CHECK(much.monotone == Approx(10.0 * little.monotone).epsilon(0.02));
  CHECK(decidable(many, much, 0.0));
  CHECK(!decidable(many, much, 2.0 * many.truth.rabi));  // the bound reaches beyond the window
  const Case none = line_of(50, 0.01);
  CHECK(!decidable(none, gaps(none), 0.0));
}
