// SPDX-License-Identifier: Apache-2.0
#include "model/infer/solver.hpp"

#include <algorithm>
#include <cmath>

#include "model/infer/box.hpp"

namespace halfturn::infer {
namespace {

using Index = Eigen::Index;
constexpr double kEpsilon = std::numeric_limits<double>::epsilon();
// Added to the scaled information, whose diagonal is at most 1: the size of its rounding, so it damps only what the data do
// not determine at all.
constexpr double kRidge = 4.0 * kEpsilon;
// Rounding in a sum of log likelihoods, relative: actual and promised decreases below it say nothing.
constexpr double kNoise = 16.0 * kEpsilon;
// A trust radius of 1e-8 conditional sigmas moves no parameter that anybody could tell: the search has stalled.
constexpr double kSmallestRadius = 1e-8;

bool valid(const Vector& start, const Bounds& bounds) {
  const Index n = start.size();
  if (n < 1 || bounds.lower.size() != n || bounds.upper.size() != n || !start.allFinite()) return false;
  return (bounds.lower.array() <= bounds.upper.array()).all() &&
         (bounds.lower.array() < std::numeric_limits<double>::infinity()).all() &&
         (bounds.upper.array() > -std::numeric_limits<double>::infinity()).all();
}

bool evaluate(const Objective& objective, Minimum& at) {
  ++at.evaluations;
  return objective.evaluate(at.x, at.value, &at.gradient, &at.information) && std::isfinite(at.value) &&
         at.gradient.allFinite() && at.information.allFinite();
}

/// The quadratic model about a point, in coordinates scaled to unit information.
struct Model {
  Vector scale, gradient, lower, upper;
  Matrix hessian;

  /// Scales only grow: letting them shrink again, by 0.3 a step, lost BoxBOD from its first start (solver_test).
  void about(const Minimum& at, const Bounds& bounds) {
    const Index n = at.x.size();
    if (scale.size() != n) scale = Vector::Zero(n);
    scale = scale.cwiseMax(at.information.diagonal().cwiseMax(0.0).cwiseSqrt());
    const Vector unit = (scale.array() > 0.0).select(scale, 1.0);
    gradient = at.gradient.cwiseQuotient(unit);
    lower = (bounds.lower - at.x).cwiseProduct(unit);
    upper = (bounds.upper - at.x).cwiseProduct(unit);
    for (Index i = 0; i < n; ++i) {
      for (Index j = 0; j < n; ++j) hessian_entry(at, unit, i, j);
    }
  }

  void hessian_entry(const Minimum& at, const Vector& unit, Index i, Index j) {
    if (hessian.rows() != at.x.size()) hessian.resize(at.x.size(), at.x.size());
    hessian(i, j) = at.information(i, j) / (unit[i] * unit[j]) + (i == j ? kRidge : 0.0);
  }

  Vector unscaled(const Vector& step) const { return step.cwiseQuotient((scale.array() > 0.0).select(scale, 1.0)); }
  double decrease(const Vector& step) const { return -gradient.dot(step) - 0.5 * step.dot(hessian * step); }
};

/// The step of the model with damping added to its diagonal; more damping where the matrix is singular to rounding.
double damped_step(const Model& model, double damping, BoxStep& out) {
  Matrix hessian = model.hessian;
  hessian.diagonal().array() += damping;
  while (!minimise_in_box(model.gradient, hessian, model.lower, model.upper, out)) {
    const double more = std::max(1e-14, 9.0 * damping);
    hessian.diagonal().array() += more;
    damping += more;
    if (!(damping < 1e6)) break;
  }
  return damping;
}

/// The damped step whose length is the radius to 10 %: Newton's iteration on 1/length within a bracket (More 1978, section
/// 5), the derivative taken over the coordinates that are free of their bounds.
void confine(const Model& model, double radius, BoxStep& out) {
  double low = 0.0, high = std::numeric_limits<double>::infinity(), damping = 0.0;
  for (int attempt = 0; attempt < 20; ++attempt) {
    const double length = out.step.norm();
    if (attempt > 0 && std::abs(length - radius) <= 0.1 * radius) return;
    if (attempt == 0 && length <= radius) return;
    (length > radius ? low : high) = damping;
    Matrix hessian = model.hessian;
    hessian.diagonal().array() += damping;
    Vector rate;
    double next = 0.0;
    if (solve_free(hessian, out.free, out.step, rate) && out.step.dot(rate) > 0.0) {
      next = damping + (length - radius) / radius * length * length / out.step.dot(rate);
    }
    if (!(next > low && next < high)) next = std::isfinite(high) ? 0.5 * (low + high) : std::max(10.0 * damping, 1e-3);
    damping = damped_step(model, next, out);
  }
  if (out.step.norm() > radius) out.step *= radius / out.step.norm();
}

/// How far to trust the model after a step that fell short: where a parabola through value, slope and the new value has its
/// minimum, within a tenth and a half of the step.
double shorter(double slope, double change, double length) {
  const double parabola = std::isfinite(change) ? -0.5 * slope / (change - slope) : 0.25;
  return length * std::clamp(parabola, 0.1, 0.5);
}

void mark_bounds(const Bounds& bounds, Minimum& at) {
  for (Index i = 0; i < at.x.size(); ++i) {
    const bool low = at.x[i] <= bounds.lower[i], high = at.x[i] >= bounds.upper[i];
    at.at_bound[i] = static_cast<signed char>(low && high ? 2 : low ? -1 : high ? 1 : 0);
  }
}

/// The point a scaled step away, exactly on a bound where the step ends on it.
Vector moved(const Vector& from, const Model& model, const BoxStep& box, const Bounds& bounds) {
  Vector x = from + model.unscaled(box.step);
  for (Index i = 0; i < x.size(); ++i) {
    if (box.step[i] <= model.lower[i]) x[i] = bounds.lower[i];
    if (box.step[i] >= model.upper[i]) x[i] = bounds.upper[i];
  }
  return x.cwiseMax(bounds.lower).cwiseMin(bounds.upper);
}

}  // namespace

Bounds Bounds::none(int parameters) {
  const double infinity = std::numeric_limits<double>::infinity();
  return {Vector::Constant(parameters, -infinity), Vector::Constant(parameters, infinity)};
}

Minimum minimise(const Objective& objective, const Vector& start, const Bounds& bounds, const SolverOptions& options) {
  Minimum best;
  best.x = start;
  if (!valid(start, bounds)) return best;
  best.x = start.cwiseMax(bounds.lower).cwiseMin(bounds.upper);
  if (!evaluate(objective, best)) return best;

  Model model;
  BoxStep box;
  Minimum trial = best;
  double radius = options.first_radius;
  bool fresh = true;
  best.outcome = Outcome::iteration_limit;
  while (true) {
    if (fresh) {
      model.about(best, bounds);
      damped_step(model, 0.0, box);
      best.expected_decrease = model.decrease(box.step);
      if (best.expected_decrease < std::max(options.decrease_tolerance, kEpsilon * std::abs(best.value))) {
        best.outcome = Outcome::converged;
        break;
      }
    } else {
      damped_step(model, 0.0, box);
    }
    if (best.evaluations >= options.max_evaluations) break;
    confine(model, radius, box);
    const double length = box.step.norm(), promised = model.decrease(box.step);
    trial.x = moved(best.x, model, box, bounds);
    trial.evaluations = best.evaluations;
    const bool finite = evaluate(objective, trial);
    best.evaluations = trial.evaluations;
    const double change = finite ? trial.value - best.value : std::numeric_limits<double>::infinity();
    const double noise = kNoise * std::max(1.0, std::abs(best.value));
    const double ratio = promised < noise && std::abs(change) < noise ? 1.0 : -change / promised;

    if (!(ratio >= 0.25)) radius = shorter(model.gradient.dot(box.step), change, length);
    if (ratio > 0.75) radius = std::max(radius, 2.0 * length);
    fresh = ratio > 1e-4;
    if (fresh) {
      trial.expected_decrease = best.expected_decrease;
      trial.outcome = best.outcome;
      best = trial;
    } else if (radius < kSmallestRadius) {
      best.outcome = Outcome::stalled;
      break;
    }
  }
  mark_bounds(bounds, best);
  return best;
}

}  // namespace halfturn::infer
