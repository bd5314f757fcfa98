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
// not determine at all. 1e-14 and more held the first start of BoxBOD on a plateau (solver_test).
constexpr double kRidge = 4.0 * kEpsilon;
// Rounding in a sum of log likelihoods, relative: actual and promised decreases below it say nothing.
constexpr double kNoise = 16.0 * kEpsilon;
// Steps that promise less than this, in log likelihood, are short enough for gradients to tell of curvature: it halves the
// calls on ENSO and MGH09 (second start), while learning on all steps lost the four Lanczos starts (solver_test).
constexpr double kNear = 0.5;
// No search is given up before so many evaluations, nor while so many times the promised decrease would do.
constexpr int kFewSteps = 3;
constexpr double kHoped = 3.0;
// A search that lowers the objective by less than its tolerance in so many evaluations has stalled: where the model promises more than a
// curved valley holds, or in the objective's rounding, it would creep on to the limit.
constexpr int kPatience = 15;
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
  void about(const Minimum& at, const Vector& moved, const Vector& change, const Bounds& bounds) {
    const Index n = at.x.size();
    if (scale.size() != n) scale = Vector::Zero(n);
    scale = scale.cwiseMax(at.information.diagonal().cwiseMax(0.0).cwiseSqrt());
    const Vector unit = (scale.array() > 0.0).select(scale, 1.0);
    gradient = at.gradient.cwiseQuotient(unit);
    lower = (bounds.lower - at.x).cwiseProduct(unit);
    upper = (bounds.upper - at.x).cwiseProduct(unit);
    const Vector inverse = unit.cwiseInverse();
    hessian = inverse.asDiagonal() * at.information * inverse.asDiagonal();
    hessian.diagonal().array() += kRidge;
    learn_curvature(moved.cwiseProduct(unit), change.cwiseQuotient(unit), hessian);
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

/// Length of the gradient without the components that only press against bounds: no damped step is longer than this over the damping.
double downhill(const Model& model) {
  double sum = 0.0;
  for (Index i = 0; i < model.gradient.size(); ++i) {
    const double g = model.gradient[i];
    if (g > 0.0 ? model.lower[i] < 0.0 : model.upper[i] > 0.0) sum += g * g;
  }
  return std::sqrt(sum);
}

/// The damped step whose length is the radius to 10 %: Newton's iteration on 1/length within a bracket (More 1978, section
/// 5, with its safeguards), the derivative taken over the coordinates that are free of their bounds. Where the step ends on a bound that
/// derivative misleads, and the bracket decides.
void confine(const Model& model, double radius, BoxStep& out) {
  if (out.step.norm() <= radius) return;
  double low = 0.0, high = downhill(model) / radius, damping = 0.0;
  for (int attempt = 0; attempt < 20; ++attempt) {
    const double length = out.step.norm();
    if (attempt > 0 && std::abs(length - radius) <= 0.1 * radius) return;
    (length > radius ? low : high) = damping;
    Matrix hessian = model.hessian;
    hessian.diagonal().array() += damping;
    Vector rate;
    double next = 0.0;
    if (solve_free(hessian, out.free, out.step, rate) && out.step.dot(rate) > 0.0)
      next = damping + (length - radius) / radius * length * length / out.step.dot(rate);
    if (!(next > low && next < high)) next = std::max(1e-3 * high, std::sqrt(low * high));
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

class Search {
 public:
  Search(const Objective& objective, const Bounds& bounds, const SolverOptions& options, const Vector& start)
      : objective_(objective), bounds_(bounds), options_(options), radius_(options.first_radius) {
    best_.x = start.cwiseMax(bounds.lower).cwiseMin(bounds.upper);
    step_ = change_ = Vector::Zero(start.size());
  }

  Minimum run() {
    if (!evaluate(objective_, best_)) return best_;
    trial_ = best_;
    best_.outcome = Outcome::iteration_limit;
    for (bool fresh = true; !finished(fresh);) fresh = attempt();
    mark_bounds(bounds_, best_);
    return best_;
  }

 private:
  /// Builds the model and its free step; says whether the search ends here.
  bool finished(bool fresh) {
    if ((!fresh && radius_ < kSmallestRadius) || crept()) {
      best_.outcome = Outcome::stalled;
      return true;
    }
    if (fresh) {
      model_.about(best_, step_, change_, bounds_);
      damped_step(model_, 0.0, free_);
      best_.expected_decrease = model_.decrease(free_.step);
    }
    box_ = free_;
    if (best_.expected_decrease < std::max(options_.decrease_tolerance, kEpsilon * std::abs(best_.value))) {
      best_.outcome = Outcome::converged;
      snap();
      return true;
    }
    if (fresh && best_.evaluations > kFewSteps && best_.value - kHoped * best_.expected_decrease > options_.give_up_above) {
      best_.outcome = Outcome::given_up;
      return true;
    }
    return best_.evaluations >= options_.max_evaluations;
  }

  /// Whether the last kPatience evaluations lowered the objective by less than the tolerance.
  bool crept() {
    if (!(best_.value > mark_ - options_.decrease_tolerance)) {
      mark_ = best_.value;
      marked_ = best_.evaluations;
    }
    return best_.evaluations - marked_ >= kPatience;
  }

  /// Tries one step; true where it was taken.
  bool attempt() {
    confine(model_, radius_, box_);
    const double length = box_.step.norm(), promised = model_.decrease(box_.step);
    const double noise = kNoise * std::max(1.0, std::abs(best_.value));
    const double change = try_point(moved(best_.x, model_, box_, bounds_));
    const double ratio = promised < noise && std::abs(change) < noise ? 1.0 : -change / promised;
    const bool learn = promised < kNear && length < 0.8 * radius_ && std::abs(ratio - 1.0) < 0.75;
    if (!(ratio >= 0.25)) radius_ = shorter(model_.gradient.dot(box_.step), change, length);
    if (ratio > 0.75) radius_ = std::max(radius_, 2.0 * length);
    if (!(ratio > 1e-4)) return false;
    step_ = learn ? Vector(trial_.x - best_.x) : Vector::Zero(best_.x.size());
    change_ = trial_.gradient - best_.gradient;
    take();
    return true;
  }

  /// The change of the objective to a point, infinite where it cannot be computed.
  double try_point(const Vector& x) {
    trial_.x = x;
    trial_.evaluations = best_.evaluations;
    const bool finite = evaluate(objective_, trial_);
    best_.evaluations = trial_.evaluations;
    return finite ? trial_.value - best_.value : std::numeric_limits<double>::infinity();
  }

  void take() {
    trial_.expected_decrease = best_.expected_decrease;
    trial_.outcome = best_.outcome;
    std::swap(best_, trial_);
  }

  /// Where the last, unneeded step would end on a bound that the point all but touches, puts the point on it, so that it is
  /// flagged.
  void snap() {
    Vector x = best_.x;
    for (Index i = 0; i < x.size(); ++i) {
      if (box_.step[i] <= model_.lower[i]) x[i] = bounds_.lower[i];
      if (box_.step[i] >= model_.upper[i]) x[i] = bounds_.upper[i];
    }
    if (x == best_.x) return;
    if (try_point(x) <= std::max(options_.decrease_tolerance, kNoise * std::abs(best_.value))) take();
  }

  const Objective& objective_;
  const Bounds& bounds_;
  const SolverOptions& options_;
  Minimum best_, trial_;
  Model model_;
  BoxStep free_, box_;  // the model's own step, and that within the radius
  Vector step_, change_;  // the last step and the gradient's change along it, 0 where they teach nothing
  double radius_;
  double mark_ = std::numeric_limits<double>::infinity();  // a value reached, after so many evaluations
  int marked_ = 0;
};

}  // namespace

Bounds Bounds::none(int parameters) {
  const double infinity = std::numeric_limits<double>::infinity();
  return {Vector::Constant(parameters, -infinity), Vector::Constant(parameters, infinity)};
}

Minimum minimise(const Objective& objective, const Vector& start, const Bounds& bounds, const SolverOptions& options) {
  if (valid(start, bounds)) return Search(objective, bounds, options, start).run();
  Minimum nothing;
  nothing.x = start;
  return nothing;
}

}  // namespace halfturn::infer
