// SPDX-License-Identifier: Apache-2.0
#include "tests/campaign/line_families.hpp"

#include <algorithm>
#include <cmath>

#include "model/quantity/constants.hpp"
#include "tests/campaign/draws.hpp"

namespace halfturn::campaign::lines {
namespace {

using constants::kTwoPi;

double near_carrier(Random& r) { return uniform(r, -0.33, 0.33); }
double window(Random& r) { return log_uniform(r, 1, 6); }

}  // namespace

void clean(Random& r, Case& c) {
  const Plan plan = begin_line(r, {}, 0.3, 4, c);
  c.true_dynamics = "undamped";
  const double offset = near_carrier(r);
  finish_line(r, plan, offset, -offset, window(r), c);
}
void far(Random& r, Case& c) {
  const Plan plan = begin_line(r, {}, 0.3, 4, c);
  const double half = window(r), offset = uniform(r, -0.8, 0.8) * half;
  finish_line(r, plan, offset, -offset, half, c);
}
void power(Random& r, Case& c) {
  const Plan plan = begin_line(r, {}, 3, 12, c);
  c.truth.dephasing = uniform(r, 2, 6) / c.truth.pulse_s;
  const double offset = near_carrier(r);
  finish_line(r, plan, offset, -offset, log_uniform(r, 1, 4), c);
}
void doppler(Random& r, Case& c) {
  const Plan plan = begin_line(r, {}, 0.3, 2, c);
  c.truth.ensemble.detuning_spread_hz = line_width(c.truth) / kTwoPi * log_uniform(r, 0.2, 2);
  const double offset = near_carrier(r);
  finish_line(r, plan, offset, -offset, log_uniform(r, 1, 4), c);
}
void decay(Random& r, Case& c) {
  const Plan plan = begin_line(r, {}, 0.3, 3, c);
  c.truth.decay = log_uniform(r, 0.3, 10) / c.truth.pulse_s;
  const double offset = near_carrier(r);
  finish_line(r, plan, offset, -offset, log_uniform(r, 1, 4), c);
}
void edge(Random& r, Case& c) {
  const Plan plan = begin_line(r, {}, 0.3, 4, c);
  const double half = window(r), centre = either_sign(r, half + uniform(r, -0.5, 0.1));
  finish_line(r, plan, near_carrier(r), centre, half, c);
}
void beyond(Random& r, Case& c) {
  const Plan plan = begin_line(r, {}, 0.3, 4, c);
  const double half = window(r), offset = either_sign(r, half + uniform(r, 0.2, 1.5));
  finish_line(r, plan, offset, -offset, half, c);
}
void side_lobe(Random& r, Case& c) {
  const Plan plan = begin_line(r, {}, 0.7, 4, c);
  const double half = uniform(r, 0.4, 1.5), offset = either_sign(r, uniform(r, 1.0, 3.5));
  finish_line(r, plan, offset, -offset, half, c);
}
void two(Random& r, Case& c) {
  const Plan plan = begin_line(r, {}, 0.3, 2, c);
  const double half = log_uniform(r, 2, 6);
  c.truth.second_weight = uniform(r, 0.3, 1);
  c.truth.second_detuning = either_sign(r, uniform(r, 1, std::min(half - 0.5, 5.0)));
  const double offset = near_carrier(r);
  finish_line(r, plan, offset, -offset, half, c);
}
void missing(Random& r, Case& c) {
  const Plan plan = begin_line(r, {}, 0.3, 4, c);
  finish_line(r, plan, 0, 0, window(r), c);
  count_given(r, plan, std::vector<double>(plan.points, c.truth.ground), c);
  c.to_be_refused = true;
}

}  // namespace halfturn::campaign::lines
