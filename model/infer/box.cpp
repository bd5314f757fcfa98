// SPDX-License-Identifier: Apache-2.0
#include "model/infer/box.hpp"

#include <Eigen/Cholesky>
#include <cmath>
#include <limits>

namespace halfturn::infer {
namespace {

using Index = Eigen::Index;

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

}  // namespace

bool solve_free(const Matrix& hessian, const std::array<bool, kMaxParameters>& free, const Vector& right, Vector& out) {
  const Index n = hessian.rows();
  std::array<Index, kMaxParameters> where{};
  Index m = 0;
  for (Index i = 0; i < n; ++i) {
    if (free[i]) where[m++] = i;
  }
  out = Vector::Zero(n);
  if (m == 0) return true;
  Matrix reduced(m, m);
  Vector b(m);
  for (Index i = 0; i < m; ++i) {
    b[i] = right[where[i]];
    for (Index j = 0; j < m; ++j) reduced(i, j) = hessian(where[i], where[j]);
  }
  const Eigen::LLT<Matrix> factor(reduced);
  if (factor.info() != Eigen::Success) return false;
  factor.solveInPlace(b);
  if (!b.allFinite()) return false;
  for (Index i = 0; i < m; ++i) out[where[i]] = b[i];
  return true;
}

bool minimise_in_box(const Vector& gradient, const Matrix& hessian, const Vector& lower, const Vector& upper, BoxStep& out) {
  const Index n = gradient.size();
  Vector p = Vector::Zero(n);
  out.step = p;
  for (Index i = 0; i < n; ++i) {
    out.free[i] = !((lower[i] == 0.0 && gradient[i] >= 0.0) || (upper[i] == 0.0 && gradient[i] <= 0.0));
  }
  const Vector diagonal = hessian.diagonal();
  const Vector unit = (diagonal.array() > 0.0).select(diagonal.cwiseAbs().cwiseSqrt(), 1.0);
  // Multipliers smaller than this are rounding.
  const double tolerance = 8.0 * std::numeric_limits<double>::epsilon() * gradient.cwiseQuotient(unit).cwiseAbs().maxCoeff();
  // Each exchange lowers the objective, so no working set returns; this many only rounding could ask for.
  const int most = 10 * static_cast<int>(n) + 10;
  for (int exchange = 0; exchange < most; ++exchange) {
    const Vector slope = gradient + hessian * p;
    Vector direction;
    if (!solve_free(hessian, out.free, -slope, direction)) return false;
    Index blocking = -1;
    const double length = reach(p, direction, lower, upper, blocking);
    p += length * direction;
    if (blocking >= 0) {
      p[blocking] = direction[blocking] > 0.0 ? upper[blocking] : lower[blocking];
      out.free[blocking] = false;
      continue;
    }
    const Index released = to_release(gradient + hessian * p, unit, p, lower, upper, out, tolerance);
    if (released < 0) break;
    out.free[released] = true;
  }
  out.step = p;
  return true;
}

void learn_curvature(const Vector& s, const Vector& y, Matrix& hessian) {
  const Vector expected = hessian * s;
  const double along = s.dot(expected), seen = s.dot(y);
  if (!(along > 0.0 && seen > 0.25 * along && seen < 4.0 * along)) return;
  hessian += y * (y.transpose() / seen) - expected * (expected.transpose() / along);
}

}  // namespace halfturn::infer
