// SPDX-License-Identifier: Apache-2.0
#include "model/infer/box.hpp"

#include <algorithm>
#include <cmath>
#include <limits>

namespace halfturn::infer {
namespace {

using Index = Eigen::Index;
using Square = double[kMaxParameters][kMaxParameters];

/// Where the line from `from` along `direction` first meets a bound, at most 1, and which coordinate meets it (-1: none).
double reach(const Vector& from, const Vector& direction, const Vector& lower, const Vector& upper, Index& blocking) {
  double length = 1.0;
  blocking = -1;
  for (Index i = 0; i < from.size(); ++i) {
    if (direction[i] == 0.0) continue;
    const double room = (direction[i] > 0.0 ? upper[i] - from[i] : lower[i] - from[i]) / direction[i];
    if (room < length) {
      length = room < 0.0 ? 0.0 : room;
      blocking = i;
    }
  }
  return length;
}

/// The held coordinate whose release lowers the objective fastest, or -1. `unit` makes slopes comparable.
Index to_release(const Vector& slope, const Vector& unit, const Vector& step, const Vector& lower, const Vector& upper,
                 const BoxStep& state, double tolerance) {
  Index best = -1;
  double most = tolerance;
  for (Index i = 0; i < slope.size(); ++i) {
    if (state.free[i] || lower[i] == upper[i]) continue;
    const double gain = (step[i] == lower[i] ? -slope[i] : slope[i]) / unit[i];
    if (gain > most) {
      most = gain;
      best = i;
    }
  }
  return best;
}

/// Solves the symmetric system whose lower triangle is `a` in place, by Cholesky: `a` is overwritten by the factor, with the inverse of its
/// diagonal, `b` by the solution. False where the matrix is not positive definite to rounding or the solution not finite. Plain loops: a
/// library's general kernels cost several times the sums at these sizes (bench_infer).
bool solve_in_place(Square& a, double* b, int m) {
  for (int i = 0; i < m; ++i) {
    double right = b[i];
    for (int j = 0; j < i; ++j) {
      double sum = a[i][j];
      for (int k = 0; k < j; ++k) sum -= a[i][k] * a[j][k];
      a[i][j] = sum * a[j][j];
      right -= a[i][j] * b[j];
    }
    double pivot = a[i][i];
    for (int k = 0; k < i; ++k) pivot -= a[i][k] * a[i][k];
    if (!(pivot > 0.0)) return false;
    a[i][i] = 1.0 / std::sqrt(pivot);
    b[i] = right * a[i][i];
  }
  bool finite = true;
  for (int i = m - 1; i >= 0; --i) {
    double sum = b[i];
    for (int k = i + 1; k < m; ++k) sum -= a[k][i] * b[k];
    b[i] = sum * a[i][i];
    finite = finite && std::isfinite(b[i]);
  }
  return finite;
}

/// g + H p.
void slope_at(const Vector& gradient, const Matrix& hessian, const Vector& p, Vector& out) {
  const Index n = gradient.size();
  out = gradient;
  for (Index j = 0; j < n; ++j)
    if (p[j] != 0.0)
      for (Index i = 0; i < n; ++i) out[i] += hessian(i, j) * p[j];
}

}  // namespace

bool solve_free(const Matrix& hessian, const std::array<bool, kMaxParameters>& free, const Vector& right, Vector& out) {
  const Index n = hessian.rows();
  std::array<Index, kMaxParameters> where;
  std::array<double, kMaxParameters> b;
  Square reduced;
  int m = 0;
  for (Index i = 0; i < n; ++i) {
    if (!free[i]) continue;
    where[m] = i;
    b[m] = right[i];
    for (int j = 0; j <= m; ++j) reduced[m][j] = hessian(i, where[j]);
    ++m;
  }
  out.setZero(n);
  if (!solve_in_place(reduced, b.data(), m)) return false;
  for (int i = 0; i < m; ++i) out[where[i]] = b[i];
  return true;
}

bool minimise_in_box(const Vector& gradient, const Matrix& hessian, const Vector& lower, const Vector& upper, BoxStep& out) {
  const Index n = gradient.size();
  Vector p = Vector::Zero(n), unit(n);
  out.step = p;
  double largest = 0.0;
  for (Index i = 0; i < n; ++i) {
    out.free[i] = !((lower[i] == 0.0 && gradient[i] >= 0.0) || (upper[i] == 0.0 && gradient[i] <= 0.0));
    unit[i] = hessian(i, i) > 0.0 ? std::sqrt(hessian(i, i)) : 1.0;
    largest = std::max(largest, std::abs(gradient[i] / unit[i]));
  }
  // Multipliers smaller than this are rounding.
  const double tolerance = 8.0 * std::numeric_limits<double>::epsilon() * largest;
  // Each exchange lowers the objective, so no working set returns; this many only rounding could ask for.
  const int most = 10 * static_cast<int>(n) + 10;
  Vector slope = gradient, downhill(n), direction(n);
  for (int exchange = 0; exchange < most; ++exchange) {
    for (Index i = 0; i < n; ++i) downhill[i] = -slope[i];
    if (!solve_free(hessian, out.free, downhill, direction)) return false;
    Index blocking = -1;
    const double length = reach(p, direction, lower, upper, blocking);
    for (Index i = 0; i < n; ++i) p[i] += length * direction[i];
    if (blocking >= 0) p[blocking] = direction[blocking] > 0.0 ? upper[blocking] : lower[blocking];
    slope_at(gradient, hessian, p, slope);
    if (blocking >= 0) {
      out.free[blocking] = false;
      continue;
    }
    const Index released = to_release(slope, unit, p, lower, upper, out, tolerance);
    if (released < 0) break;
    out.free[released] = true;
  }
  out.step = p;
  return true;
}

void learn_curvature(const Vector& s, const Vector& y, Matrix& hessian) {
  const Index n = s.size();
  const Vector nothing = Vector::Zero(n);
  Vector expected(n);
  slope_at(nothing, hessian, s, expected);
  const double along = s.dot(expected), seen = s.dot(y);
  if (!(along > 0.0 && seen > 0.25 * along && seen < 4.0 * along)) return;
  for (Index j = 0; j < n; ++j)
    for (Index i = 0; i < n; ++i) hessian(i, j) += y[i] * y[j] / seen - expected[i] * expected[j] / along;
}

}  // namespace halfturn::infer
