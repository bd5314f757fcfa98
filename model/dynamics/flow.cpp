// SPDX-License-Identifier: Apache-2.0
#include "model/dynamics/flow.hpp"

#include <algorithm>
#include <cmath>
#include <limits>

#include "model/quantity/clones.hpp"

namespace halfturn::dynamics::detail {
namespace {

// The Taylor series runs to the 12th power of a matrix of norm at most 1/4: what is left out is below (1/4)^13/13! = 2.4e-18.
constexpr double kSeriesNorm = 0.25;
constexpr int kSeriesDegree = 12;

/// c += a b, 4 by 4, column by column.
HALFTURN_INLINE void add_product(const double* a, const double* b, double* c) {
  for (int column = 0; column < 4; ++column)
    for (int k = 0; k < 4; ++k)
      for (int row = 0; row < 4; ++row) c[4 * column + row] += a[4 * k + row] * b[4 * column + k];
}

HALFTURN_INLINE void add_product_vector(const double* a, const double* b, double* c) {
  for (int k = 0; k < 4; ++k)
    for (int row = 0; row < 4; ++row) c[row] += a[4 * k + row] * b[k];
}

void generator(const Problem& p, double t, double* a) {
  const double g = p.coherence, w = p.rabi, d = p.detuning;
  const double columns[16] = {-g, -d, 0, 0, d, -g, -0.5 * w, 0.5 * w, 0, w, -p.leaving, p.decay, 0, -w, 0, 0};
  for (int i = 0; i < 16; ++i) a[i] = columns[i] * t;
}

/// dA/d(rate), column by column.
constexpr double kGeneratorBy[kRateCount][16] = {
    {0, 0, 0, 0, 0, 0, -0.5, 0.5, 0, 1, 0, 0, 0, -1, 0, 0},
    {0, -1, 0, 0, 1, 0, 0, 0, 0, 0, 0, 0, 0, 0, 0, 0},
    {-0.5, 0, 0, 0, 0, -0.5, 0, 0, 0, 0, -1, 1, 0, 0, 0, 0},
    {-0.5, 0, 0, 0, 0, -0.5, 0, 0, 0, 0, -1, 0, 0, 0, 0, 0},
    {-1, 0, 0, 0, 0, -1, 0, 0, 0, 0, 0, 0, 0, 0, 0, 0},
};

double norm(const double* a) {
  double largest = 0;
  for (int column = 0; column < 4; ++column) {
    double sum = 0;
    for (int row = 0; row < 4; ++row) sum += std::abs(a[4 * column + row]);
    if (!(sum <= largest)) largest = sum;  // a NaN stays
  }
  return largest;
}

}  // namespace

HALFTURN_CLONES void series(const double* a, double t, const Wanted& wanted, Propagator& result) {
  Propagator term{}, next;
  for (int i = 0; i < 4; ++i) term.value[5 * i] = 1;
  result = term;
  for (int n = 1; n <= kSeriesDegree; ++n) {
    const double scale = 1.0 / n;
    next = Propagator{};
    add_product(a, term.value, next.value);
    for (int r = 0; r < kRateCount; ++r) {
      if (!wanted[kRateRow + r]) continue;
      double by[16];
      for (int i = 0; i < 16; ++i) by[i] = kGeneratorBy[r][i] * t;
      add_product(a, term.by_rate[r], next.by_rate[r]);
      add_product(by, term.value, next.by_rate[r]);
      for (int i = 0; i < 16; ++i) result.by_rate[r][i] += (next.by_rate[r][i] *= scale);
    }
    for (int i = 0; i < 16; ++i) result.value[i] += (next.value[i] *= scale);
    term = next;
  }
}

HALFTURN_CLONES void square(const Wanted& wanted, Propagator& result) {
  const Propagator root = result;
  result = Propagator{};
  add_product(root.value, root.value, result.value);
  for (int r = 0; r < kRateCount; ++r) {
    if (!wanted[kRateRow + r]) continue;
    add_product(root.by_rate[r], root.value, result.by_rate[r]);
    add_product(root.value, root.by_rate[r], result.by_rate[r]);
  }
}

HALFTURN_CLONES void apply(const Propagator& propagator, const Wanted& wanted, FlowState& state) {
  const FlowState before = state;
  state = FlowState{};
  add_product_vector(propagator.value, before.value, state.value);
  for (int r = 0; r < kRateCount; ++r) {
    if (!wanted[kRateRow + r]) continue;
    add_product_vector(propagator.value, before.by_rate[r], state.by_rate[r]);
    add_product_vector(propagator.by_rate[r], before.value, state.by_rate[r]);
  }
}

void propagate(const Problem& problem, const Wanted& wanted, double length_s, Propagator& result) {
  double a[16];
  generator(problem, length_s, a);
  const double size = norm(a);
  int squarings = 0;
  if (!std::isfinite(size)) {
    std::fill_n(result.value, 16, std::numeric_limits<double>::quiet_NaN());
    for (auto& by : result.by_rate) std::fill_n(by, 16, std::numeric_limits<double>::quiet_NaN());
    return;
  }
  if (size > kSeriesNorm) squarings = std::max(0, std::ilogb(size / kSeriesNorm) + 1);
  const double step = std::ldexp(length_s, -squarings);
  generator(problem, step, a);
  series(a, step, wanted, result);
  for (int i = 0; i < squarings; ++i) square(wanted, result);
}

FlowState initial_state(const Problem& problem) {
  FlowState state{};
  state.value[2] = problem.excited;
  state.value[3] = problem.ground;
  return state;
}

double seen(const Problem& p, const FlowState& state, int row) {
  if (row == kLengthRow) {
    const double* y = state.value;
    return p.bright ? -(0.5 * p.rabi * y[1] + p.decay * y[2]) : -0.5 * p.rabi * y[1] - p.leaving * y[2];
  }
  if (row == kValueRow) return p.bright ? 1 - state.value[3] : state.value[2];
  const double* by = state.by_rate[row - kRateRow];
  return p.bright ? -by[3] : by[2];
}

}  // namespace halfturn::dynamics::detail
