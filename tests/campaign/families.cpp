// SPDX-License-Identifier: Apache-2.0
#include "tests/campaign/families.hpp"

#include <algorithm>
#include <cmath>

#include "model/quantity/constants.hpp"
#include "tests/campaign/draws.hpp"
#include "tests/campaign/line_families.hpp"

namespace halfturn::campaign {
namespace {

using constants::kPi;
using constants::kTwoPi;

/// A flop of undamped atoms over given ranges.
void undamped(Random& random, const Ranges& ranges, Case& c) {
  const Plan plan = begin_flop(random, ranges, c);
  c.true_dynamics = "undamped";
  finish_flop(random, plan, c);
}

void clean(Random& r, Case& c) { undamped(r, {}, c); }
void few_points(Random& r, Case& c) {
  Ranges ranges;
  ranges.points_low = 8;
  ranges.points_high = 14;
  undamped(r, ranges, c);
}
void few_shots(Random& r, Case& c) {
  Ranges ranges;
  ranges.shots_low = 10;
  ranges.shots_high = 40;
  undamped(r, ranges, c);
}
void on_grid(Random& r, Grid grid, Case& c) {
  Ranges ranges;
  ranges.grid = grid;
  undamped(r, ranges, c);
}
void grid_random(Random& r, Case& c) { on_grid(r, Grid::random, c); }
void grid_geometric(Random& r, Case& c) { on_grid(r, Grid::geometric, c); }
void grid_gapped(Random& r, Case& c) { on_grid(r, Grid::gapped, c); }
void first_missing(Random& r, Case& c) { on_grid(r, Grid::first_missing, c); }

/// A rate that does `log_uniform` 0.1 to 5 in the span of the scan.
double rate_for(Random& r, const Plan& plan) { return log_uniform(r, 0.1, 5) / plan.span_s; }

void damped(Random& r, double Apparatus::*rate, const char* name, Case& c) {
  const Plan plan = begin_flop(r, {}, c);
  c.truth.*rate = rate_for(r, plan);
  c.true_dynamics = name;
  finish_flop(r, plan, c);
}
void decay(Random& r, Case& c) { damped(r, &Apparatus::decay, "decay", c); }
void dephasing(Random& r, Case& c) { damped(r, &Apparatus::dephasing, "dephasing", c); }
void leak(Random& r, Case& c) { damped(r, &Apparatus::loss, "leak", c); }

void combinations(Random& r, Case& c) {
  const Plan plan = begin_flop(r, {}, c);
  const int which = std::uniform_int_distribution<int>(0, 3)(r);
  if (which != 0) c.truth.decay = rate_for(r, plan);
  if (which != 1) c.truth.dephasing = rate_for(r, plan);
  if (which != 2) c.truth.loss = rate_for(r, plan);
  finish_flop(r, plan, c);
}

void spread(Random& r, Case& c) {
  const Plan plan = begin_flop(r, {}, c);
  c.truth.ensemble.rabi_spread = log_uniform(r, 0.01, 0.15);
  finish_flop(r, plan, c);
}
void doppler(Random& r, Case& c) {
  const Plan plan = begin_flop(r, {}, c);
  c.truth.ensemble.detuning_spread_hz = log_uniform(r, 0.05, 0.7) * c.truth.rabi / kTwoPi;
  finish_flop(r, plan, c);
}
void cloud(Random& r, Case& c) {
  const Plan plan = begin_flop(r, {}, c);
  c.truth.ensemble.cloud_ratio = log_uniform(r, 0.05, 0.5);
  c.truth.ensemble.rabi_follows_intensity = chance(r, 0.3);
  finish_flop(r, plan, c);
}
void thermal(Random& r, Case& c) {
  const Plan plan = begin_flop(r, {}, c);
  auto& e = c.truth.ensemble;
  e.mean_phonons = log_uniform(r, 0.3, 30);
  // eta^2 (2 n + 1) below a half: the resolved regime.
  e.lamb_dicke = std::min(log_uniform(r, 0.03, 0.2), std::sqrt(0.5 / (2 * e.mean_phonons + 1)));
  c.drive.motion = {{e.lamb_dicke, 0, 1.0}};
  finish_flop(r, plan, c);
}

/// Detuned by `sigmas` of a carrier uncertainty between `low` and `high` of the coupling.
void detuned(Random& r, Stated contrast, bool within, Case& c) {
  Ranges ranges;
  ranges.contrast = contrast;
  const Plan plan = begin_flop(r, ranges, c);
  const double sigma = c.truth.rabi * (within ? log_uniform(r, 0.05, 0.5) : log_uniform(r, 0.03, 0.12));
  c.truth.detuning = sigma * (within ? std::clamp(normal(r), -2.0, 2.0) : either_sign(r, uniform(r, 3, 6)));
  c.drive.carrier_uncertainty = sigma;
  if (within) c.true_dynamics = "undamped";
  finish_flop(r, plan, c);
}
void detuned_known(Random& r, Case& c) { detuned(r, Stated::yes, true, c); }
void detuned_free(Random& r, Case& c) { detuned(r, Stated::no, true, c); }
void detuned_beyond_known(Random& r, Case& c) { detuned(r, Stated::yes, false, c); }
void detuned_beyond_free(Random& r, Case& c) { detuned(r, Stated::no, false, c); }

void dead_time(Random& r, bool within, Case& c) {
  const Plan plan = begin_flop(r, {}, c);
  const double period = kTwoPi / c.truth.rabi;
  const double sigma = period * (within ? log_uniform(r, 0.01, 0.1) : log_uniform(r, 0.001, 0.02));
  c.drive.dead_time = infer::Known{0, sigma};
  c.truth.dead_time = sigma * (within ? normal(r) : either_sign(r, uniform(r, 4, 10)));
  c.misstated = !within;
  c.true_dynamics = "undamped";
  finish_flop(r, plan, c);
}
void dead_time_within(Random& r, Case& c) { dead_time(r, true, c); }
void dead_time_beyond(Random& r, Case& c) { dead_time(r, false, c); }

void references(Random& r, Case& c) {
  Ranges ranges;
  ranges.contrast = Stated::no;
  undamped(r, ranges, c);
  const double shots = std::round(log_uniform(r, 100, 5000));
  const auto counts = [&](double p) { return static_cast<double>(std::binomial_distribution<int>(static_cast<int>(shots), p)(r)); };
  const double bright = std::max(c.truth.ground, c.truth.excited), dark = std::min(c.truth.ground, c.truth.excited);
  c.scan.references = wire::References{counts(bright), shots, counts(dark), shots};
}

void under_one_cycle(Random& r, Case& c) {
  Ranges ranges;
  ranges.cycles_high = 1;
  undamped(r, ranges, c);
}

/// A flop at a part of the sampling limit, with `expect` between the given frequencies (rad/s, of the sampling rate and the
/// truth's); the axis starts at 0 or one step, so that the aliases fit alike.
Plan at_limit(Random& r, double low, double high, Case& c) {
  Ranges ranges;
  ranges.points_low = 20;
  ranges.limit_low = low;
  ranges.limit_high = high;
  ranges.cycles_high = 1000;
  ranges.expect = Stated::no;
  const Plan plan = begin_flop(r, ranges, c);
  c.true_dynamics = "undamped";
  return plan;
}
double sampling_rate(const Plan& plan) { return kTwoPi * static_cast<double>(plan.points - 1) / plan.span_s; }

void near_limit(Random& r, Case& c) {
  const Plan plan = at_limit(r, 0.8, 0.95, c);
  const double rabi = c.truth.rabi, alias = sampling_rate(plan) - rabi;
  if (chance(r, 0.5)) c.drive.expect = infer::Expected{uniform(r, 0.3, 0.9) * rabi, uniform(r, 0.3, 0.7) * (alias - rabi) + rabi};
  finish_flop(r, plan, c);
}
void alias_outside(Random& r, Case& c) {
  const Plan plan = at_limit(r, 1.1, 1.7, c);
  const double rabi = c.truth.rabi, rate = sampling_rate(plan), alias = rate - rabi;
  c.drive.expect = infer::Expected{rabi - uniform(r, 0.3, 0.8) * (rabi - alias), std::min(1.3 * rabi, 0.97 * (2 * rate - rabi))};
  finish_flop(r, plan, c);
}
void expect_both(Random& r, const Plan& plan, Case& c) {
  const double alias = sampling_rate(plan) - c.truth.rabi;
  c.drive.expect = infer::Expected{uniform(r, 0.3, 0.9) * std::min(c.truth.rabi, alias), uniform(r, 1.05, 1.3) * std::max(c.truth.rabi, alias)};
  c.aliased = true;
}
void alias_inside(Random& r, Case& c) {
  const Plan plan = at_limit(r, 0.5, 1.5, c);
  expect_both(r, plan, c);
  finish_flop(r, plan, c);
}

/// Four flops on geometric grids, which tell the frequency, ten minutes apart; then the even one that does not.
void alias_history(Random& r, Case& c) {
  constexpr wire::Time kBegin = 1'790'000'000'000'000'000, kStep = 600'000'000'000;
  const Plan plan = at_limit(r, 0.5, 1.5, c);
  expect_both(r, plan, c);
  finish_flop(r, plan, c);
  for (int i = 0; i < 4; ++i) {
    Case earlier = c;
    Plan dense = plan;
    dense.points = 60;
    dense.shots = 200;
    earlier.truth.rabi *= 1 + 0.002 * normal(r);
    earlier.scan.axis = flop_axis(r, Grid::geometric, dense.points, uniform(r, 4, 8) * kTwoPi / c.truth.rabi);
    earlier.scan.weight = {std::vector<double>(dense.points, dense.shots)};
    earlier.scan.observed = {std::vector<double>(dense.points, 0.0)};
    earlier.scan.taken_at = kBegin + i * kStep;
    count(r, dense, earlier);
    c.before.push_back(earlier.scan);
  }
  c.scan.taken_at = kBegin + 4 * kStep;
}

void low_contrast(Random& r, Case& c) {
  Ranges ranges;
  ranges.contrast_low = 0.04;
  ranges.contrast_high = 0.15;
  undamped(r, ranges, c);
}
void outliers(Random& r, Case& c) {
  Plan plan = begin_flop(r, {}, c);
  plan.outliers = uniform(r, 0.01, 0.15);
  finish_flop(r, plan, c);
}
void scatter(Random& r, Case& c) {
  Plan plan = begin_flop(r, {}, c);
  plan.overdispersion = std::min(log_uniform(r, 1.3, 6), 0.5 * plan.shots);
  finish_flop(r, plan, c);
}
void drifting(Random& r, Case& c) {
  Plan plan = begin_flop(r, {}, c);
  plan.drift = either_sign(r, log_uniform(r, 0.01, 0.04));
  const bool timed = chance(r, 0.5);
  finish_flop(r, plan, c);
  if (!timed) return;
  for (std::size_t i = 0; i < c.scan.axis.size(); ++i) c.scan.at_s.push_back(static_cast<double>(i) * 0.02 * plan.shots);
}
void two_component(Random& r, Case& c) {
  const Plan plan = begin_flop(r, {}, c);
  c.truth.second_weight = uniform(r, 0.1, 0.45);
  c.truth.second_ratio = chance(r, 0.5) ? uniform(r, 0.7, 0.97) : uniform(r, 1.03, 1.4);
  finish_flop(r, plan, c);
}

/// Probabilities that no oscillation made, as a function of the place (0 to 1) on the axis.
template <class F>
void barren(Random& r, const F& bright, Case& c) {
  const Plan plan = begin_flop(r, {}, c);
  finish_flop(r, plan, c);
  std::vector<double> p;
  for (const double at : c.scan.axis) p.push_back(bright(std::clamp(at / plan.span_s, 0.0, 1.0)));
  count_given(r, plan, std::move(p), c);
  c.to_be_refused = true;
}
void flat(Random& r, Case& c) {
  const double level = uniform(r, 0.01, 0.99);
  barren(r, [level](double) { return level; }, c);
}
void ramp(Random& r, Case& c) {
  const double from = uniform(r, 0, 1), to = uniform(r, 0, 1);
  const int shape = std::uniform_int_distribution<int>(0, 2)(r);
  const double power = shape == 0 ? 1 : log_uniform(r, 0.3, 3), time = log_uniform(r, 0.1, 2);
  barren(r,
         [=](double at) {
           const double part = shape == 2 ? (1 - std::exp(-at / time)) / (1 - std::exp(-1 / time)) : std::pow(at, power);
           return from + (to - from) * part;
         },
         c);
}
void saturated(Random& r, Case& c) {
  const Plan plan = begin_flop(r, {}, c);
  c.truth.*(chance(r, 0.5) ? &Apparatus::decay : &Apparatus::dephasing) = c.truth.rabi * log_uniform(r, 1, 5);
  finish_flop(r, plan, c);
}

std::uint64_t fnv1a(std::string_view text) {
  std::uint64_t hash = 14695981039346656037ULL;
  for (const char letter : text) hash = (hash ^ static_cast<unsigned char>(letter)) * 1099511628211ULL;
  return hash;
}

}  // namespace

const std::vector<Family>& families() {
  using K = Kind;
  static const std::vector<Family> all = {
      {"clean", K::single, true, {}, clean},
      {"few_points", K::single, true, {}, few_points},
      {"few_shots", K::single, true, {}, few_shots},
      {"grid_random", K::single, true, {}, grid_random},
      {"grid_geometric", K::single, true, {}, grid_geometric},
      {"grid_gapped", K::single, true, {}, grid_gapped},
      {"first_missing", K::single, true, {}, first_missing},
      {"decay", K::single, false, {}, decay},
      {"dephasing", K::single, false, {}, dephasing},
      {"leak", K::single, false, {}, leak},
      {"combinations", K::competing, false, {}, combinations},
      {"spread", K::competing, false, {}, spread},
      {"doppler", K::competing, false, {}, doppler},
      {"cloud", K::competing, false, {}, cloud},
      {"thermal", K::competing, false, {}, thermal},
      {"detuned_known", K::single, false, {}, detuned_known},
      {"detuned_free", K::single, false, {}, detuned_free},
      {"detuned_beyond_known", K::competing, false, {}, detuned_beyond_known},
      {"detuned_beyond_free", K::competing, false, {}, detuned_beyond_free},
      {"dead_time_within", K::single, true, {}, dead_time_within},
      {"dead_time_beyond", K::competing, false, {}, dead_time_beyond},
      {"references", K::single, true, {}, references},
      {"under_one_cycle", K::single, false, {}, under_one_cycle},
      {"near_limit", K::single, false, {}, near_limit},
      {"alias_outside", K::single, false, {}, alias_outside},
      {"alias_inside", K::competing, false, {}, alias_inside},
      {"alias_history", K::competing, false, {}, alias_history},
      {"low_contrast", K::single, false, {}, low_contrast},
      {"outliers", K::competing, false, {}, outliers},
      {"scatter", K::competing, false, {}, scatter},
      {"drifting", K::misfit, false, {}, drifting},
      {"two_component", K::misfit, false, {}, two_component},
      {"flat", K::barren, false, {"no_oscillation"}, flat},
      {"ramp", K::barren, false, {"no_oscillation", "monotone"}, ramp},
      {"saturated", K::competing, false, {}, saturated},
      {"line_clean", K::single, true, {}, lines::clean},
      {"line_far", K::single, true, {}, lines::far},
      {"line_power", K::single, false, {}, lines::power},
      {"line_doppler", K::competing, false, {}, lines::doppler},
      {"line_decay", K::single, false, {}, lines::decay},
      {"line_edge", K::single, false, {}, lines::edge},
      {"line_beyond", K::competing, false, {}, lines::beyond},
      {"line_side_lobe", K::competing, false, {}, lines::side_lobe},
      {"line_two", K::misfit, false, {}, lines::two},
      {"line_missing", K::barren, false, {"no_line"}, lines::missing},
  };
  return all;
}

const Family* family_named(std::string_view name) {
  for (const auto& family : families())
    if (family.name == name) return &family;
  return nullptr;
}

Case draw(const Family& family, std::uint64_t seed, std::uint64_t index) {
  const std::uint64_t name = fnv1a(family.name);
  std::seed_seq sequence{static_cast<std::uint32_t>(seed),  static_cast<std::uint32_t>(seed >> 32), static_cast<std::uint32_t>(name),
                         static_cast<std::uint32_t>(name >> 32), static_cast<std::uint32_t>(index), static_cast<std::uint32_t>(index >> 32)};
  Random random(sequence);
  Case drawn;
  drawn.family = family.name;
  drawn.seed = seed;
  drawn.index = index;
  family.draw(random, drawn);
  return drawn;
}

}  // namespace halfturn::campaign
