// SPDX-License-Identifier: Apache-2.0
#include "tests/campaign/draws.hpp"

#include <algorithm>
#include <cmath>

#include "model/quantity/constants.hpp"

namespace halfturn::campaign {
namespace {

using constants::kPi;
using constants::kTwoPi;

constexpr double kDefaultDeadTime = 100e-9;  // the sigma that a configuration without `switching` allows for

bool decided(Random& random, Stated stated) {
  const bool coin = chance(random, 0.5);
  return stated == Stated::either ? coin : stated == Stated::yes;
}

/// Contrast of either sign, floors from 0 to 0.5 as far as the probabilities allow.
void draw_readout(Random& random, const Ranges& ranges, Case& into) {
  const double contrast = uniform(random, ranges.contrast_low, ranges.contrast_high);
  const double lower = uniform(random, 0, std::min(0.5, 1 - contrast));
  const bool negative = chance(random, 0.3);
  into.truth.ground = negative ? lower + contrast : lower;
  into.truth.excited = negative ? lower : lower + contrast;
  if (decided(random, ranges.contrast)) {
    const double sigma = log_uniform(random, 0.003, 0.03);
    into.drive.contrast = infer::Known{into.truth.excited - into.truth.ground + sigma * normal(random), sigma};
  }
  if (decided(random, ranges.contrast)) {
    const double sigma = log_uniform(random, 0.003, 0.03);
    into.drive.floor = infer::Known{into.truth.ground + sigma * normal(random), sigma};
  }
}

/// A dead time within what is known of it: stated to 0.1 to 2 % of `unit_s`, or the default where that is no more.
void draw_dead_time(Random& random, Stated stated, double unit_s, Case& into) {
  const bool wanted = decided(random, stated);
  const double part = log_uniform(random, 0.001, 0.02), z = normal(random);
  const bool by_default = stated != Stated::yes && kDefaultDeadTime < 0.02 * unit_s && !wanted;
  const double sigma = by_default ? kDefaultDeadTime : part * unit_s;
  into.truth.dead_time = sigma * z;
  if (!by_default) into.drive.dead_time = infer::Known{0, sigma};
}

void add_pulses(Random& random, Case& into) {
  const auto add = [&](const char* name, double angle) {
    recalibrate::Pulse pulse;
    pulse.name = name;
    pulse.angle_rad = angle;
    pulse.length_s = std::abs(best_pulse(into.truth, angle)) * uniform(random, 0.8, 1.2);
    pulse.minimum = 0.01 * pulse.length_s;
    pulse.maximum = 100 * pulse.length_s;
    into.drive.pulses.push_back(pulse);
  };
  add("pi", kPi);
  add("half", kPi / 2);
}

/// Where the frequency must lie, without an alias of an even grid in it.
void state_expect(Random& random, const Plan& plan, Case& into) {
  const double low = uniform(random, 0.3, 0.85), high = uniform(random, 1.2, 3);
  if (into.drive.expect || !decided(random, plan.ranges.expect)) return;
  const double rabi = into.truth.generalised();
  const double sampling = kTwoPi * static_cast<double>(plan.points - 1) / plan.span_s;
  into.drive.expect = infer::Expected{low * rabi, std::min(high * rabi, 0.95 * (sampling - rabi))};
}

double drawn_counts(Random& random, double shots, double bright, double overdispersion) {
  double p = std::clamp(bright, 0.0, 1.0);
  if (overdispersion > 1 && p > 0 && p < 1) {
    // Beta-binomial: variance n p (1-p) (1 + (n-1)/(size+1)).
    const double size = (shots - 1) / (overdispersion - 1) - 1;
    const double a = std::gamma_distribution<double>(std::max(p * size, 1e-3))(random);
    const double b = std::gamma_distribution<double>(std::max((1 - p) * size, 1e-3))(random);
    p = a + b > 0 ? a / (a + b) : p;
  }
  return static_cast<double>(std::binomial_distribution<int>(static_cast<int>(shots), p)(random));
}

/// What a spoilt point reads: anything, or no light.
double outlier(Random& random, const Apparatus& apparatus, bool dark) {
  const double anything = uniform(random, 0, 1);
  return dark ? apparatus.ground : anything;
}

void axis_to_scan(Case& into, std::vector<double> axis, double shots) {
  into.scan.drive = into.drive.name = "drive";
  into.scan.weight = {std::vector<double>(axis.size(), shots)};
  into.scan.observed = {std::vector<double>(axis.size(), 0.0)};
  into.scan.axis = std::move(axis);
}

}  // namespace

double uniform(Random& random, double low, double high) { return std::uniform_real_distribution<double>(low, high)(random); }
double log_uniform(Random& random, double low, double high) { return std::exp(uniform(random, std::log(low), std::log(high))); }
double normal(Random& random) { return std::normal_distribution<double>()(random); }
bool chance(Random& random, double probability) { return uniform(random, 0, 1) < probability; }
double either_sign(Random& random, double magnitude) { return chance(random, 0.5) ? magnitude : -magnitude; }

Plan begin_flop(Random& random, const Ranges& ranges, Case& into) {
  Plan plan;
  plan.ranges = ranges;
  plan.points = static_cast<std::size_t>(std::lround(log_uniform(random, ranges.points_low, ranges.points_high)));
  plan.shots = std::round(log_uniform(random, ranges.shots_low, ranges.shots_high));
  into.truth.rabi = kTwoPi * log_uniform(random, 1e3, 10e6);
  const double limit = 0.5 * static_cast<double>(plan.points - 1);  // cycles at the sampling limit
  const double fewest = std::max(ranges.cycles_low, ranges.limit_low * limit);
  const double cycles = log_uniform(random, fewest, std::max(fewest * 1.001, std::min(ranges.cycles_high, ranges.limit_high * limit)));
  plan.span_s = cycles * kTwoPi / into.truth.rabi;
  draw_readout(random, ranges, into);
  draw_dead_time(random, ranges.dead_time, kTwoPi / into.truth.rabi, into);
  return plan;
}

std::vector<double> flop_axis(Random& random, Grid grid, std::size_t points, double span_s) {
  std::vector<double> axis(points);
  const double step = span_s / static_cast<double>(points - 1);
  const double start = chance(random, 0.5) ? 0.0 : step;
  for (std::size_t i = 0; i < points; ++i) axis[i] = start + step * static_cast<double>(i);
  if (grid == Grid::random) {
    for (std::size_t i = 1; i + 1 < points; ++i) axis[i] = uniform(random, start, start + span_s);
    std::sort(axis.begin(), axis.end());
  } else if (grid == Grid::geometric) {
    const double first = span_s * log_uniform(random, 0.01, 0.2);
    for (std::size_t i = 0; i < points; ++i)
      axis[i] = first * std::pow((span_s + first) / first, static_cast<double>(i) / static_cast<double>(points - 1));
  } else if (grid == Grid::gapped) {
    const auto gap = static_cast<std::ptrdiff_t>(std::lround(uniform(random, 0.1, 0.4) * static_cast<double>(points)));
    const auto at = static_cast<std::ptrdiff_t>(std::lround(uniform(random, 1, static_cast<double>(points) - static_cast<double>(gap) - 1)));
    axis.erase(axis.begin() + at, axis.begin() + at + gap);
  } else if (grid == Grid::first_missing) {
    const double shift = step * std::round(uniform(random, 1, 0.5 * static_cast<double>(points)));
    for (double& length : axis) length += shift;
  }
  return axis;
}

void finish_flop(Random& random, const Plan& plan, Case& into) {
  into.scan.axis_kind = wire::AxisKind::duration;
  state_expect(random, plan, into);
  add_pulses(random, into);
  axis_to_scan(into, flop_axis(random, plan.ranges.grid, plan.points, plan.span_s), plan.shots);
  count(random, plan, into);
}

Plan begin_line(Random& random, const Ranges& ranges, double area_low, double area_high, Case& into) {
  Plan plan;
  plan.ranges = ranges;
  plan.points = static_cast<std::size_t>(std::lround(log_uniform(random, ranges.points_low, ranges.points_high)));
  plan.shots = std::round(log_uniform(random, ranges.shots_low, ranges.shots_high));
  auto& truth = into.truth;
  truth.line = true;
  truth.rabi = kTwoPi * log_uniform(random, 1e3, 10e6);
  const double length = log_uniform(random, area_low, area_high) * kPi / truth.rabi;
  draw_readout(random, ranges, into);
  draw_dead_time(random, ranges.dead_time, length, into);
  truth.pulse_s = length + truth.dead_time;
  return plan;
}

void finish_line(Random& random, const Plan& plan, double offset, double centre, double half_width, Case& into) {
  const double width = line_width(into.truth);
  into.truth.detuning = offset * width;
  into.truth.second_detuning = into.truth.detuning + into.truth.second_detuning * width;
  into.scan.axis_kind = wire::AxisKind::detuning;
  into.scan.pulse_s = into.truth.pulse_s;
  Apparatus on_line = into.truth;
  on_line.line = false;
  on_line.detuning = on_line.second_weight = 0;
  std::swap(on_line, into.truth);
  add_pulses(random, into);
  std::swap(on_line, into.truth);
  into.width = width;
  std::vector<double> axis(plan.points);
  for (std::size_t i = 0; i < plan.points; ++i) {
    const double place = 2 * static_cast<double>(i) / static_cast<double>(plan.points - 1) - 1;
    axis[i] = (offset + centre + half_width * place) * width / kTwoPi;
  }
  axis_to_scan(into, std::move(axis), plan.shots);
  count(random, plan, into);
}

void count(Random& random, const Plan& plan, Case& into) {
  auto& axis = into.scan.axis;
  const auto points = axis.size();
  into.outlier_share = plan.outliers;
  into.overdispersion = plan.overdispersion;
  std::vector<double> at = axis;
  if (into.truth.line)
    for (double& detuning : at) detuning *= kTwoPi;
  mean_population(into.truth, at, into.expected);
  for (double& p : into.expected) p = into.truth.ground + (into.truth.excited - into.truth.ground) * p;
  const bool dark = chance(random, 0.5);
  for (std::size_t i = 0; i < points; ++i) {
    double bright = into.expected[i];
    if (plan.drift != 0) {
      Apparatus then = into.truth;
      then.rabi *= 1 + plan.drift * (static_cast<double>(i) / static_cast<double>(points - 1) - 0.5);
      bright = then.ground + (then.excited - then.ground) * population(then, {}, at[i]);
    }
    if (plan.outliers > 0 && chance(random, plan.outliers)) bright = outlier(random, into.truth, dark);
    // Each shot has a member of its own, so the counts of an ensemble are binomial about its mean as well.
    into.scan.observed[0][i] = drawn_counts(random, plan.shots, bright, plan.overdispersion);
  }
}

void count_given(Random& random, const Plan& plan, std::vector<double> bright, Case& into) {
  into.expected = std::move(bright);
  for (std::size_t i = 0; i < into.expected.size(); ++i)
    into.scan.observed[0][i] = drawn_counts(random, plan.shots, into.expected[i], 1.0);
}

}  // namespace halfturn::campaign
