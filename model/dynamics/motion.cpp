// SPDX-License-Identifier: Apache-2.0
#include "model/dynamics/motion.hpp"

#include <algorithm>
#include <cmath>
#include <limits>
#include <numbers>

#include "model/dynamics/four.hpp"
#include "model/quantity/clones.hpp"

namespace halfturn::dynamics::detail {
namespace {

constexpr std::size_t kWidth = 8;          // lanes
constexpr double kTail = 27.6;             // -log of the weight, 1e-12, that the last level takes for all above it
constexpr std::size_t kExtraLevels = 3;    // keep the derivative by nbar at nbar = 0, where level 1 has weight 0 and slope 1

std::size_t padded(std::size_t count) { return (count + kWidth - 1) / kWidth * kWidth; }

struct Moments {
  double weight, by_weight;
};

/// Levels of one mode that matter; 0 for too many.
std::size_t level_count(double mean_phonons) {
  const double levels = mean_phonons > 0 ? std::ceil(kTail / std::log1p(1 / mean_phonons)) : 0;
  const bool few = levels + kExtraLevels <= static_cast<double>(kMostLevels);
  return few ? static_cast<std::size_t>(levels) + kExtraLevels : 0;
}

void thermal_weights(double mean_phonons, double phonon_ratio, WeightedCouplings& levels) {
  const double norm = 1 / (1 + mean_phonons), r = mean_phonons * norm;
  const std::size_t last = levels.size() - 1;
  double before = 0, weight = norm, above = 1, above_before = 1;  // above = r^n
  for (std::size_t n = 0; n < last; ++n) {
    const double order = static_cast<double>(n);
    levels.weight[n] = weight;
    levels.by_weight[n] = phonon_ratio * (order * before - (order + 1) * weight) * norm;
    before = weight;
    weight *= r;
    above_before = above;
    above *= r;
  }
  levels.weight[last] = above;
  levels.by_weight[last] = phonon_ratio * static_cast<double>(last) * above_before * norm * norm;
}

/// Fills `levels` with those of one mode.
Status mode_levels(const Ensemble& ensemble, std::size_t index, bool excited, EnsembleWorkspace& workspace,
                   WeightedCouplings& levels) {
  const Mode& mode = ensemble.modes[index];
  const double mean_phonons = ensemble.parameter * mode.phonon_ratio;
  const std::size_t count = level_count(mean_phonons);
  if (count == 0) return Status::too_many_members;
  Couplings& couplings = workspace.couplings[index];
  extend_couplings(mode.lamb_dicke, std::abs(mode.sideband), count, couplings);
  levels.resize(count);
  thermal_weights(mean_phonons, mode.phonon_ratio, levels);
  const bool loses = excited ? mode.sideband > 0 : mode.sideband < 0;
  const std::size_t order = loses ? static_cast<std::size_t>(std::abs(mode.sideband)) : 0;  // levels below it do not couple
  for (std::size_t n = 0; n < count; ++n) levels.x[n] = n < order ? 0 : couplings.value[n - order];
  return Status::ok;
}

double span_of(const WeightedCouplings& levels) {
  const auto [low, high] = std::minmax_element(levels.x.begin(), levels.x.end());
  return *high - *low;
}

/// Merges `levels` in place where that leaves fewer, and costs less than the levels themselves or these are too many.
void merge_where_cheaper(double phase, double cost, EnsembleWorkspace& workspace, WeightedCouplings& levels) {
  const double span = span_of(levels);
  const std::size_t points = span > 0 ? merged_size(phase, span) : 1, count = levels.size();
  if (points >= count) return;
  const double own = cost * static_cast<double>(count);
  const double after = static_cast<double>(points) * (static_cast<double>(count + points) + cost);
  if (!(after < own) && std::isfinite(cost) && count <= kMostMembers) return;
  merge(levels, points, workspace.scratch, workspace.merged);
  levels = workspace.merged;  // copied, so that each keeps its memory
}

void multiply(const WeightedCouplings& a, const WeightedCouplings& b, WeightedCouplings& product) {
  product.resize(a.size() * b.size());
  std::size_t at = 0;
  for (std::size_t i = 0; i < a.size(); ++i)
    for (std::size_t j = 0; j < b.size(); ++j, ++at) {
      product.x[at] = a.x[i] * b.x[j];
      product.weight[at] = a.weight[i] * b.weight[j];
      product.by_weight[at] = a.by_weight[i] * b.weight[j] + a.weight[i] * b.by_weight[j];
    }
}

}  // namespace

/// One term of the moments: sums of weights times now, with (before, now) carried on to the next Chebyshev polynomial.
HALFTURN_CLONES Moments next_moment(const double* u, double* before, double* now, const double* weight, const double* by_weight,
                                    std::size_t count) {
  Four sum[2] = {}, by_sum[2] = {};
  for (std::size_t i = 0; i < count; i += kWidth)
    for (std::size_t half = 0; half < 2; ++half) {
      const std::size_t j = i + 4 * half;
      Four value, argument, last, share, share_slope;
      load(now + j, value);
      load(u + j, argument);
      load(before + j, last);
      load(weight + j, share);
      load(by_weight + j, share_slope);
      sum[half] += share * value;
      by_sum[half] += share_slope * value;
      store(2 * argument * value - last, now + j);
      store(value, before + j);
    }
  const Four both = sum[0] + sum[1], by_both = by_sum[0] + by_sum[1];
  return {total(both), total(by_both)};
}

HALFTURN_CLONES void add_moment(const double* u, double* before, double* now, Moments moment, std::size_t count, double* weight,
                                double* by_weight) {
  for (std::size_t i = 0; i < count; ++i) {
    const double value = now[i], next = 2 * u[i] * value - before[i];
    weight[i] += moment.weight * value;
    by_weight[i] += moment.by_weight * value;
    before[i] = value;
    now[i] = next;
  }
}

void WeightedCouplings::resize(std::size_t count) {
  for (auto* row : {&x, &weight, &by_weight}) row->assign(count, 0.0);
}

void extend_couplings(double lamb_dicke, int order, std::size_t levels, Couplings& couplings) {
  auto& value = couplings.value;
  if (couplings.lamb_dicke != lamb_dicke || couplings.order != order) value.clear();
  couplings.lamb_dicke = lamb_dicke;
  couplings.order = order;
  const double y = lamb_dicke * lamb_dicke, s = order;
  const std::size_t had = value.size();
  if (had >= levels) return;
  value.resize(levels);
  for (std::size_t level = had; level < levels; ++level) {
    if (level == 0) {
      value[0] = std::exp(-0.5 * y);
      for (int i = 1; i <= order; ++i) value[0] *= lamb_dicke / std::sqrt(static_cast<double>(i));
      continue;
    }
    const double n = static_cast<double>(level - 1), before = level > 1 ? value[level - 2] : 0;
    value[level] = ((2 * n + 1 + s - y) * value[level - 1] - std::sqrt(n * (n + s)) * before) / std::sqrt((n + 1) * (n + 1 + s));
  }
}

// Interpolating cos(phase x) over a half-width h leaves the Bessel functions J_k(a), a = phase h, of k >= points. Their sum is
// below 1e-12 from 12, 18, 31, 59, 142, 360, 1089 points on for a = 1, 3, 10, 30, 100, 300, 1000 (scipy.special.jv); the
// formula gives 17, 23, 36, 63, 146, 362, 1088.
std::size_t merged_size(double phase, double span) {
  const double a = std::min(0.5 * phase * span, 1e6);
  return static_cast<std::size_t>(std::ceil(a + 8 * std::cbrt(a) + 8));
}

// With T_k the Chebyshev polynomials on the span, the interpolant through the points x_i = cos(pi (i + 1/2)/points) has the
// mean sum_i W_i f(x_i), W_i = (m_0 + 2 sum_k m_k T_k(x_i))/points, m_k = sum of levels' weights times T_k. Source: L. N.
// Trefethen, Approximation Theory and Approximation Practice (2013), chapters 3 and 5.
void merge(const WeightedCouplings& levels, std::size_t points, std::vector<double>& scratch, WeightedCouplings& merged) {
  const auto [low, high] = std::minmax_element(levels.x.begin(), levels.x.end());
  const double middle = 0.5 * (*low + *high), half = 0.5 * (*high - *low);
  const std::size_t count = levels.size(), stride = padded(std::max(count, points));
  if (scratch.size() < 5 * stride) scratch.resize(5 * stride);
  double *u = scratch.data(), *before = u + stride, *now = before + stride, *weight = now + stride, *by_weight = weight + stride;
  std::fill_n(u, 5 * stride, 0.0);
  merged.resize(points);
  std::vector<double>&moment = merged.weight, &by_moment = merged.by_weight;
  for (std::size_t i = 0; i < count; ++i) {
    u[i] = half > 0 ? (levels.x[i] - middle) / half : 0;
    before[i] = u[i];  // T_-1 = T_1
    now[i] = 1;
    weight[i] = levels.weight[i];
    by_weight[i] = levels.by_weight[i];
  }
  for (std::size_t k = 0; k < points; ++k) {
    const Moments m = next_moment(u, before, now, weight, by_weight, padded(count));
    const double norm = (k == 0 ? 1.0 : 2.0) / static_cast<double>(points);
    moment[k] = norm * m.weight;
    by_moment[k] = norm * m.by_weight;
  }
  std::fill_n(weight, 2 * stride, 0.0);
  for (std::size_t i = 0; i < points; ++i) {
    u[i] = std::cos(std::numbers::pi * (static_cast<double>(i) + 0.5) / static_cast<double>(points));
    merged.x[i] = middle + half * u[i];
    before[i] = u[i];
    now[i] = 1;
  }
  for (std::size_t k = 0; k < points; ++k) add_moment(u, before, now, {moment[k], by_moment[k]}, points, weight, by_weight);
  std::copy_n(weight, points, merged.weight.begin());
  std::copy_n(by_weight, points, merged.by_weight.begin());
}

Status thermal_members(const Ensemble& ensemble, const Demand& demand, EnsembleWorkspace& workspace) {
  const std::size_t modes = ensemble.modes.size();
  if (workspace.couplings.size() < modes) workspace.couplings.resize(modes);
  WeightedCouplings &levels = workspace.levels, &mode = workspace.mode;
  for (std::size_t index = 0; index < modes; ++index) {
    const Status status = mode_levels(ensemble, index, demand.excited, workspace, index == 0 ? levels : mode);
    if (status != Status::ok) return status;
    if (index == 0) continue;
    // In a product each level costs what the other mode has of them.
    merge_where_cheaper(demand.coupling_phase, demand.cost + static_cast<double>(mode.size()), workspace, levels);
    merge_where_cheaper(demand.coupling_phase, demand.cost + static_cast<double>(levels.size()), workspace, mode);
    if (levels.size() * mode.size() > kMostLevels) {
      const double any = std::numeric_limits<double>::infinity();
      merge_where_cheaper(demand.coupling_phase, any, workspace, levels);
      merge_where_cheaper(demand.coupling_phase, any, workspace, mode);
    }
    if (levels.size() * mode.size() > kMostLevels) return Status::too_many_members;
    multiply(levels, mode, workspace.product);
    levels = workspace.product;
  }
  merge_where_cheaper(demand.coupling_phase, demand.cost, workspace, levels);
  if (levels.size() > kMostMembers) return Status::too_many_members;
  Members& members = workspace.members;
  members.resize(levels.size());
  std::copy(levels.x.begin(), levels.x.end(), members.scale.begin());
  std::copy(levels.weight.begin(), levels.weight.end(), members.weight.begin());
  std::copy(levels.by_weight.begin(), levels.by_weight.end(), members.by_weight.begin());
  return Status::ok;
}

OfParameter mean_thermal_coupling(const Ensemble& ensemble, EnsembleWorkspace& workspace) {
  const std::size_t modes = ensemble.modes.size();
  if (workspace.couplings.size() < modes) workspace.couplings.resize(modes);
  OfParameter product{1, 0};
  for (std::size_t index = 0; index < modes; ++index) {
    WeightedCouplings& levels = workspace.mode;
    constexpr double kNaN = std::numeric_limits<double>::quiet_NaN();
    if (mode_levels(ensemble, index, false, workspace, levels) != Status::ok) return {kNaN, kNaN};
    OfParameter mean{0, 0};
    for (std::size_t n = 0; n < levels.size(); ++n) {
      mean.value += levels.weight[n] * std::abs(levels.x[n]);
      mean.by_parameter += levels.by_weight[n] * std::abs(levels.x[n]);
    }
    product = {product.value * mean.value, product.by_parameter * mean.value + product.value * mean.by_parameter};
  }
  return product;
}

double lowest_coupling(const Ensemble& ensemble, EnsembleWorkspace& workspace) {
  const std::size_t modes = ensemble.modes.size();
  if (workspace.couplings.size() < modes) workspace.couplings.resize(modes);
  double product = 1;
  for (std::size_t index = 0; index < modes; ++index) {
    const Mode& mode = ensemble.modes[index];
    extend_couplings(mode.lamb_dicke, std::abs(mode.sideband), 1, workspace.couplings[index]);
    product *= workspace.couplings[index].value[0];
  }
  return product;
}

}  // namespace halfturn::dynamics::detail
